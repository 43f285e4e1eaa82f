"""Tests of `gateway.hold`: every cell of the table, then the behaviour it must add up to, then its laws."""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.stateful import RuleBasedStateMachine, initialize, invariant, rule

from gateway.hold import (
    BEGIN_MARK,
    END_MARK,
    TABLE,
    Ask,
    Event,
    Latch,
    Reason,
    SectionHold,
    Start,
    State,
    Step,
    Transition,
    Writes,
    advance,
    diagram,
    diagram_markdown,
    start,
    writes,
)
from gateway.plantfile.plant import HoldSpec
from gateway.verdict import Verdict

SPEC = HoldSpec(latch_after=3, latch_window=20, clear_for=5, blind_after=3)
MISSES = [verdict for verdict in Verdict if verdict.is_miss]

D, F, H, W = State.DRIVING, State.FROZEN, State.HOLDING, State.WATCHING

EXPECTED = {
    Event.CLEAN: (D, D, H, W),
    Event.MISS: (F, F, H, W),
    Event.LATCHING_MISS: (H, H, H, W),
    Event.HOLD: (H, H, H, W),
    Event.REARM: (Reason.NOT_HOLDING, Reason.NOT_HOLDING, F, Reason.NOT_TAKEN),
    Event.EARLY_REARM: (Reason.NOT_HOLDING, Reason.NOT_HOLDING, Reason.TOO_EARLY, Reason.NOT_TAKEN),
    Event.TAKE: (Reason.ALREADY_TAKEN, Reason.ALREADY_TAKEN, Reason.IMPOSSIBLE, F),
    Event.TAKE_LATCHED: (Reason.IMPOSSIBLE, Reason.ALREADY_TAKEN, Reason.ALREADY_TAKEN, H),
    Event.RELEASE: (W, W, W, Reason.ALREADY_RELEASED),
    Event.RESTART: (Reason.IMPOSSIBLE, H, Reason.IMPOSSIBLE, Reason.IMPOSSIBLE),
}
"""Written down a second time, by event and then in the order driving, frozen, holding, watching."""


def run(section: SectionHold, verdicts: list[Verdict], spec: HoldSpec = SPEC) -> SectionHold:
    """Advance through consecutive periods without asks."""
    for verdict in verdicts:
        section, _, _ = advance(section, spec, section.k + 1, verdict)
    return section


def driving(k: int = 100) -> SectionHold:
    """A section that drives after period `k`."""
    return run(start(k, taken=True, ended_cleanly=True), [Verdict.ON_TIME])


def holding(k: int = 100) -> SectionHold:
    """A section that a person put on hold in period `k`, with that period its first clean one."""
    section, _, _ = advance(driving(k - 1), SPEC, k, Verdict.ON_TIME, [Ask.HOLD])
    return section


@pytest.mark.parametrize("event", Event)
@pytest.mark.parametrize("state", State)
def test_every_pair_leads_where_it_should(state: State, event: Event) -> None:
    """Each (state, event) pair, the impossible ones too, goes to its state or stays with its reason."""
    expected = EXPECTED[event][[D, F, H, W].index(state)]
    step = TABLE[state, event]
    if isinstance(expected, Reason):
        assert (step.to, step.refusal, step.latch) == (state, expected, Latch.KEEP)
    else:
        assert (step.to, step.refusal) == (expected, None)


def test_the_table_has_no_other_pairs() -> None:
    """The table is exactly the product of states and events."""
    assert set(TABLE) == {(state, event) for state in State for event in Event}


def test_only_a_rearm_clears_the_latch() -> None:
    """No other cell of the table clears it."""
    assert [pair for pair, step in TABLE.items() if step.latch is Latch.CLEAR] == [(H, Event.REARM)]


def test_every_way_into_holding_is_latched() -> None:
    """A cell that enters holding sets the latch, except the one that found it set."""
    entering = {pair: step for pair, step in TABLE.items() if step.to is H and pair[0] is not H}
    assert {pair for pair, step in entering.items() if step.latch is not Latch.SET} == {(W, Event.TAKE_LATCHED)}


@pytest.mark.parametrize(
    ("state", "what"), [(D, Writes.SYNTHESIS), (F, Writes.LAST_WRITTEN), (H, Writes.SAFE_HOLD), (W, Writes.NOTHING)]
)
def test_what_each_state_writes(state: State, what: Writes) -> None:
    """Each state writes what runtime section 3 says."""
    assert writes(state) is what


