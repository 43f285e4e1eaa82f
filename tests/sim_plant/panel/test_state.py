"""The transition table is whole, and settings that can't work are refused by name."""

from __future__ import annotations

from itertools import product

import pytest

from sim_plant.panel import (
    Charge,
    DrivenPoint,
    LocalAction,
    Outcome,
    PanelSettings,
    power_up,
    readings,
    tick,
    write,
)
from sim_plant.panel.charge import TRANSITIONS, Cause

POINT = DrivenPoint("tank-1.pump", "tank-1", 0.0, 100.0, 40.0)


def test_every_pair_stands_in_the_table() -> None:
    """No charge meets a cause the table doesn't know."""
    assert set(TRANSITIONS) == set(product(Charge, Cause))


def test_only_taking_leads_to_control() -> None:
    """No trip, permit or hand-back ever gives control a section."""
    causes = {cause for (charge, cause), after in TRANSITIONS.items() if after is Charge.CONTROL}
    assert causes == {Cause.TAKE}


def test_nothing_leads_back_to_rest() -> None:
    """Rest is for the time before the first take only."""
    assert {charge for (charge, _), after in TRANSITIONS.items() if after is Charge.REST} == {Charge.REST}


@pytest.mark.parametrize(("to", "rate"), [(0.0, None), (None, 1.0), (0.0, 0.0), (0.0, -1.0), (float("nan"), 1.0)])
def test_local_action_that_leads_nowhere(to: float | None, rate: float | None) -> None:
    """Half a ramp, a rate that isn't positive, an end that isn't a number."""
    with pytest.raises(ValueError, match="local action"):
        LocalAction(to=to, rate_per_s=rate)


@pytest.mark.parametrize(("low", "high"), [(1.0, 1.0), (2.0, 1.0), (0.0, float("inf")), (float("nan"), 1.0)])
def test_span_must_be_finite_and_not_empty(low: float, high: float) -> None:
    """Without a span the panel could not be a last line."""
    with pytest.raises(ValueError, match=r"tank-1\.pump span"):
        DrivenPoint("tank-1.pump", "tank-1", low, high, 1.0)


def test_rest_value_outside_the_span() -> None:
    """Named with the value and the span."""
    with pytest.raises(ValueError, match=r"tank-1\.pump rest=101"):
        DrivenPoint("tank-1.pump", "tank-1", 0.0, 100.0, 101.0)


def test_ramp_end_outside_the_span() -> None:
    """The local action obeys the span as well."""
    with pytest.raises(ValueError, match="local action to=-1"):
        DrivenPoint("tank-1.pump", "tank-1", 0.0, 100.0, 1.0, LocalAction(to=-1.0, rate_per_s=1.0))


def test_two_actuators_with_one_tag() -> None:
    """A tag is an address."""
    with pytest.raises(ValueError, match="unique"):
        PanelSettings((POINT, POINT), ("tank-1",), 1000, 400)


def test_actuator_of_an_unknown_section() -> None:
    """Nobody could ever take it."""
    with pytest.raises(ValueError, match="unknown sections"):
        PanelSettings((POINT,), ("tank-2",), 1000, 400)


@pytest.mark.parametrize(("watchdog_ms", "window_ms"), [(0, 400), (1000, 0)])
def test_times_must_be_positive(watchdog_ms: int, window_ms: int) -> None:
    """A watchdog of nothing would trip at once, a window of nothing would refuse everything."""
    with pytest.raises(ValueError, match="must be above zero"):
        PanelSettings((POINT,), ("tank-1",), watchdog_ms, window_ms)


def test_one_time_without_the_other() -> None:
    """Either somebody supervises or nobody does."""
    with pytest.raises(ValueError, match="give both or none"):
        PanelSettings((POINT,), ("tank-1",), watchdog_ms=1000)


def test_without_supervision_every_value_is_taken_at_once() -> None:
    """Clamped to its span like any other, and nothing trips however long nobody writes."""
    settings = PanelSettings((POINT,), ("tank-1",))
    written = write(settings, power_up(settings), [("tank-1.pump", 130.0), ("panel.period", 1)], 10)
    assert written.outcomes == (Outcome.TAKEN, Outcome.UNKNOWN)
    later, events = tick(settings, written.state, 10_000_000)
    assert readings(settings, later) == {"tank-1.pump": 100.0}
    assert events == ()
