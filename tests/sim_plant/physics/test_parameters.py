"""Parameters describe themselves and refuse what can't be."""

from __future__ import annotations

from math import inf, nan

import numpy as np
import pint
import pytest

from sim_plant.physics import COUPLINGS, PHYSICS, Parameter, Tank, Tube, parameters_of

GOOD = {"area": 40e-4, "rim": 0.38, "outlet_bore": 6e-3, "pump_capacity": 70e-6}
KINDS = [*PHYSICS.values(), *COUPLINGS.values()]


def test_table_says_name_unit_default_and_meaning() -> None:
    """One entry holds all that a message about a missing parameter needs."""
    assert parameters_of(Tank)[0] == Parameter("area", "m^2", None, "horizontal area of the tank")


def test_table_tells_what_must_be_given() -> None:
    """A tube needs its two sizes; the liquid is water unless said otherwise."""
    assert {entry.name: entry.default for entry in parameters_of(Tube)} == {
        "bore": None,
        "length": None,
        "density": 998.2,
        "viscosity": 1.002e-3,
        "gravity": 9.81,
    }


@pytest.mark.parametrize("kind", KINDS)
def test_units_are_si(kind: type) -> None:
    """Every unit is one that a library of units knows, and its own base unit: no number needs converting."""
    registry: pint.UnitRegistry[float] = pint.UnitRegistry()
    for entry in parameters_of(kind):
        assert registry.Quantity(1.0, entry.unit).to_base_units().magnitude == 1.0, entry.name


@pytest.mark.parametrize("kind", PHYSICS.values())
def test_signals_have_as_many_units_as_names(kind: type) -> None:
    """No unit is missing where the plant file's reader looks for one."""
    for what in ("state", "input", "disturbance", "output"):
        assert len(getattr(kind, f"{what}_names")) == len(getattr(kind, f"{what}_units"))


@pytest.mark.parametrize(
    ("name", "value"),
    [
        ("area", 0.0),
        ("area", -1.0),
        ("area", nan),
        ("rim", inf),
        ("rim", 0.0),
        ("outlet_bore", -1e-3),
        ("pump_capacity", -1e-6),
        ("discharge", 0.0),
        ("discharge", 1.01),
        ("pump_lag_s", 0.0),
        ("pump_minimum", -0.1),
        ("pump_minimum", 1.1),
        ("gravity", nan),
    ],
)
def test_tank_refuses_impossible_sizes_by_name(name: str, value: float) -> None:
    """The message names the parameter and its value."""
    with pytest.raises(ValueError, match=rf"tank {name} is {value}"):
        Tank(**{**GOOD, name: value})


@pytest.mark.parametrize("name", ["bore", "length", "density", "viscosity", "gravity"])
def test_tube_refuses_what_is_not_positive_by_name(name: str) -> None:
    """Nothing about a tube can be zero."""
    with pytest.raises(ValueError, match=f"tube {name} is 0"):
        Tube(**{"bore": 3e-3, "length": 0.3, name: 0.0})


def test_one_bad_member_spoils_a_stack() -> None:
    """Stacked parameters are checked one by one."""
    with pytest.raises(ValueError, match="tank area"):
        Tank(**{**GOOD, "area": np.array([40e-4, -1.0])})  # type: ignore[arg-type]


def test_a_tank_may_have_neither_outlet_nor_pump() -> None:
    """A passive section is a plant's good right."""
    tank = Tank(**{**GOOD, "outlet_bore": 0.0, "pump_capacity": 0.0})
    rates = tank.derivative(np.array([0.2, 0.0]), np.array([1.0]), np.array([0.0]), np.array(0.0))
    assert rates.tolist() == [0.0, 0.0]