def test_a_clean_start_drives_with_its_first_on_time_period() -> None:
    """With authority and a clean past, a section is frozen at start and drives in the first on-time period."""
    section = start(100, taken=True, ended_cleanly=True)
    assert section.state is F
    section, transition, _ = advance(section, SPEC, 100, Verdict.ON_TIME)
    assert section.state is D
    assert transition == Transition(100, F, D, (Event.CLEAN,), Verdict.ON_TIME, Verdict.ON_TIME, 0)


@pytest.mark.parametrize("verdict", MISSES)
def test_any_miss_freezes_in_the_same_period(verdict: Verdict) -> None:
    """Every verdict but on_time freezes a driving section at once, and the transition names it."""
    section, transition, _ = advance(driving(100), SPEC, 101, verdict)
    assert section.state is F
    assert transition == Transition(101, D, F, (Event.MISS,), verdict, verdict, 1)


def test_frozen_returns_with_the_next_on_time_period() -> None:
    """One miss costs one period."""
    assert run(driving(), [Verdict.LATE, Verdict.ON_TIME]).state is D


def test_three_consecutive_misses_latch() -> None:
    """`latch_after` misses in a row put the section on hold at the last of them."""
    assert run(driving(), [Verdict.LATE] * 2).state is F
    section = run(driving(), [Verdict.LATE] * 3)
    assert (section.state, section.latched_by) == (H, Verdict.LATE)


def test_scattered_misses_in_the_window_latch() -> None:
    """Misses need not be consecutive: the third within the window goes from driving straight to hold."""
    pattern = [Verdict.BLIND, *[Verdict.ON_TIME] * 9] * 2
    section, transition, _ = advance(run(driving(), pattern[:-1]), SPEC, 120, Verdict.LATE)
    assert section.state is H
    assert transition is not None
    assert (transition.before, transition.events, transition.misses) == (D, (Event.LATCHING_MISS,), 3)


def test_misses_that_left_the_window_are_forgotten() -> None:
    """A miss `latch_window` periods old no longer counts."""
    pattern = [Verdict.LATE, *[Verdict.ON_TIME] * 9] * 2
    assert run(driving(), [*pattern, Verdict.LATE]).state is F


def test_a_hold_does_not_end_by_itself() -> None:
    """However many clean periods follow, only a rearm ends a hold."""
    assert run(holding(), [Verdict.ON_TIME] * 1000).state is H


def test_an_early_rearm_is_refused_with_what_is_missing() -> None:
    """Before `clear_for` clean periods the answer says why and how many are missing."""
    section = run(holding(100), [Verdict.ON_TIME] * 2)
    after, transition, (refusal,) = advance(section, SPEC, 103, Verdict.ON_TIME, [Ask.REARM])
    assert after.state is H
    assert transition is None
    assert (refusal.ask, refusal.reason, refusal.clean_periods_missing) == (Ask.REARM, Reason.TOO_EARLY, 2)
    assert refusal.sentence == "rearm refused: too few clean periods since it holds, 2 more needed"


def test_a_rearm_after_enough_clean_periods_drives_from_the_next_period() -> None:
    """The rearm's own period is frozen, so that observer and warm start are seeded first; the next one drives."""
    section = run(holding(100), [Verdict.ON_TIME] * 4)
    section, transition, refusals = advance(section, SPEC, 105, Verdict.ON_TIME, [Ask.REARM])
    assert (section.state, section.latched_by, refusals) == (F, None, ())
    assert transition == Transition(105, H, F, (Event.REARM,), Ask.REARM, Verdict.ON_TIME, 0)
    assert run(section, [Verdict.ON_TIME]).state is D


def test_a_miss_while_holding_starts_the_clean_count_anew() -> None:
    """Clean periods must be consecutive."""
    section = run(holding(), [*[Verdict.ON_TIME] * 4, Verdict.BLIND, *[Verdict.ON_TIME] * 3])
    assert section.clean_periods_missing(SPEC) == 2


