"""What time and the site do: watchdog, local action, permit, and the way back."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_plant.panel import EventKind, LocalAction, Outcome, PanelState, power_up, tick
from tests.sim_plant.panel.bench import SETTINGS, Panel


@pytest.fixture
def panel() -> Panel:
    """A panel with both sections in charge of control and one accepted set."""
    panel = Panel()
    panel.wait(5000)
    panel.take("tank-1", "tank-2")
    panel.send_set(100, ("tank-1.pump", 50.0), ("tank-2.pump", 70.0))
    return panel


def test_power_up_stands_still() -> None:
    """Nobody has taken a section yet: actuators keep their rest values, nothing trips."""
    panel = Panel()
    panel.wait(60_000)
    assert (panel.shows("tank-1.pump"), panel.shows("tank-2.pump")) == (40.0, 60.0)
    assert panel.shows("panel.tripped") is False
    assert panel.events == []


def test_still_heartbeat_trips_at_the_watchdog_time(panel: Panel) -> None:
    """One millisecond before it, not yet."""
    panel.wait(999)
    assert panel.shows("panel.tripped") is False
    panel.wait(1)
    assert panel.shows("panel.tripped") is True
    assert panel.shows("tank-1.in_charge") is False
    assert panel.shows("tank-2.in_charge") is False
    assert panel.events.count(EventKind.TRIPPED) == 1


def test_moving_heartbeat_never_trips(panel: Panel) -> None:
    """Any change counts, a wrap to zero too."""
    for heartbeat in (4_294_967_295, 0, 17):
        panel.wait(999)
        panel.send(("panel.heartbeat", heartbeat))
    assert panel.shows("panel.tripped") is False


def test_repeated_heartbeat_value_is_no_heartbeat(panel: Panel) -> None:
    """A client stuck in a loop writes the same number for ever."""
    for _ in range(4):
        panel.wait(250)
        panel.send(("panel.heartbeat", panel.state.heartbeat))
    assert panel.shows("panel.tripped") is True


def test_sets_alone_do_not_feed_the_watchdog(panel: Panel) -> None:
    """Only the heartbeat says that a period was completed."""
    for period in range(101, 105):
        panel.wait(250)
        panel.send_set(period, ("tank-1.pump", 51.0))
    assert panel.shows("panel.tripped") is True


def test_first_take_starts_the_watchdog() -> None:
    """Silence before anybody was in charge doesn't count against control."""
    panel = Panel()
    panel.wait(5000)
    panel.send(("tank-1.in_charge", True))
    panel.wait(999)
    assert panel.shows("panel.tripped") is False
    panel.wait(1)
    assert panel.shows("panel.tripped") is True


def test_taking_a_second_section_does_not_feed_the_watchdog() -> None:
    """Only the way from nobody to somebody starts it anew."""
    panel = Panel()
    panel.send(("tank-1.in_charge", True))
    panel.wait(900)
    panel.send(("tank-2.in_charge", True))
    panel.wait(100)
    assert panel.shows("panel.tripped") is True


def test_trip_ramps_from_the_instant_of_the_trip(panel: Panel) -> None:
    """Two seconds after the trip a ramp of 10 per second has gone 20, even if nobody looked in between."""
    panel.wait(1000 + 2000)
    assert panel.shows("tank-1.pump") == pytest.approx(30.0, abs=1e-12)


def test_trip_keeps_an_actuator_without_a_ramp(panel: Panel) -> None:
    """Local action `keep`."""
    panel.wait(10_000)
    assert panel.shows("tank-2.pump") == 70.0


def test_ramp_ends_at_its_value(panel: Panel) -> None:
    """And never passes it."""
    panel.wait(60_000)
    assert panel.shows("tank-1.pump") == 0.0


def test_tripped_panel_refuses_to_be_taken_until_the_heartbeat_moves(panel: Panel) -> None:
    """A client that stopped completing periods must not drive."""
    panel.wait(1000)
    assert panel.send(("tank-1.in_charge", True)) == (Outcome.TRIPPED,)
    assert panel.shows("tank-1.in_charge") is False


def test_heartbeat_clears_the_trip_but_gives_nothing_back(panel: Panel) -> None:
    """Sections stay with the panel until control takes them again."""
    panel.wait(1000)
    panel.send(("panel.heartbeat", panel.state.heartbeat + 1))
    assert panel.shows("panel.tripped") is False
    assert panel.shows("tank-1.in_charge") is False
    panel.wait(1000)
    assert panel.shows("tank-1.pump") == pytest.approx(40.0, abs=1e-12)


def test_inputs_after_a_trip_are_ignored_until_retaken(panel: Panel) -> None:
    """A set that is valid in itself doesn't touch sections that control lost."""
    panel.wait(1000)
    outcomes = panel.send_set(101, ("tank-2.pump", 10.0))
    assert outcomes[0] is Outcome.NOT_IN_CHARGE
    assert panel.shows("tank-2.pump") == 70.0


def test_retake_after_a_trip_with_a_restarted_count(panel: Panel) -> None:
    """A restarted control may count from anywhere; the next set has to be newer again."""
    panel.wait(1000)
    panel.take("tank-2")
    assert panel.send_set(3, ("tank-2.pump", 65.0))[0] is Outcome.TAKEN
    assert panel.send_set(3, ("tank-2.pump", 66.0))[0] is Outcome.REPLAYED
    assert panel.shows("tank-2.pump") == 65.0


