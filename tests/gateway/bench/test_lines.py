"""What happens as lines: one cause is one line, and what waits for a person is marked."""

from __future__ import annotations

import pytest

from gateway import sentences
from gateway.bench.lines import Line, Source, clock_text, lines_of, needs_person
from gateway.hold import Ask, State, Transition
from gateway.hold import Event as HoldEvent
from gateway.journal import Event
from gateway.plantfile.plant import HoldSpec
from gateway.sentences import Notice
from gateway.verdict import Verdict
from tests.gateway.bench.rig import WALL_NS, transition


def event(notice: Notice) -> Event:
    """The event of a notice, as the gateway journals it."""
    return Event.of(notice, WALL_NS)


def test_sections_moved_by_one_cause_in_one_period_are_one_line() -> None:
    """All of a plant's sections that freeze together are one thing that happened."""
    events = [transition(5.0, f"tank-{i}", State.DRIVING, State.FROZEN) for i in (1, 2, 3)]
    lines = lines_of(events, WALL_NS, sections=3)
    assert [line.text for line in lines] == ["All 3 sections go from driving to frozen: late. Because."]


def test_a_few_sections_are_named_and_many_are_counted() -> None:
    """Three are named; of more only the first."""
    three = [transition(5.0, f"tank-{i}", State.DRIVING, State.FROZEN) for i in (1, 2, 3)]
    five = [transition(5.0, f"tank-{i}", State.DRIVING, State.FROZEN) for i in range(1, 6)]
    assert lines_of(three, WALL_NS, 8)[0].text.startswith("tank-1, tank-2 and tank-3 go from")
    assert lines_of(five, WALL_NS, 8)[0].text.startswith("5 sections (tank-1, tank-2, tank-3 ...) go from")


@pytest.mark.parametrize(
    "other",
    [
        transition(5.0, "tank-2", State.DRIVING, State.FROZEN, k=999),
        transition(5.0, "tank-2", State.DRIVING, State.FROZEN, cause="blind"),
        transition(5.0, "tank-2", State.FROZEN, State.DRIVING),
        transition(5.0, "tank-2", State.DRIVING, State.FROZEN, misses=2),
    ],
)
def test_different_things_stay_different_lines(other: Event) -> None:
    """Another period, cause, direction or count of misses is another line."""
    events = [transition(5.0, "tank-1", State.DRIVING, State.FROZEN), other]
    assert len(lines_of(events, WALL_NS, 8)) == 2


def test_a_hold_that_latched_waits_for_a_person() -> None:
    """Alone or for many, and the line says so with a mark, not with a colour only."""
    events = [transition(5.0, f"tank-{i}", State.FROZEN, State.HOLDING, cause="blind") for i in (1, 2)]
    (line,) = lines_of(events, WALL_NS, 8)
    assert line.for_person
    assert "  ! tank-1 and tank-2 go" in str(line)
    assert "Each waits for a rearm." in line.text


SETTINGS = HoldSpec()


@pytest.mark.parametrize(
    ("notice", "expected"),
    [
        (sentences.panel(tripped=True), True),
        (sentences.panel(tripped=False), False),
        (sentences.permit(on=False), True),
        (sentences.permit(on=True), False),
        (sentences.link_lost("opc.tcp://a:1", "gone", ["tank-1"]), True),
        (sentences.link_up("opc.tcp://a:1", 2), False),
        (sentences.journal_failing("disk full"), True),
        (sentences.journal_recovered(3, 0), False),
        (sentences.unclean_start(None), True),
        (sentences.task_died("link keeper", "why"), True),
        (sentences.quality("tank-1", "level", "good", "frozen", 20.0), False),
        (sentences.request(1, "mira@host", "hold tank-1", "applied", ""), False),
        (
            sentences.transition(
                "tank-1",
                Transition(5, State.DRIVING, State.FROZEN, (HoldEvent.MISS,), Verdict.LATE, Verdict.LATE, 1),
                SETTINGS,
                None,
            ),
            False,
        ),
        (
            sentences.transition(
                "tank-1",
                Transition(5, State.FROZEN, State.HOLDING, (HoldEvent.HOLD,), Ask.HOLD, Verdict.ON_TIME, 0),
                SETTINGS,
                None,
            ),
            True,
        ),
    ],
)
def test_what_waits_for_a_person(notice: Notice, expected: bool) -> None:
    """Every kind of thing the gateway says, as it says it."""
    assert needs_person(event(notice)) is expected


def test_a_transition_of_the_gateway_reads_well_for_several() -> None:
    """The sentence the gateway makes for one section, joined for three."""
    change = Transition(5, State.DRIVING, State.FROZEN, (HoldEvent.MISS,), Verdict.LATE, Verdict.LATE, 1)
    events = [event(sentences.transition(f"tank-{i}", change, SETTINGS, 146_200)) for i in (1, 2, 3)]
    (line,) = lines_of(events, WALL_NS, 3)
    assert line.text.startswith("All 3 sections go from driving to frozen: late.")
    assert line.text.endswith("Slack 146.2 ms.")


@pytest.mark.parametrize(("seconds", "text"), [(0.0, "00:00"), (-3.0, "00:00"), (75.9, "01:15"), (3661.0, "1:01:01")])
def test_time_of_a_line(seconds: float, text: str) -> None:
    """Minutes and seconds, hours where there are any; what comes before the first period is zero."""
    assert clock_text(seconds) == text


def test_a_line_says_when_who_and_what() -> None:
    """Time, source and sentence stand in columns."""
    assert str(Line(12.0, Source.STORY, "A person moves a target.")) == "00:12  story    A person moves a target."