def test_clean_periods_before_the_hold_do_not_count() -> None:
    """A section held in the middle of a good run still owes `clear_for` clean periods."""
    section = run(driving(), [Verdict.ON_TIME] * 50)
    section, _, _ = advance(section, SPEC, section.k + 1, Verdict.ON_TIME, [Ask.HOLD])
    assert section.clean_periods_missing(SPEC) == SPEC.clear_for - 1


def test_a_second_hold_request_beats_a_rearm_of_the_same_period() -> None:
    """A renewed hold starts the clean count anew, so a rearm asked just after it, unseeing, is refused."""
    section = run(holding(), [Verdict.ON_TIME] * 10)
    section, transition, (refusal,) = advance(section, SPEC, section.k + 1, Verdict.ON_TIME, [Ask.HOLD, Ask.REARM])
    assert (section.state, transition, refusal.reason) == (H, None, Reason.TOO_EARLY)


def test_a_hold_after_a_rearm_of_the_same_period_holds() -> None:
    """The later word wins; the transition lists both steps although it ends where it began."""
    section = run(holding(), [Verdict.ON_TIME] * 10)
    section, transition, _ = advance(section, SPEC, section.k + 1, Verdict.ON_TIME, [Ask.REARM, Ask.HOLD])
    assert section.state is H
    assert transition is not None
    assert (transition.before, transition.after, transition.events) == (H, H, (Event.REARM, Event.HOLD))


def test_a_rearm_forgets_the_misses_before_it() -> None:
    """After a rearm one miss freezes; it does not latch on the strength of old misses."""
    section = run(driving(), [Verdict.LATE] * 3 + [Verdict.ON_TIME] * 5)
    section, _, _ = advance(section, SPEC, section.k + 1, Verdict.ON_TIME, [Ask.REARM])
    assert run(section, [Verdict.ON_TIME, Verdict.LATE]).state is F


def test_releasing_authority_keeps_the_latch() -> None:
    """A hold survives observe: taking authority again leads back into it, with the first cause."""
    section = run(driving(), [Verdict.BLIND] * 3)
    section, _, _ = advance(section, SPEC, section.k + 1, Verdict.ON_TIME, [Ask.RELEASE])
    assert section.state is W
    section = run(section, [Verdict.ON_TIME] * 50)
    section, transition, _ = advance(section, SPEC, section.k + 1, Verdict.ON_TIME, [Ask.TAKE])
    assert (section.state, section.cause, section.latched_by) == (H, Verdict.BLIND, Verdict.BLIND)
    assert transition is not None
    assert transition.events == (Event.TAKE_LATCHED,)


def test_clean_periods_watched_before_a_take_do_not_count() -> None:
    """A latched section owes `clear_for` clean periods from the take on, its own period the first of them at most."""
    section = run(start(100, taken=False, ended_cleanly=False), [Verdict.ON_TIME] * 50)
    section, _, (refusal,) = advance(section, SPEC, 150, Verdict.ON_TIME, [Ask.TAKE, Ask.REARM])
    assert (section.state, refusal.clean_periods_missing) == (H, SPEC.clear_for)


def test_taking_authority_drives_from_the_next_period() -> None:
    """A take leaves the section frozen on the inputs found, and the next on-time period drives."""
    section = run(start(100, taken=False, ended_cleanly=True), [Verdict.ON_TIME] * 3)
    section, _, _ = advance(section, SPEC, 103, Verdict.ON_TIME, [Ask.TAKE])
    assert section.state is F
    assert run(section, [Verdict.ON_TIME]).state is D


def test_misses_while_watching_are_no_reason_to_latch() -> None:
    """However bad the watched periods were, a take starts with an empty record."""
    section = run(start(100, taken=False, ended_cleanly=True), [Verdict.BARRED] * 30)
    assert (section.state, section.latched_by) == (W, None)
    section, _, _ = advance(section, SPEC, section.k + 1, Verdict.LATE, [Ask.TAKE])
    assert section.state is F


def test_a_section_can_be_held_before_authority_is_taken() -> None:
    """A hold asked of a watched section shows when authority is taken."""
    section = start(100, taken=False, ended_cleanly=True)
    section, transition, refusals = advance(section, SPEC, 100, Verdict.ON_TIME, [Ask.HOLD])
    assert (section.state, transition, refusals) == (W, None, ())
    section, _, _ = advance(section, SPEC, 101, Verdict.ON_TIME, [Ask.TAKE])
    assert section.state is H


