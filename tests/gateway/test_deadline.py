"""Tests of `gateway.deadline`."""

from dataclasses import astuple

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gateway.clock import VirtualClock
from gateway.deadline import Cutoff, DeadlineStatistics, Phase, Stopwatch
from gateway.hold import State
from gateway.plantfile.plant import Cutoffs
from gateway.verdict import Verdict

MS, PERIOD_NS = 1_000_000, 500_000_000
PHASES = list(Phase)


def cut_at(due_ns: int) -> Cutoff:
    """The default cut-offs of a 500 ms period."""
    return Cutoff.of(due_ns, PERIOD_NS, Cutoffs())


def timed(*phases_us: int, late_us: int = 0) -> Stopwatch:
    """A stopwatch that went through these phases, in order; fewer than four end early."""
    clock = VirtualClock(seed=5)
    cut = cut_at(clock.monotonic_ns())
    clock.spend(late_us * 1000)
    watch = Stopwatch.start(clock, cut)
    for phase, duration_us in zip(PHASES, phases_us, strict=False):
        clock.spend(duration_us * 1000)
        if phase is Phase.WRITE:
            watch.acknowledged()
        else:
            watch.lap(phase)
    return watch


def statistics(capacity: int = 1000) -> DeadlineStatistics:
    """Statistics of one section."""
    return DeadlineStatistics(["tank-1"], 0.5, capacity)


def test_cut_offs_are_fractions_of_the_period() -> None:
    """30 %, 60 %, 90 % of 500 ms, the kernels stopping a tenth of their share before."""
    assert cut_at(7) == Cutoff(7, 7 + 150 * MS, 7 + 285 * MS, 7 + 300 * MS, 7 + 450 * MS, 7 + 500 * MS)


@pytest.mark.parametrize(
    "cutoffs", [Cutoffs(0.0, 0.6, 0.9), Cutoffs(0.6, 0.6, 0.9), Cutoffs(0.3, 0.95, 0.9), Cutoffs(0.3, 0.6, 1.1)]
)
def test_cut_offs_must_grow_within_the_period(cutoffs: Cutoffs) -> None:
    """Phases that end in the wrong order, at once or after the period are misuse."""
    with pytest.raises(ValueError, match="must grow in this order"):
        Cutoff.of(0, PERIOD_NS, cutoffs)


def test_a_period_must_be_positive() -> None:
    """Misuse names the argument."""
    with pytest.raises(ValueError, match=r"^period_ns = 0"):
        Cutoff.of(0, 0, Cutoffs())


@given(
    due_ns=st.integers(0, 2**62),
    period_ns=st.integers(1_000_000, 10**11),
    fractions=st.lists(st.floats(0.01, 1), min_size=3, max_size=3, unique_by=lambda one: round(one, 3)),
)
def test_instants_are_in_order(due_ns: int, period_ns: int, fractions: list[float]) -> None:
    """Whatever the fractions, no phase ends before the one it follows, and none after the period."""
    cut = Cutoff.of(due_ns, period_ns, Cutoffs(*sorted(fractions)))
    assert list(astuple(cut)) == sorted(astuple(cut))


def test_laps_are_the_time_since_the_lap_before() -> None:
    """Every phase gets its own share, and the total is their sum."""
    watch = timed(100, 20, 3000, 500, late_us=7)
    assert (watch.start_us, watch.gather_us, watch.estimate_us) == (7, 100, 20)
    assert (watch.synthesise_us, watch.write_us, watch.total_us) == (3000, 500, 3620)


def test_slack_is_counted_to_the_write_cut_off() -> None:
    """450 ms of budget, less lateness and work."""
    assert timed(100, 20, 3000, 500, late_us=380).slack_us == 450_000 - 4000


def test_slack_is_negative_after_the_cut_off() -> None:
    """An acknowledgement 50 ms too late is 50 ms below zero."""
    assert timed(0, 0, 0, 500_000).slack_us == -50_000


def test_a_phase_that_did_not_end_has_no_time() -> None:
    """A period given up after gathering has neither total nor slack."""
    watch = timed(100)
    assert (watch.gather_us, watch.estimate_us, watch.total_us, watch.slack_us) == (100, None, None, None)


def test_a_phase_ends_once() -> None:
    """A second lap of the same phase would hide the first."""
    watch = timed(100)
    with pytest.raises(ValueError, match="phase gather ended already"):
        watch.lap("gather")


def test_an_unknown_phase_is_misuse() -> None:
    """Only phases that are recorded can be timed."""
    with pytest.raises(ValueError, match="ponder"):
        timed().lap("ponder")


@settings(deadline=None)
@given(st.lists(st.tuples(*[st.integers(0, 10**6)] * 5), min_size=1, max_size=200))
def test_quantiles_equal_numpy_exactly(periods: list[tuple[int, ...]]) -> None:
    """Check 20: the same numbers as numpy on the raw values, to the last bit, slack from its bad end."""
    collected = statistics()
    for late, *phases in periods:
        collected.add(timed(*phases, late_us=late), None, [Verdict.ON_TIME], [State.DRIVING])
    summary = collected.summary()
    totals = np.array([sum(phases) for _, *phases in periods])
    slacks = np.array([450_000 - sum(period) for period in periods])
    total, slack = summary.quantiles["total_us"], summary.quantiles["slack_us"]
    assert summary.exact
    assert [total.median, total.p99, total.p999] == np.percentile(totals, [50, 99, 99.9]).tolist()
    assert [slack.median, slack.p99, slack.p999] == np.percentile(slacks, [50, 1, 0.1]).tolist()
    assert (total.worst, slack.worst) == (totals.max(), slacks.min())


