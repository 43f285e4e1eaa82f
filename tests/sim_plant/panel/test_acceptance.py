"""Which sets of inputs the panel takes, and what one request can and can't do."""

from __future__ import annotations

from math import inf, nan

import pytest

from sim_plant.panel import EventKind, Outcome
from tests.sim_plant.panel.bench import Panel


@pytest.fixture
def panel() -> Panel:
    """A panel whose first section is in charge of control, at an instant that isn't zero."""
    panel = Panel()
    panel.wait(5000)
    panel.take("tank-1")
    return panel


def test_set_in_window_moves_the_actuator(panel: Panel) -> None:
    """Inputs, expiry and period in one request reach the actuator of a section in charge."""
    assert panel.send_set(7, ("tank-1.pump", 55.0)) == (Outcome.TAKEN,) * 3
    assert panel.shows("tank-1.pump") == 55.0
    assert panel.shows("panel.accepted") == 7


def test_inputs_without_period_change_nothing(panel: Panel) -> None:
    """Nobody committed them: outcome says so and the tag still shows the old command."""
    assert panel.send(("tank-1.pump", 55.0)) == (Outcome.UNCOMMITTED,)
    assert panel.shows("tank-1.pump") == 40.0


def test_uncommitted_inputs_do_not_leak_into_the_next_set(panel: Panel) -> None:
    """A set is one request: what another request left behind is gone."""
    panel.send(("tank-1.pump", 90.0))
    assert panel.send_set(7) == (Outcome.TAKEN,) * 2
    assert panel.shows("tank-1.pump") == 40.0


def test_late_set_is_refused_whole(panel: Panel) -> None:
    """Past its expiry by one millisecond, every input of it is refused."""
    expires = panel.now_ms + 400
    panel.wait(401)
    outcomes = panel.send(("tank-1.pump", 55.0), ("panel.expires", expires), ("panel.period", 7))
    assert outcomes == (Outcome.EXPIRED, Outcome.TAKEN, Outcome.EXPIRED)
    assert panel.shows("tank-1.pump") == 40.0
    assert panel.shows("panel.refusal") == f"set 7 refused: expired at {expires} ms, 1 ms ago"


def test_set_at_its_last_millisecond_is_accepted(panel: Panel) -> None:
    """The expiry itself is still valid."""
    expires = panel.now_ms + 400
    panel.wait(400)
    panel.send(("tank-1.pump", 55.0), ("panel.expires", expires), ("panel.period", 7))
    assert panel.shows("tank-1.pump") == 55.0


def test_set_valid_for_longer_than_the_window_is_refused(panel: Panel) -> None:
    """An expiry from before a restart of the panel, or made up, must not keep a set alive."""
    assert panel.send_set(7, ("tank-1.pump", 55.0), valid_ms=401)[0] is Outcome.TOO_FAR
    assert panel.shows("tank-1.pump") == 40.0


@pytest.mark.parametrize("period", [7, 6, 0])
def test_replayed_set_is_refused(panel: Panel, period: int) -> None:
    """The last accepted period and all before it are old."""
    panel.send_set(7, ("tank-1.pump", 55.0))
    assert panel.send_set(period, ("tank-1.pump", 80.0))[-1] is Outcome.REPLAYED
    assert panel.shows("tank-1.pump") == 55.0
    assert panel.shows("panel.accepted") == 7


def test_set_without_expiry_is_refused(panel: Panel) -> None:
    """A period alone does not commit."""
    assert panel.send(("tank-1.pump", 55.0), ("panel.period", 7)) == (Outcome.NO_EXPIRY,) * 2
    assert panel.shows("tank-1.pump") == 40.0


def test_expiry_is_used_up_by_its_set(panel: Panel) -> None:
    """A second period in the same request needs its own expiry."""
    panel.send_set(7)
    outcomes = panel.send(("panel.expires", panel.now_ms + 100), ("panel.period", 8), ("panel.period", 9))
    assert outcomes == (Outcome.TAKEN, Outcome.TAKEN, Outcome.NO_EXPIRY)


def test_inputs_of_a_refused_set_are_not_committed_by_the_next(panel: Panel) -> None:
    """A refusal ends its set for good, also inside one request."""
    late, good = ("panel.expires", panel.now_ms - 1), ("panel.expires", panel.now_ms)
    panel.send(("tank-1.pump", 55.0), late, ("panel.period", 7), good, ("panel.period", 8))
    assert panel.shows("panel.accepted") == 8
    assert panel.shows("tank-1.pump") == 40.0


def test_inputs_after_the_period_belong_to_no_set(panel: Panel) -> None:
    """Order is the order of the list."""
    expires = ("panel.expires", panel.now_ms + 100)
    outcomes = panel.send(expires, ("panel.period", 7), ("tank-1.pump", 55.0))
    assert outcomes[-1] is Outcome.UNCOMMITTED
    assert panel.shows("tank-1.pump") == 40.0


