"""Signals: units, defaults, and what must hold between their numbers."""

from math import inf

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gateway.plantfile.plant import HoldAction, Instrument, Profile, Role, SafeHold, Scale, Signal
from gateway.plantfile.resolve_signal import DEFAULT_SOFT_PRICE, KEYS_OF_ROLE
from gateway.plantfile.tables import SignalTable
from tests.gateway.plantfile.rig import GOOD, edited, mistakes_of, only_mistake, plant_of

TEMPERATURE = "kinds.oven.signals.temperature"
HEATER = "kinds.oven.signals.heater"
WARE = """
[kinds.oven.signals.ware]
role = "unmeasured_disturbance"
unit = "W"
span = [0, 500]
profile = { low = 0, high = "0.2 kW", mean_low = "1 min", mean_high = "30 s" }
"""


def signal(text: str, name: str) -> Signal:
    """Return one signal of the first section of a right text."""
    return next(signal for signal in plant_of(text).sections[0].signals if signal.name == name)


def test_a_measured_signal_resolves() -> None:
    """Numbers in its own unit, its scale to kelvin."""
    found = signal(GOOD, "temperature")
    assert (found.tag, found.role, found.unit) == ("oven-1.temperature", Role.MEASURED, "degC")
    assert (found.span, found.soft, found.target, found.price) == ((0.0, 400.0), (50.0, 350.0), 200.0, 1.0)
    assert found.scale == Scale(1.0, 273.15)


def test_a_driven_signal_resolves() -> None:
    """Hard limits, rate and safe hold."""
    found = signal(GOOD, "heater")
    assert (found.hard, found.rate_per_s, found.scale.factor) == ((0.0, 90.0), 20.0, 0.01)
    assert found.safe_hold == SafeHold(HoldAction.KEEP)


def test_absent_limits_are_infinite_and_absent_choices_none() -> None:
    """As `plant.Signal` promises."""
    found = signal(GOOD, "temperature")
    assert (found.hard, found.rate_per_s, found.jump_per_s) == ((-inf, inf), inf, inf)
    assert (found.safe_hold, found.profile, found.instrument) == (None, None, Instrument())


def test_quantities_are_converted_to_the_signal_s_unit() -> None:
    """Values with their offset, differences and rates without."""
    text = edited("target = 200", 'target = "473.15 K"\nnoise = "0.5 K"\njump = "60 K/min"')
    found = signal(text, "temperature")
    assert (found.target, found.noise, found.jump_per_s) == pytest.approx((200.0, 0.5, 1.0), rel=1e-12)


def test_a_profile_resolves() -> None:
    """Levels in the signal's unit, dwell times in seconds."""
    assert signal(edited("[[sections]]", WARE + "[[sections]]"), "ware").profile == Profile(0.0, 200.0, 60.0, 30.0)


def test_a_transmitter_resolves_and_gives_the_noise_its_default() -> None:
    """What the estimator is told is what the simulated transmitter does, unless it is told otherwise."""
    text = edited("price = 1", 'price = 1\ninstrument = { noise = 0.2, resolution = "0.1 K", lag = "2 s" }')
    found = signal(text, "temperature")
    assert (found.instrument, found.noise) == (Instrument(0.2, 0.1, 2.0), 0.2)


@pytest.mark.parametrize(
    ("written", "hold"),
    [
        ('"keep"', SafeHold(HoldAction.KEEP)),
        ('"hand_back"', SafeHold(HoldAction.HAND_BACK)),
        ('{ ramp_to = "30 %", at = "10 %/s" }', SafeHold(HoldAction.RAMP, 30.0, 10.0)),
        ('{ ramp_to = 30, at = "6 %/min" }', SafeHold(HoldAction.RAMP, 30.0, 0.1)),
    ],
)
def test_a_safe_hold_has_three_forms(written: str, hold: SafeHold) -> None:
    """Keep, hand back, ramp."""
    assert signal(edited('safe_hold = "keep"', f"safe_hold = {written}"), "heater").safe_hold == hold


def test_a_soft_band_has_a_price_unless_it_is_given_one() -> None:
    """A band without a price would be silently without effect."""
    assert signal(GOOD, "temperature").soft_price == DEFAULT_SOFT_PRICE
    assert signal(edited("price = 1", "price = 1\nsoft_price = 3"), "temperature").soft_price == 3.0


@pytest.mark.parametrize(("span", "rest"), [("[0, 400]", 0.0), ("[20, 400]", 20.0), ("[-50, 400]", 0.0)])
def test_rest_is_zero_or_the_nearest_end_of_the_span(span: str, rest: float) -> None:
    """Unless the file says otherwise."""
    assert signal(edited("span = [0, 400]", f"span = {span}"), "temperature").rest == rest