def test_quantiles_are_over_the_periods_that_had_the_quantity() -> None:
    """Periods without a synthesis do not count as fast ones."""
    collected = statistics()
    for iterations in (10, None, 30):
        collected.add(timed(1, 1, 1, 1), iterations, [Verdict.ON_TIME], [State.DRIVING])
    iterations_seen = collected.summary().quantiles["iterations"]
    assert (iterations_seen.periods, iterations_seen.median, iterations_seen.worst) == (2, 20.0, 30.0)


def test_a_quantity_that_was_never_there_is_left_out() -> None:
    """No number is made up."""
    collected = statistics()
    collected.add(timed(1), None, [Verdict.LATE], [State.FROZEN])
    assert set(collected.summary().quantiles) == {"start_us", "gather_us"}


def test_nothing_yet_is_a_summary_too() -> None:
    """Before the first period there is nothing, exactly."""
    summary = statistics().summary()
    assert (summary.periods, summary.exact, summary.quantiles, summary.misses()) == (0, True, {}, {})


def test_beyond_capacity_counts_and_worst_stay_exact() -> None:
    """A hundred periods into room for ten: said to be a sample, but the worst and the counts are of all."""
    collected = statistics(capacity=10)
    collected.add(timed(0, 0, 0, 999), 1, [Verdict.LATE], [State.FROZEN])
    for number in range(99):
        collected.add(timed(0, 0, 0, number), 1, [Verdict.ON_TIME], [State.DRIVING])
    summary = collected.summary()
    total = summary.quantiles["total_us"]
    assert (summary.periods, summary.exact, total.periods, total.worst) == (100, False, 100, 999.0)
    assert summary.misses() == {Verdict.LATE: 1}


def test_at_capacity_it_is_still_exact() -> None:
    """The last period that fits is not yet a sample."""
    collected = statistics(capacity=10)
    for number in range(10):
        collected.add(timed(0, 0, 0, number), 1, [Verdict.ON_TIME], [State.DRIVING])
    assert collected.summary().exact


def test_beyond_capacity_every_period_is_kept_equally_often() -> None:
    """Over many seeds, each of four periods is the one found in a reservoir of one about a quarter of the time."""
    watches = [timed(0, 0, 0, number) for number in range(4)]
    seen = np.zeros(4)
    for seed in range(2000):
        collected = DeadlineStatistics([], 0.5, 1, seed)
        for watch in watches:
            collected.add(watch, None, [], [])
        seen[int(collected.summary().quantiles["total_us"].median)] += 1
    # 2000 draws at 1/4: standard deviation 19.4, five of them on either side.
    assert abs(seen - 500).max() < 5 * 19.4


def test_the_sample_is_the_same_for_the_same_seed() -> None:
    """A soak in virtual time gives the same summary twice."""
    summaries = []
    for _ in range(2):
        collected = statistics(capacity=5)
        for number in range(50):
            collected.add(timed(0, 0, 0, number), 1, [Verdict.ON_TIME], [State.DRIVING])
        summaries.append(collected.summary())
    assert summaries[0] == summaries[1]


def test_misses_and_states_are_tallied_by_section() -> None:
    """Each section has its own counts; the plant's are their sums, states in seconds."""
    collected = DeadlineStatistics(["tank-1", "tank-2"], 0.5)
    collected.add(timed(1), 1, [Verdict.ON_TIME, Verdict.BLIND], [State.DRIVING, State.FROZEN])
    collected.add(timed(1), 1, [Verdict.ON_TIME, Verdict.BLIND], [State.DRIVING, State.HOLDING])
    collected.add(timed(1), 1, [Verdict.LATE, Verdict.LATE], [State.FROZEN, State.HOLDING])
    summary = collected.summary()
    assert (summary.sections["tank-1"].misses, summary.sections["tank-2"].misses) == (1, 3)
    assert summary.misses() == {Verdict.BLIND: 2, Verdict.LATE: 2}
    assert summary.time_in_state_s() == {
        State.DRIVING: 1.0,
        State.FROZEN: 1.0,
        State.HOLDING: 1.0,
        State.WATCHING: 0.0,
    }


def test_a_summary_does_not_change_afterwards() -> None:
    """It is a snapshot."""
    collected = statistics()
    collected.add(timed(1), 1, [Verdict.LATE], [State.FROZEN])
    summary = collected.summary()
    collected.add(timed(1), 1, [Verdict.LATE], [State.FROZEN])
    assert summary.misses() == {Verdict.LATE: 1}


def test_verdicts_must_fit_the_sections() -> None:
    """A mismatch is misuse, and nothing of it is counted."""
    collected = statistics()
    with pytest.raises(ValueError, match="give one of each for 1 sections"):
        collected.add(timed(1), 1, [], [State.DRIVING])
    assert collected.summary().periods == 0


def test_capacity_must_be_positive() -> None:
    """Misuse names the argument."""
    with pytest.raises(ValueError, match=r"^capacity = 0"):
        statistics(capacity=0)
