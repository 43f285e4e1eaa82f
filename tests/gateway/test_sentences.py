"""Tests of `gateway.sentences`: a person must be able to follow a night from the log alone."""

from __future__ import annotations

import itertools
import json

import pytest

from gateway import sentences
from gateway.hold import Ask, Event, SectionHold, Start, State, Transition, advance
from gateway.plantfile.plant import HoldSpec
from gateway.sentences import Interval, Kind, Level, Notice
from gateway.verdict import Verdict

SETTINGS = HoldSpec(latch_after=3, latch_window=20)


def transition(before: State, after: State, cause: Verdict | Ask | Start, misses: int = 1) -> Notice:
    """Notice of tank-4 going from one state to another."""
    verdict = cause if isinstance(cause, Verdict) else Verdict.ON_TIME
    return sentences.transition(
        "tank-4", Transition(7, before, after, (Event.MISS,), cause, verdict, misses), SETTINGS, 231_400
    )


BUSY = Interval(
    60, 120, {Verdict.LATE: 2, Verdict.BLIND: 1}, {State.DRIVING: 7, State.HOLDING: 1}, ["tank-4"], 3e5, 2e5
)
IDLE = Interval(60, 1, {}, {State.WATCHING: 8}, [], None, None)

ALL = (
    sentences.run_started("Tarn Row", "bench", "full", "ab" * 32, 0.5, 8),
    *(sentences.run_ended(how, 1, 0) for how in ("completed", "stopped", "failed")),
    sentences.unclean_start("20250102-030000-test"),
    sentences.unclean_start(None),
    sentences.insecure("opc.tcp://panel.example:4840"),
    *(
        transition(before, after, cause)
        for before, after in itertools.permutations(State, 2)
        for cause in (*Verdict, *Ask, *Start)
    ),
    sentences.quality("tank-4", "level", "good", "frozen", 20.25),
    sentences.authority("limited", "full", "mira@bench-host"),
    sentences.authority("observe", "full", "mira@bench-host", overridden=True),
    sentences.authority_denied("full", "no passed soak record for this plant file"),
    sentences.request(3, "mira@bench-host", "hold tank-2", "applied", ""),
    sentences.request(4, "mira@bench-host", "rearm tank-2", "refused", "too few clean periods"),
    sentences.rehearsal("freeze tank-4.level", "tank-4.level is frozen"),
    sentences.link_up("opc.tcp://panel.example:4840", 1),
    sentences.link_up("opc.tcp://panel.example:4840", 22),
    sentences.link_lost("opc.tcp://panel.example:4840", "connection reset", ["tank-1", "tank-2"]),
    sentences.link_retry("opc.tcp://panel.example:4840", 3, 1.5, "connection refused"),
    sentences.write_unknown(["tank-1.pump"], 41, "no answer in 200 ms"),
    sentences.hand_back_unanswered(["tank-1", "tank-2"]),
    sentences.set_refused(41, "set 41 is older than set 42"),
    *(sentences.panel(tripped=tripped) for tripped in (True, False)),
    *(sentences.permit(on=on) for on in (True, False)),
    sentences.summary(BUSY),
    sentences.summary(IDLE),
    sentences.skipped(40, 2),
    sentences.synthesis_broken("state of section 'tank-1' is nan"),
    sentences.transitions(
        ["tank-1", "tank-2"],
        Transition(7, State.DRIVING, State.FROZEN, (Event.MISS,), Verdict.LATE, Verdict.LATE, 1),
        HoldSpec(),
        None,
    ),
    sentences.clock_stepped(-3_600_000_000_000),
    sentences.task_died("gather", "ZeroDivisionError: our fault"),
    sentences.journal_failing("FullError: database or disk is full"),
    sentences.journal_behind(600, 1200),
    sentences.journal_losing("all 1200 places of its queue are taken"),
    sentences.journal_unrecordable("object cannot be recorded"),
    sentences.journal_unfinished(40),
    sentences.journal_recovered(3, 5),
    sentences.journal_recovered(0, 0),
    sentences.journal_dead("ZeroDivisionError: our fault"),
    sentences.journal_lost("period", "the queue was full", 5, 7, 11),
    sentences.journal_lost("event", "the queue was full of events", 1, None, None),
    sentences.requests_failing("BusyError: database is locked"),
    sentences.requests_recovered(),
    sentences.requests_dead("ZeroDivisionError: our fault"),
    sentences.moved_aside("journal", "journal.damaged-20250102T030000Z"),
)


def test_every_kind_is_told_by_some_sentence() -> None:
    """No kind is a label without words."""
    assert {notice.kind for notice in ALL} == set(Kind)