@pytest.mark.parametrize(
    ("old", "new", "place"),
    [
        ("span = [0, 400]", "span = [400, 0]", f"{TEMPERATURE}.span"),
        ("span = [0, 400]", "span = [0, 0]", f"{TEMPERATURE}.span"),
        ("soft = [50, 350]", "soft = [350, 50]", f"{TEMPERATURE}.soft"),
        ("soft = [50, 350]", "soft = [50, 401]", f"{TEMPERATURE}.soft"),
        ("hard = [0, 90]", "hard = [90, 0]", f"{HEATER}.hard"),
        ("hard = [0, 90]", "hard = [0, 101]", f"{HEATER}.hard"),
        ("hard = [0, 90]", "hard = [0, 90]\nsoft = [0, 95]", f"{HEATER}.soft"),
        ("target = 200", "target = 20", f"{TEMPERATURE}.target"),
        ("target = 200", "target = 360", f"{TEMPERATURE}.target"),
        ("target = 200", 'target = "200 K"', f"{TEMPERATURE}.target"),
        ("price = 1", "price = 1\nrest = 500", f"{TEMPERATURE}.rest"),
        ("price = 1\n", "", f"{TEMPERATURE}.price"),
        ("target = 200\n", "", f"{TEMPERATURE}.target"),
        ("hard = [0, 90]", "hard = [0, 90]\nsoft_price = 1", f"{HEATER}.soft"),
        ("hard = [0, 90]\n", "", f"{HEATER}.hard"),
        ('rate = "20 %/s"', "rate = 0", f"{HEATER}.rate"),
        ('rate = "20 %/s"', 'rate = "-20 %/s"', f"{HEATER}.rate"),
        ('rate = "20 %/s"', 'rate = "20 %"', f"{HEATER}.rate"),
        ("price = 1", "price = 1\njump = 0", f"{TEMPERATURE}.jump"),
        ("price = 1", 'price = 1\njump = "4 cm/s"', f"{TEMPERATURE}.jump"),
        ("price = 1", "price = 1\nnoise = -1", f"{TEMPERATURE}.noise"),
        ("price = 1", 'price = 1\nnoise = "1 cm"', f"{TEMPERATURE}.noise"),
        ("price = 1", "price = 1\ninstrument = { noise = -1 }", f"{TEMPERATURE}.instrument.noise"),
        ("price = 1", "price = 1\ninstrument = { resolution = -1 }", f"{TEMPERATURE}.instrument.resolution"),
        ('"keep"', '{ ramp_to = "95 %", at = "1 %/s" }', f"{HEATER}.safe_hold.ramp_to"),
        ('"keep"', '{ ramp_to = "5 cm", at = "1 %/s" }', f"{HEATER}.safe_hold.ramp_to"),
        ('"keep"', '{ ramp_to = "5 %", at = 0 }', f"{HEATER}.safe_hold.at"),
        ('"keep"', '{ ramp_to = "5 %", at = "1 %" }', f"{HEATER}.safe_hold.at"),
        ('unit = "degC"', 'unit = "cm"', f"{TEMPERATURE}.unit"),
        ('unit = "degC"', 'unit = "dBm"', f"{TEMPERATURE}.unit"),
        ('role = "measured"', 'role = "measured_disturbance"', f"{TEMPERATURE}.role"),
        ("signals.temperature", "signals.temprature", "kinds.oven.signals.temprature"),
    ],
)
def test_what_must_hold_between_numbers_is_checked(old: str, new: str, place: str) -> None:
    """Crossed bands, bands outside wider ones, aims outside bands, prices without aims, wrong dimensions."""
    assert only_mistake(edited(old, new)).place == place


def test_the_allowed_signals_are_named() -> None:
    """With the nearest."""
    mistake = only_mistake(edited("signals.temperature", "signals.temprature"))
    assert (mistake.allowed, mistake.suggestion) == (
        "a signal of physics zone: temperature, heater, ware",
        "temperature",
    )


@pytest.mark.parametrize(
    ("target", "allowed"), [("360", "within soft, 50 to 350 degC"), ("500", "within span, 0 to 400 degC")]
)
def test_the_band_that_is_left_is_named(target: str, allowed: str) -> None:
    """With its numbers and unit, the widest one first."""
    assert only_mistake(edited("target = 200", f"target = {target}")).allowed == allowed


@pytest.mark.parametrize(
    ("key", "value"),
    [
        ("hard", "[0, 400]"),
        ("rate", "3"),
        ("safe_hold", '"keep"'),
        ("profile", "{ low = 0, high = 1, mean_low = '1 s', mean_high = '1 s' }"),
    ],
)
def test_a_key_without_effect_on_a_measured_signal_is_refused(key: str, value: str) -> None:
    """A hard limit that nobody keeps would be a false promise."""
    mistake = only_mistake(edited("price = 1", f"price = 1\n{key} = {value}"))
    assert mistake.place == f"{TEMPERATURE}.{key}"
    assert mistake.allowed.startswith("for a measured signal")


def test_every_key_means_something_to_some_role() -> None:
    """No key of the table is refused everywhere, none is missing in it."""
    assert set().union(*KEYS_OF_ROLE.values()) == set(SignalTable.model_fields)


@pytest.mark.parametrize(
    ("profile", "key"),
    [
        ("low = 3, high = 2, mean_low = '1 s', mean_high = '1 s'", "low"),
        ("low = -3, high = 2, mean_low = '1 s', mean_high = '1 s'", "low"),
        ("low = 0, high = 900, mean_low = '1 s', mean_high = '1 s'", "high"),
        ("low = 0, high = '3 cm', mean_low = '1 s', mean_high = '1 s'", "high"),
        ("low = 0, high = 2, mean_low = '0 s', mean_high = '1 s'", "mean_low"),
        ("low = 0, high = 2, mean_low = '1 s'", "mean_high"),
    ],
)
def test_a_wrong_profile_is_named(profile: str, key: str) -> None:
    """Crossed, outside the span, of another dimension, never dwelling, incomplete."""
    text = edited("[[sections]]", WARE + "[[sections]]")
    text = text.replace('low = 0, high = "0.2 kW", mean_low = "1 min", mean_high = "30 s"', profile)
    assert only_mistake(text).place == f"kinds.oven.signals.ware.profile.{key}"


@settings(deadline=None)
@given(ends=st.tuples(st.integers(0, 400), st.integers(0, 400)))
def test_a_soft_band_inside_the_span_is_right_exactly_when_it_runs_up(ends: tuple[int, int]) -> None:
    """Law over all bands around the target or not: what is accepted is what the words say."""
    low, high = ends
    is_right = low < high and low <= 200 <= high
    assert (mistakes_of(edited("soft = [50, 350]", f"soft = [{low}, {high}]")) == ()) is is_right
