"""Tests of `gateway.safe_hold`."""

from math import inf, nan

import pytest
from hypothesis import given
from hypothesis import strategies as st

from gateway.plantfile.plant import HoldAction, Role, SafeHold, Scale, Signal
from gateway.safe_hold import HANDED_BACK, HeldInput, next_input, next_inputs, path

RAMP = SafeHold(HoldAction.RAMP, to=0.0, rate_per_s=10.0)
HAND_BACK = SafeHold(HoldAction.HAND_BACK)


def pump(safe_hold: SafeHold | None, rate_per_s: float = inf, name: str = "pump") -> Signal:
    """A pump of 0..100 % with this safe hold."""
    return Signal(
        section="tank-1",
        name=name,
        role=Role.DRIVEN,
        unit="%",
        scale=Scale(0.01),
        span=(0.0, 100.0),
        hard=(0.0, 100.0),
        rate_per_s=rate_per_s,
        safe_hold=safe_hold,
    )


@pytest.mark.parametrize("safe_hold", [None, SafeHold(HoldAction.KEEP)])
def test_keep_writes_the_last_value(safe_hold: SafeHold | None) -> None:
    """Keeping is the action, and the default when the plant file names none."""
    assert next_input(pump(safe_hold), 42.0, 0.5) == HeldInput(42.0, settled=True)


def test_ramp_moves_by_rate_times_period() -> None:
    """10 %/s for half a second is 5 %."""
    assert next_input(pump(RAMP), 42.0, 0.5) == HeldInput(37.0, settled=False)


def test_ramp_arrives_exactly() -> None:
    """The last step is shortened and the ramp then rests."""
    assert next_input(pump(RAMP), 3.0, 0.5) == HeldInput(0.0, settled=True)


def test_ramp_obeys_the_inputs_own_rate() -> None:
    """A ramp faster than the input may move is slowed down, not refused at the wire."""
    assert next_input(pump(RAMP, rate_per_s=4.0), 42.0, 0.5).value == 40.0


def test_hand_back_writes_nothing() -> None:
    """The panel drives."""
    held = next_input(pump(HAND_BACK), 42.0, 0.5)
    assert (held.value, held.hand_back) == (None, True)


@pytest.mark.parametrize("safe_hold", [None, RAMP])
@pytest.mark.parametrize("last", [None, nan, inf, -inf])
def test_an_unknown_last_value_is_handed_back(safe_hold: SafeHold | None, last: float | None) -> None:
    """Nothing can be kept or ramped from that nobody knows."""
    assert next_input(pump(safe_hold), last, 0.5) == HANDED_BACK


def test_a_value_outside_the_hard_limits_is_handed_back() -> None:
    """What was found at 120 % may not be written again, not even on hold."""
    assert next_input(pump(None), 120.0, 0.5) == HANDED_BACK


@pytest.mark.parametrize("period_s", [0.0, -0.5, nan, inf])
def test_a_period_must_be_positive(period_s: float) -> None:
    """Misuse names the field and the value."""
    with pytest.raises(ValueError, match="period_s"):
        next_input(pump(RAMP), 42.0, period_s)


@pytest.mark.parametrize(
    ("safe_hold", "message"),
    [
        (SafeHold(HoldAction.RAMP, to=None, rate_per_s=1.0), "give the value to ramp to"),
        (SafeHold(HoldAction.RAMP, to=0.0, rate_per_s=None), "give a rate above zero"),
        (SafeHold(HoldAction.RAMP, to=0.0, rate_per_s=0.0), "give a rate above zero"),
    ],
)
def test_an_incomplete_ramp_is_misuse(safe_hold: SafeHold, message: str) -> None:
    """A ramp without target or rate names the signal and what to give."""
    with pytest.raises(ValueError, match=rf"tank-1\.pump.*{message}"):
        next_input(pump(safe_hold), 42.0, 0.5)


def test_one_input_handed_back_hands_back_the_section() -> None:
    """The in-charge bit is the section's: no half of it stays with us."""
    held = next_inputs([pump(RAMP), pump(HAND_BACK, name="gate")], {"tank-1.pump": 42.0, "tank-1.gate": 1.0}, 0.5)
    assert (dict(held.values), held.hand_back) == ({}, True)


def test_a_section_moves_all_its_inputs() -> None:
    """Every input takes its own action; the section rests when all do."""
    held = next_inputs([pump(RAMP), pump(None, name="gate")], {"tank-1.pump": 42.0, "tank-1.gate": 7.0}, 0.5)
    assert held.values == {"tank-1.pump": 37.0, "tank-1.gate": 7.0}
    assert (held.hand_back, held.settled) == (False, False)


def test_a_missing_last_value_hands_back_the_section() -> None:
    """An absent tag is an unknown value."""
    assert next_inputs([pump(RAMP)], {}, 0.5).hand_back


def test_a_ramp_stops_at_the_edge_of_the_band() -> None:
    """Limited authority limits the hold too: as near to the safe value as it lets us, and there it rests."""
    held = next_inputs([pump(RAMP)], {"tank-1.pump": 42.0}, 0.5, {"tank-1.pump": (40.0, 60.0)})
    assert (held.values, held.settled) == ({"tank-1.pump": 40.0}, True)
    assert path(pump(RAMP), 46.0, 0.5, 3, (40.0, 60.0)) == (41.0, 40.0, 40.0)


def test_a_value_outside_the_band_is_handed_back() -> None:
    """What the panel moved out of the band cannot be kept by us."""
    assert next_input(pump(None), 70.0, 0.5, (40.0, 60.0)) == HANDED_BACK


def test_path_is_the_repeated_step() -> None:
    """Neighbours are told the whole ramp, then rest."""
    assert path(pump(RAMP), 12.0, 0.5, 4) == (7.0, 2.0, 0.0, 0.0)
    assert path(pump(HAND_BACK), 12.0, 0.5, 4) is None


@given(
    last=st.floats(0, 100),
    to=st.floats(0, 100),
    ramp=st.floats(1e-3, 1e3),
    rate=st.floats(1e-3, 1e3) | st.just(inf),
    period_s=st.floats(1e-3, 10),
)
def test_ramp_never_leaves_its_way(last: float, to: float, ramp: float, rate: float, period_s: float) -> None:
    """Every step stays between where it was and where it goes, no faster than either rate, and none stands still."""
    held = next_input(pump(SafeHold(HoldAction.RAMP, to, ramp), rate), last, period_s)
    assert held.value is not None
    assert min(last, to) <= held.value <= max(last, to)
    assert abs(held.value - last) <= min(ramp, rate) * period_s * (1 + 1e-12) + 1e-12
    assert held.settled == (held.value == to)