@pytest.mark.parametrize("notice", ALL, ids=lambda notice: notice.kind)
def test_every_sentence_is_one_line_and_finished(notice: Notice) -> None:
    """It starts with a capital or a name, ends with a full stop, and has no doubled one."""
    assert notice.sentence.isprintable()
    assert notice.sentence[0] == notice.sentence[0].strip()
    assert notice.sentence.endswith((".", "!", "?"))
    assert ".." not in notice.sentence
    assert "  " not in notice.sentence


@pytest.mark.parametrize("notice", ALL, ids=lambda notice: notice.kind)
def test_every_fact_is_json(notice: Notice) -> None:
    """The journal and JSON lines take the facts as they are."""
    assert json.loads(json.dumps(dict(notice.detail))) == dict(notice.detail)


@pytest.mark.parametrize(
    ("before", "after", "cause", "level"),
    [
        (State.DRIVING, State.FROZEN, Verdict.LATE, Level.WARNING),
        (State.FROZEN, State.DRIVING, Verdict.ON_TIME, Level.INFO),
        (State.FROZEN, State.HOLDING, Verdict.LATE, Level.ERROR),
        (State.DRIVING, State.HOLDING, Ask.HOLD, Level.WARNING),
        (State.FROZEN, State.HOLDING, Start.RESTART, Level.ERROR),
        (State.HOLDING, State.FROZEN, Ask.REARM, Level.INFO),
        (State.WATCHING, State.FROZEN, Ask.TAKE, Level.INFO),
        (State.DRIVING, State.WATCHING, Ask.RELEASE, Level.INFO),
    ],
)
def test_a_transition_is_as_loud_as_it_matters(
    before: State, after: State, cause: Verdict | Ask | Start, level: Level
) -> None:
    """What waits for a person is an error, what passes by itself a warning, what a person wanted neither."""
    assert transition(before, after, cause).level is level


def test_a_transition_tells_section_states_cause_count_and_slack() -> None:
    """Everything the line must hold, in words."""
    assert transition(State.FROZEN, State.HOLDING, Verdict.LATE, misses=3).sentence == (
        "tank-4 goes from frozen to holding: late. The inputs were not ready at the cut-off and were thrown away. "
        "3 misses in the last 20 periods. Slack 231.4 ms. It waits for a rearm."
    )


def test_a_transition_without_a_write_has_no_slack() -> None:
    """Nothing acknowledged, nothing claimed."""
    change = Transition(7, State.DRIVING, State.FROZEN, (Event.MISS,), Verdict.SEVERED, Verdict.SEVERED, 1)
    notice = sentences.transition("tank-4", change, SETTINGS, None)
    assert "Slack" not in notice.sentence
    assert notice.detail["slack_ms"] is None


def test_whatever_the_hold_table_does_can_be_told() -> None:
    """Every step of the table that changes the state of a section has a sentence naming both states."""
    told = 0
    for state in State:
        section = SectionHold(state, k=1, since=0, cause=Verdict.LATE, misses=(0, 1), clean=9)
        for verdict, asks in itertools.product(Verdict, ((), *((ask,) for ask in Ask))):
            change = advance(section, SETTINGS, 2, verdict, asks)[1]
            if change is not None and change.before is not change.after:
                told += 1
                sentence = sentences.transition("tank-4", change, SETTINGS, 1000).sentence
                assert f"tank-4 goes from {change.before} to {change.after}: " in sentence
    assert told > 20


def test_a_summary_tells_periods_misses_by_cause_slack_and_states() -> None:
    """One line per interval that a person can add up."""
    assert sentences.summary(BUSY).sentence == (
        "Last 60 s: 120 periods, 3 section-periods missed (blind 1, late 2), slack 300.0 ms median, 200.0 ms least; "
        "7 driving, 1 holding (tank-4)."
    )


def test_a_summary_without_writes_says_so() -> None:
    """An interval in observe claims no slack."""
    assert sentences.summary(IDLE).sentence == (
        "Last 60 s: 1 period, 0 section-periods missed, nothing written; 8 watching."
    )


def test_a_lost_link_is_one_notice_for_all_its_sections() -> None:
    """One cause, one line; the sections are in the facts."""
    notice = sentences.link_lost("opc.tcp://panel.example:4840", "connection reset", ["tank-1", "tank-2"])
    assert notice.sentence == (
        "The link to opc.tcp://panel.example:4840 is lost, 2 sections with it: connection reset. "
        "It is being built anew."
    )
    assert notice.detail["sections"] == ["tank-1", "tank-2"]


@pytest.mark.parametrize(
    ("connects", "words"), [(1, "is up."), (2, "2nd time"), (3, "3rd"), (11, "11th"), (21, "21st"), (112, "112th")]
)
def test_a_link_that_comes_back_counts(connects: int, words: str) -> None:
    """How often it was built is said from the second time on."""
    assert words in sentences.link_up("opc.tcp://panel.example:4840", connects).sentence