def test_section_not_in_charge_is_ignored_and_the_rest_is_taken(panel: Panel) -> None:
    """The panel's own action drives a section whose bit is off."""
    outcomes = panel.send_set(7, ("tank-2.pump", 10.0), ("tank-1.pump", 55.0))
    assert outcomes[:2] == (Outcome.NOT_IN_CHARGE, Outcome.TAKEN)
    assert panel.shows("tank-2.pump") == 60.0
    assert panel.shows("tank-1.pump") == 55.0


def test_take_and_set_in_one_request(panel: Panel) -> None:
    """A section can be taken bumplessly: its bit and its first inputs arrive together."""
    outcomes = panel.send(
        ("tank-2.in_charge", True), ("tank-2.pump", 61.0), ("panel.expires", panel.now_ms), ("panel.period", 7)
    )
    assert set(outcomes) == {Outcome.TAKEN}
    assert panel.shows("tank-2.pump") == 61.0


@pytest.mark.parametrize(("asked", "told"), [(100.5, 100.0), (-3.0, 0.0), (1e300, 100.0)])
def test_input_outside_the_span_is_clamped_and_counted(panel: Panel, asked: float, told: float) -> None:
    """The panel is a last line of its own."""
    panel.send_set(7, ("tank-1.pump", asked))
    assert panel.shows("tank-1.pump") == told
    assert panel.shows("panel.clamped") == 1
    assert EventKind.CLAMPED in panel.events


def test_input_at_the_end_of_the_span_is_not_counted(panel: Panel) -> None:
    """Both ends belong to the span."""
    panel.send_set(7, ("tank-1.pump", 100.0))
    panel.send_set(8, ("tank-1.pump", 0.0))
    assert panel.shows("panel.clamped") == 0


@pytest.mark.parametrize("value", [nan, inf, -inf])
def test_value_that_is_not_finite_spoils_its_set(panel: Panel, value: float) -> None:
    """Half a set is worse than none: the good inputs beside it are refused, too."""
    panel.take("tank-2")
    outcomes = panel.send_set(7, ("tank-2.pump", 10.0), ("tank-1.pump", value))
    assert outcomes == (Outcome.SPOILED, Outcome.NOT_FINITE, Outcome.TAKEN, Outcome.SPOILED)
    assert panel.shows("tank-2.pump") == 60.0


@pytest.mark.parametrize("value", [50, True, "50", None])
def test_value_of_the_wrong_type_spoils_its_set(panel: Panel, value: object) -> None:
    """A driven value is a floating-point number and nothing else."""
    outcomes = panel.send_set(7, ("tank-1.pump", value))
    assert outcomes == (Outcome.WRONG_TYPE, Outcome.TAKEN, Outcome.SPOILED)
    assert panel.shows("tank-1.pump") == 40.0


@pytest.mark.parametrize(
    ("tag", "value"),
    [
        ("panel.heartbeat", 1 << 32),
        ("panel.heartbeat", True),
        ("panel.expires", -1),
        ("panel.period", 1 << 64),
        ("panel.period", 3.0),
        ("tank-1.in_charge", 1),
    ],
)
def test_counter_or_bit_of_the_wrong_type_is_refused(panel: Panel, tag: str, value: object) -> None:
    """Counters are unsigned and of their own width, a bit is a Boolean."""
    before = panel.state
    assert panel.send((tag, value)) == (Outcome.WRONG_TYPE,)
    assert panel.state == before


@pytest.mark.parametrize("tag", ["panel.permit", "panel.clock", "panel.accepted", "panel.tripped", "panel.clamped"])
def test_what_the_panel_reports_cannot_be_written(panel: Panel, tag: str) -> None:
    """The permit above all: control must not permit itself."""
    before = panel.state
    assert panel.send((tag, True)) == (Outcome.READ_ONLY,)
    assert panel.state == before


def test_unknown_tag(panel: Panel) -> None:
    """A tag the panel doesn't have is answered, not ignored."""
    assert panel.send(("tank-9.pump", 1.0)) == (Outcome.UNKNOWN,)


def test_accepted_set_clears_the_refusal(panel: Panel) -> None:
    """`panel.refusal` speaks of the last set only."""
    panel.send(("panel.period", 7))
    assert panel.state.refused == 1
    panel.send_set(7)
    assert panel.shows("panel.refusal") == ""
    assert panel.state.refused == 0


def test_refused_set_leaves_the_counter_alone(panel: Panel) -> None:
    """A refused period can be sent again, in time."""
    panel.send_set(7, valid_ms=500)
    assert panel.shows("panel.accepted") == 0
    assert panel.send_set(7) == (Outcome.TAKEN,) * 2