@pytest.mark.parametrize("verdict", Verdict)
def test_an_unclean_end_holds_in_the_first_period(verdict: Verdict) -> None:
    """After a kill the section starts frozen and is on hold after its first period, whatever that was worth."""
    section = start(100, taken=True, ended_cleanly=False)
    assert section.state is F
    section, transition, _ = advance(section, SPEC, 100, verdict)
    assert (section.state, section.cause) == (H, Start.RESTART)
    assert transition is not None
    assert transition.events == (Event.RESTART,)


def test_an_unclean_end_never_drives_without_a_rearm() -> None:
    """Not even its first period, however on time, may drive."""
    section = start(100, taken=True, ended_cleanly=False)
    assert advance(section, SPEC, 100, Verdict.ON_TIME)[0].state is not D
    section = run(section, [Verdict.ON_TIME] * 6)
    section, _, refusals = advance(section, SPEC, 106, Verdict.ON_TIME, [Ask.REARM])
    assert (section.state, refusals) == (F, ())


def test_an_unclean_end_shows_when_authority_is_taken_later() -> None:
    """A live site restarts in observe; the hold is there as soon as somebody takes authority."""
    section = run(start(100, taken=False, ended_cleanly=False), [Verdict.ON_TIME] * 10)
    section, _, _ = advance(section, SPEC, 110, Verdict.ON_TIME, [Ask.TAKE])
    assert (section.state, section.cause) == (H, Start.RESTART)


def test_periods_that_did_not_run_are_misses() -> None:
    """A control that slept through three periods finds its sections on hold, not driving on."""
    section, transition, _ = advance(driving(100), SPEC, 104, Verdict.ON_TIME)
    assert (section.state, section.latched_by) == (H, Verdict.LATE)
    assert transition is not None
    assert transition.events == (Event.MISS, Event.LATCHING_MISS)


def test_one_period_that_did_not_run_costs_no_more_than_a_miss() -> None:
    """The section comes back in the on-time period after it, and both steps are told."""
    section, transition, _ = advance(driving(100), SPEC, 102, Verdict.ON_TIME)
    assert section.state is D
    assert transition is not None
    assert transition.events == (Event.MISS, Event.CLEAN)


def test_a_gap_of_years_is_accounted_for_at_once() -> None:
    """Only the window of a gap is looked at."""
    section, _, _ = advance(driving(100), SPEC, 10**12, Verdict.ON_TIME)
    assert section.state is H
    assert len(section.misses) <= SPEC.latch_window


@pytest.mark.parametrize("k", [99, 100])
def test_a_period_is_accounted_for_once(k: int) -> None:
    """The same or an earlier period is misuse and says so."""
    with pytest.raises(ValueError, match=f"period {k} cannot be accounted for: it must come after period 100"):
        advance(driving(100), SPEC, k, Verdict.ON_TIME)


def test_a_failed_write_is_accounted_for_from_the_same_starting_point() -> None:
    """Judged on time, then unwritten: the second call from the same state stands, and freezes."""
    before = driving(100)
    assert advance(before, SPEC, 101, Verdict.ON_TIME)[0].state is D
    assert advance(before, SPEC, 101, Verdict.UNWRITTEN)[0].state is F


def test_a_refusal_without_a_count_is_a_plain_sentence() -> None:
    """Only an early rearm mentions periods."""
    _, _, (refusal,) = advance(driving(100), SPEC, 101, Verdict.ON_TIME, [Ask.TAKE])
    assert refusal.sentence == "take refused: authority over the section is already taken"


def test_diagram_has_an_arrow_per_change_of_state() -> None:
    """The diagram shows exactly the pairs of states the table connects."""
    drawn = {tuple(line.split(":")[0].split(" --> ")) for line in diagram().splitlines()[1:]}
    wanted = {(f"    {state}", str(step.to)) for (state, _), step in TABLE.items() if step.to is not state}
    assert drawn == wanted | {("    [*]", "frozen"), ("    [*]", "watching")}


def test_markdown_has_a_row_per_event_between_its_marks() -> None:
    """The documentation block carries both marks and the whole table."""
    text = diagram_markdown()
    assert text.startswith(BEGIN_MARK)
    assert text.endswith(END_MARK)
    for event in Event:
        row = next(line for line in text.splitlines() if line.startswith(f"| {event} |"))
        assert row.count("|") == len(State) + 2
    assert "| miss | **frozen** | stays | stays | stays |" in text