def test_request_that_arrives_after_the_watchdog_time_finds_the_panel_tripped(panel: Panel) -> None:
    """The watchdog runs before the request is handled, as when a stopped process wakes with a full socket."""
    panel.now_ms += 30_000
    assert panel.send_set(101, ("tank-2.pump", 10.0))[0] is Outcome.NOT_IN_CHARGE
    assert panel.shows("panel.tripped") is True


def test_taken_section_stands_still_until_its_first_inputs(panel: Panel) -> None:
    """Taking ends the local action at once and keeps the command."""
    panel.wait(2000)
    panel.take("tank-1")
    panel.wait(500)
    assert panel.shows("tank-1.pump") == pytest.approx(40.0, abs=1e-12)


def test_hand_back_runs_the_local_action(panel: Panel) -> None:
    """For that section only."""
    assert panel.send(("tank-1.in_charge", False)) == (Outcome.TAKEN,)
    panel.wait(500)
    assert panel.shows("tank-1.pump") == pytest.approx(45.0, abs=1e-12)
    assert panel.shows("tank-2.in_charge") is True
    assert EventKind.HANDED_BACK in panel.events


def test_no_watchdog_with_nobody_in_charge(panel: Panel) -> None:
    """After control handed everything back in order, its silence is no trip."""
    panel.send(("tank-1.in_charge", False), ("tank-2.in_charge", False))
    panel.wait(10_000)
    assert panel.shows("panel.tripped") is False


def test_permit_off_takes_everything_back(panel: Panel) -> None:
    """Bits cleared, local action on all sections, sets refused."""
    panel.permit(False)
    panel.wait(500)
    assert panel.shows("panel.permit") is False
    assert panel.shows("tank-1.in_charge") is False
    assert panel.shows("tank-1.pump") == pytest.approx(45.0, abs=1e-12)
    assert panel.send_set(101, ("tank-1.pump", 50.0)) == (Outcome.NO_PERMIT, Outcome.TAKEN, Outcome.NO_PERMIT)
    assert panel.shows("panel.refusal") == "set 101 refused: permit is off"


def test_permit_off_refuses_to_be_taken(panel: Panel) -> None:
    """The bit stays off."""
    panel.permit(False)
    assert panel.send(("tank-1.in_charge", True)) == (Outcome.NO_PERMIT,)
    assert panel.shows("tank-1.in_charge") is False


def test_permit_off_before_anybody_took_a_section() -> None:
    """Local action on all sections, also those at rest."""
    panel = Panel()
    panel.permit(False)
    panel.wait(1000)
    assert panel.shows("tank-1.pump") == pytest.approx(30.0, abs=1e-12)


def test_permit_on_again_gives_nothing_back(panel: Panel) -> None:
    """Control has to take its sections, and the old count goes on."""
    panel.permit(False)
    panel.permit(True)
    assert panel.shows("tank-2.in_charge") is False
    panel.take("tank-2")
    assert panel.send_set(100, ("tank-2.pump", 20.0))[0] is Outcome.REPLAYED
    assert panel.send_set(101, ("tank-2.pump", 20.0))[0] is Outcome.TAKEN


def test_permit_unchanged_is_no_event(panel: Panel) -> None:
    """Only a change is worth a line in the log."""
    panel.permit(True)
    assert EventKind.PERMIT not in panel.events


def test_clock_never_runs_backwards(panel: Panel) -> None:
    """Whoever tries has mixed up two clocks."""
    with pytest.raises(ValueError, match="never run backwards"):
        tick(SETTINGS, panel.state, panel.now_ms - 1)


@given(st.integers(0, 5000), st.integers(0, 5000))
def test_tick_does_not_depend_on_how_often_it_is_called(first_ms: int, second_ms: int) -> None:
    """Law: tick(a → c) = tick(a → b) then tick(b → c), across the trip and along the ramp."""
    panel = Panel()
    panel.take("tank-1", "tank-2")
    start: PanelState = panel.state
    at_once, _ = tick(SETTINGS, start, first_ms + second_ms)
    halfway, _ = tick(SETTINGS, start, first_ms)
    in_two, _ = tick(SETTINGS, halfway, first_ms + second_ms)
    assert in_two.commands == pytest.approx(at_once.commands, abs=1e-9)
    assert (in_two.tripped, in_two.charge, in_two.clock_ms) == (at_once.tripped, at_once.charge, at_once.clock_ms)


@given(st.floats(-1e6, 1e6), st.floats(-1e6, 1e6), st.floats(1e-6, 1e6), st.floats(0.0, 1e6))
def test_ramp_stays_between_where_it_was_and_where_it_goes(value: float, to: float, rate: float, time_s: float) -> None:
    """Law of the local action: no overshoot, no faster than its rate."""
    after = LocalAction(to=to, rate_per_s=rate).after(value, time_s)
    assert min(value, to) <= after <= max(value, to)
    assert abs(after - value) <= rate * time_s * (1 + 1e-9) + 1e-9


def test_power_up_state_is_at_time_zero() -> None:
    """The panel's clock is its own."""
    assert power_up(SETTINGS).clock_ms == 0
