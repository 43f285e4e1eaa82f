"""Quantities and units."""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gateway.plantfile import units
from gateway.plantfile.plant import Scale
from gateway.plantfile.units import UnitError


@pytest.mark.parametrize(
    ("unit", "to", "scale"),
    [
        ("cm", "m", Scale(0.01)),
        ("%", "1", Scale(0.01)),
        ("%", "fraction", Scale(0.01)),
        ("cm^3/s", "m^3/s", Scale(1e-6)),
        ("cm3/s", "m3/s", Scale(1e-6)),
        ("l/min", "m^3/s", Scale(1e-3 / 60)),
        ("degC", "K", Scale(1.0, 273.15)),
        ("°C", "K", Scale(1.0, 273.15)),
        ("kW", "W", Scale(1000.0)),
        ("W/(m^2*K)", "W/m^2/K", Scale(1.0)),
        ("/s", "1/s", Scale(1.0)),
    ],
)
def test_a_conversion_is_exact_to_fifteen_digits(unit: str, to: str, scale: Scale) -> None:
    """Factors and offsets of the units plants use; the kelvin's zero is 273.15 by its definition."""
    found = units.conversion(unit, to)
    assert found.factor == pytest.approx(scale.factor, rel=1e-14)
    assert found.offset == scale.offset


def test_fahrenheit_is_affine() -> None:
    """212 degF is where water boils, 100 degC."""
    assert units.conversion("degF", "degC").to_physics(212.0) == pytest.approx(100.0, abs=1e-9)


@pytest.mark.parametrize(("unit", "to"), [("kg", "m"), ("cm", "m^2"), ("%", "m"), ("1/s", "1")])
def test_another_dimension_is_refused(unit: str, to: str) -> None:
    """The message names the dimension that is wanted."""
    with pytest.raises(UnitError, match="dimension"):
        units.conversion(unit, to)


@pytest.mark.parametrize("unit", ["dB", "dBm"])
def test_a_logarithmic_unit_is_refused(unit: str) -> None:
    """A decibel is no affine scale, so limits and spans would mean nothing."""
    with pytest.raises(UnitError, match="linear"):
        units.conversion(unit, "1" if unit == "dB" else "W")


def test_an_unknown_unit_brings_the_nearest() -> None:
    """A slip of one letter finds its unit."""
    with pytest.raises(UnitError) as caught:
        units.check_unit("dgeC")
    assert caught.value.suggestion == "degC"


@pytest.mark.parametrize(
    "text", ["9**9**9", "m^99", "m^9^9^9", "2*m", "(" * 30, "m" * 50, "__import__", "lambda: 1", "cm;", "1e9"]
)
def test_arithmetic_is_no_unit(text: str) -> None:
    """Nothing that would have to be computed reaches the unit parser."""
    with pytest.raises(UnitError):
        units.check_unit(text)


@pytest.mark.parametrize(
    ("quantity", "unit", "value"),
    [
        ("40 cm^2", "m^2", 0.004),
        ("100 mm", "cm", 10.0),
        ("20 degC", "K", 293.15),
        ("50%", "%", 50.0),
        ("-5 cm", "m", -0.05),
    ],
)
def test_a_quantity_comes_in_the_unit_asked_for(quantity: str, unit: str, value: float) -> None:
    """Value times factor plus offset, without the dust of binary fractions."""
    assert units.value_in(quantity, unit) == value


@pytest.mark.parametrize(
    "text", ["", "cm", "40", "fast", "nan cm", "inf cm", "1e999 cm", "1e400 cm", "4 0 cm", "0x10 cm"]
)
def test_a_text_that_is_no_quantity_is_refused(text: str) -> None:
    """A number must be there, finite, and followed by its unit: "40" alone could mean anything."""
    with pytest.raises(UnitError):
        units.value_in(text, "cm")


def test_a_difference_has_no_offset() -> None:
    """2 K of noise are 2 degC of noise, not -271.15."""
    assert units.difference_in("2 K", "degC") == 2.0


@pytest.mark.parametrize(
    ("quantity", "unit", "rate"),
    [
        ("20 %/s", "%", 20.0),
        ("4 cm/s", "mm", 40.0),
        ("120 K/min", "degC", 2.0),
        ("2 degC/s", "degC", 2.0),
        ("0.2/s", "1", 0.2),
    ],
)
def test_a_rate_comes_per_second(quantity: str, unit: str, rate: float) -> None:
    """Any time unit, offsets left out."""
    assert units.rate_in(quantity, unit) == pytest.approx(rate, rel=1e-14)


@pytest.mark.parametrize("quantity", ["20 %", "20 cm/s", "20 %/s^2", "20 s"])
def test_a_rate_of_something_else_is_refused(quantity: str) -> None:
    """It must be this unit per time."""
    with pytest.raises(UnitError):
        units.rate_in(quantity, "%")


def test_a_time_comes_in_seconds() -> None:
    """Milliseconds and hours alike."""
    assert (units.seconds("500 ms"), units.seconds("2 h")) == (0.5, 7200.0)


@settings(deadline=None)
@given(value=st.floats(-1e6, 1e6), pair=st.sampled_from([("cm", "m"), ("degF", "K"), ("l/min", "m^3/s"), ("%", "1")]))
def test_a_scale_undoes_itself(value: float, pair: tuple[str, str]) -> None:
    """Law: to the physics and back is the same value, to rounding of the larger of value and offset."""
    scale = units.conversion(*pair)
    assert scale.to_engineering(scale.to_physics(value)) == pytest.approx(value, rel=1e-12, abs=1e-9)