class HoldMachine(RuleBasedStateMachine):
    """Random lives of one section, checked against a plain history of what happened to it."""

    def __init__(self) -> None:
        super().__init__()
        self.spec = HoldSpec()
        self.section = start(0, taken=True, ended_cleanly=True)
        self.before = self.section
        self.history: list[tuple[int, Verdict, tuple[Ask, ...]]] = []
        self.ended_cleanly = True

    @initialize(
        taken=st.booleans(),
        ended_cleanly=st.booleans(),
        spec=st.builds(HoldSpec, st.integers(1, 4), st.integers(4, 8), st.integers(1, 4), st.just(3)),
    )
    def begin(self, taken: bool, ended_cleanly: bool, spec: HoldSpec) -> None:
        """Start a run."""
        self.spec, self.ended_cleanly = spec, ended_cleanly
        self.section = self.before = start(0, taken=taken, ended_cleanly=ended_cleanly)

    @rule(
        gap=st.sampled_from([1, 1, 1, 1, 1, 2, 5]),
        verdict=st.sampled_from([Verdict.ON_TIME] * 6 + MISSES),
        asks=st.one_of(st.just([]), st.lists(st.sampled_from(Ask), max_size=3)),
    )
    def period(self, gap: int, verdict: Verdict, asks: list[Ask]) -> None:
        """Account for one period."""
        k = self.section.k + gap
        self.before = self.section
        could = advance(self.section, self.spec, k, Verdict.ON_TIME, asks)[0].state is D
        self.section, transition, refusals = advance(self.section, self.spec, k, verdict, asks)
        self.history.append((k, verdict, tuple(asks)))
        if transition is None:
            assert self.section.state is self.before.state
        else:
            assert (transition.before, transition.after) == (self.before.state, self.section.state)
            assert transition.events
        assert len(refusals) <= len(asks)
        assert (self.section.state is D) == (could and not verdict.is_miss)

    @invariant()
    def latch_agrees_with_state(self) -> None:
        """Holding is latched, driving is not."""
        assert self.section.state is not H or self.section.latched_by is not None
        assert self.section.state is not D or self.section.latched_by is None

    @invariant()
    def a_latch_ends_only_by_a_rearm_after_enough_clean_periods(self) -> None:
        """Whenever a latch disappeared, a rearm was asked, with `clear_for` clean periods just before."""
        if self.before.latched_by is not None and self.section.latched_by is None:
            k, _, asks = self.history[-1]
            assert Ask.REARM in asks
            tail = self.history[-1 - self.spec.clear_for : -1]
            assert [period for period, _, _ in tail] == list(range(k - self.spec.clear_for, k))
            assert all(verdict is Verdict.ON_TIME for _, verdict, _ in tail)

    @invariant()
    def a_miss_never_drives(self) -> None:
        """The period after which a section drives was on time."""
        if self.history and self.history[-1][1].is_miss:
            assert self.section.state is not D

    @invariant()
    def too_many_misses_never_drive(self) -> None:
        """A section that may write and has reached `latch_after` misses in the window is on hold."""
        if self.section.state in (D, F):
            assert len(self.section.misses) < self.spec.latch_after or self.section.latched_by is not None

    @invariant()
    def the_record_is_bounded_by_the_window(self) -> None:
        """Misses kept are inside the window and in order."""
        misses = self.section.misses
        assert sorted(set(misses)) == list(misses)
        assert all(self.section.k - self.spec.latch_window < miss <= self.section.k for miss in misses)


TestHoldMachine = HoldMachine.TestCase
TestHoldMachine.settings = settings(max_examples=80, stateful_step_count=40, deadline=None)


@given(st.lists(st.sampled_from(Verdict), max_size=60))
def test_without_asks_a_hold_is_final(verdicts: list[Verdict]) -> None:
    """Once on hold, no sequence of verdicts leads out of it."""
    section, seen = driving(), False
    for verdict in verdicts:
        section, _, _ = advance(section, SPEC, section.k + 1, verdict)
        assert section.state is H or not seen
        seen = seen or section.state is H


def test_a_step_keeps_the_latch_unless_told() -> None:
    """The default of a cell is to leave the latch alone."""
    assert Step(D).latch is Latch.KEEP
