"""Deadlines of a period: when each phase must be done, where the time went, and what many periods were like.

    due          gather cut-off         synthesise cut-off         write cut-off    next due
     |--- gather ---|--- estimate, synthesise ---|--- judge, write ---|--- record ---|

Instants are monotonic nanoseconds. The kernels are told to stop a tenth of their share before their cut-off, so that
the best they have arrives in time instead of just too late.

Per period, in microseconds: start (how late it began), gather, estimate (admission included), synthesise, write
(judging and the last look included), total (start to acknowledgement), and **slack**: the budget left when the last
write was acknowledged, counted to the write cut-off; negative when it came later.

Quantiles are exact, equal to `numpy.percentile` over every period since the start, up to `capacity` periods (two days
at 500 ms); beyond, they are of a uniform random sample of that size (algorithm R, "Random sampling with a reservoir",
ACM Trans. Math. Software 11 (1985) 37-57), while counts and the worst stay exact. For slack the bad end is the small
one: its 99 % value is the slack that 99 % of the periods had at least.
"""

from __future__ import annotations

import random
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from enum import StrEnum

import numpy as np

from gateway.clock import Clock
from gateway.hold import State
from gateway.plantfile.plant import Cutoffs
from gateway.verdict import Verdict

KERNEL_RESERVE = 0.1
CAPACITY = 345_600
LARGE_IS_BAD_PERCENTS = (50.0, 99.0, 99.9)
SMALL_IS_BAD_PERCENTS = (50.0, 1.0, 0.1)


@dataclass(frozen=True, slots=True)
class Cutoff:
    """Instants of one period, monotonic nanoseconds, in order.

    Attributes:
        due_ns: its start.
        gather_ns: readings that come later are missing.
        stop_ns: the kernels stop.
        synthesise_ns: a result that comes later is thrown away.
        write_ns: a write that is not acknowledged by then is unknown.
        end_ns: start of the next period.
    """

    due_ns: int
    gather_ns: int
    stop_ns: int
    synthesise_ns: int
    write_ns: int
    end_ns: int

    @classmethod
    def of(cls, due_ns: int, period_ns: int, cutoffs: Cutoffs) -> Cutoff:
        """Cut-offs of the period that starts at `due_ns`.

        Raises:
            ValueError: the fractions do not grow within the period, or the period is not positive.
        """
        if period_ns <= 0:
            raise ValueError(f"period_ns = {period_ns}: a period must be a positive number of nanoseconds")
        if not 0 < cutoffs.gather < cutoffs.synthesise < cutoffs.write <= 1:
            raise ValueError(
                f"cut-offs gather = {cutoffs.gather}, synthesise = {cutoffs.synthesise}, write = {cutoffs.write}: "
                "must grow in this order, above 0, at most 1"
            )
        stop = cutoffs.synthesise - KERNEL_RESERVE * (cutoffs.synthesise - cutoffs.gather)
        gather, stopped, synthesise, write = (
            due_ns + round(fraction * period_ns)
            for fraction in (cutoffs.gather, stop, cutoffs.synthesise, cutoffs.write)
        )
        return cls(due_ns, gather, stopped, synthesise, write, due_ns + period_ns)


class Phase(StrEnum):
    """Phases that are timed."""

    GATHER = "gather"
    ESTIMATE = "estimate"
    SYNTHESISE = "synthesise"
    WRITE = "write"


class Stopwatch:
    """Where one period's time went, microseconds; None for a phase that did not end.

    Attributes:
        start_us: how late the period started.
        gather_us, estimate_us, synthesise_us, write_us: time since the lap before.
        total_us: from the start to the acknowledgement.
        slack_us: budget left at the acknowledgement, to the write cut-off.
    """

    def __init__(self, clock: Clock, cut: Cutoff) -> None:
        self._clock = clock
        self._cut = cut
        self._began_ns = self._lap_ns = clock.monotonic_ns()
        self.start_us = (self._began_ns - cut.due_ns) // 1000
        self.gather_us: int | None = None
        self.estimate_us: int | None = None
        self.synthesise_us: int | None = None
        self.write_us: int | None = None
        self.total_us: int | None = None
        self.slack_us: int | None = None

    @classmethod
    def start(cls, clock: Clock, cut: Cutoff) -> Stopwatch:
        """Start with the period's first instruction."""
        return cls(clock, cut)

    def lap(self, phase: Phase | str) -> None:
        """Note that a phase has ended now and the next one begins.

        Raises:
            ValueError: there is no such phase, or it ended before.
        """
        phase = Phase(phase)
        field = f"{phase}_us"
        if getattr(self, field) is not None:
            raise ValueError(f"phase {phase} ended already in this period: a stopwatch serves one period")
        now_ns = self._clock.monotonic_ns()
        setattr(self, field, (now_ns - self._lap_ns) // 1000)
        self._lap_ns = now_ns

    def acknowledged(self) -> None:
        """Note that the period's last write was acknowledged now.

        Raises:
            ValueError: it was noted before.
        """
        self.lap(Phase.WRITE)
        self.total_us = (self._lap_ns - self._began_ns) // 1000
        self.slack_us = (self._cut.write_ns - self._lap_ns) // 1000


QUANTITIES = ("start_us", "gather_us", "estimate_us", "synthesise_us", "write_us", "total_us", "slack_us", "iterations")
SMALL_IS_BAD = frozenset({"slack_us"})


@dataclass(frozen=True, slots=True)
class Quantiles:
    """One quantity over many periods.

    Attributes:
        periods: in how many it was there; all values are over these.
        median: half of the periods were no worse.
        p99: 99 % of the periods were no worse.
        p999: 99.9 % of the periods were no worse.
        worst: none was worse.
    """

    periods: int
    median: float
    p99: float
    p999: float
    worst: float


@dataclass(frozen=True)
class SectionTally:
    """How one section fared: periods by verdict and by the state it was in after each."""

    verdicts: Mapping[Verdict, int]
    states: Mapping[State, int]

    @property
    def misses(self) -> int:
        """Periods that counted against it."""
        return sum(count for verdict, count in self.verdicts.items() if verdict.is_miss)


@dataclass(frozen=True)
class DeadlineSummary:
    """Snapshot of the statistics.

    Attributes:
        periods: how many ran.
        exact: whether the quantiles cover every one of them.
        quantiles: by quantity; without those that never had a value.
        sections: tally by name.
        period_s: Ts, to turn counts of periods into seconds.
    """

    periods: int
    exact: bool
    quantiles: Mapping[str, Quantiles]
    sections: Mapping[str, SectionTally]
    period_s: float

    def misses(self) -> dict[Verdict, int]:
        """Section-periods by verdict, misses only, those that occurred."""
        totals = {v: sum(tally.verdicts[v] for tally in self.sections.values()) for v in Verdict if v.is_miss}
        return {verdict: count for verdict, count in totals.items() if count}

    def time_in_state_s(self) -> dict[State, float]:
        """Seconds in each state, summed over the sections."""
        return {state: self.period_s * sum(tally.states[state] for tally in self.sections.values()) for state in State}


class DeadlineStatistics:
    """Bounded accumulators over any number of periods; see the head of the module for what stays exact.

    Args:
        sections: names, in the order of the verdicts.
        period_s: Ts, seconds.
        capacity: periods kept for quantiles. Memory is touched as it fills, 64 bytes a period.
        seed: of the sampling beyond it.

    Raises:
        ValueError: the capacity is below 1.
    """

    def __init__(self, sections: Sequence[str], period_s: float, capacity: int = CAPACITY, seed: int = 0) -> None:
        if capacity < 1:
            raise ValueError(f"capacity = {capacity}: must be at least 1 period")
        self._names = tuple(sections)
        self._period_s = period_s
        self._rows = np.empty((capacity, len(QUANTITIES)))
        self._rng = random.Random(seed)
        self._periods = 0
        self._present = np.zeros(len(QUANTITIES), dtype=np.int64)
        self._worst = np.full(len(QUANTITIES), np.nan)
        self._verdicts = [dict.fromkeys(Verdict, 0) for _ in self._names]
        self._states = [dict.fromkeys(State, 0) for _ in self._names]

    def add(
        self, watch: Stopwatch, iterations: int | None, verdicts: Sequence[Verdict], states: Sequence[State]
    ) -> None:
        """Account for one period.

        Args:
            watch: its stopwatch.
            iterations: of its synthesis, None when there was none.
            verdicts: per section.
            states: per section, after the period.

        Raises:
            ValueError: verdicts or states do not fit the sections; nothing was counted then.
        """
        if not len(verdicts) == len(states) == len(self._names):
            raise ValueError(
                f"{len(verdicts)} verdicts and {len(states)} states: give one of each for {len(self._names)} sections"
            )
        given = [*(getattr(watch, name) for name in QUANTITIES[:-1]), iterations]
        row = np.array([np.nan if value is None else value for value in given], dtype=float)
        capacity = len(self._rows)
        place = self._periods if self._periods < capacity else self._rng.randrange(self._periods + 1)
        if place < capacity:
            self._rows[place] = row
        self._periods += 1
        self._present += ~np.isnan(row)
        self._worst = np.where(_SMALL, np.fmin(self._worst, row), np.fmax(self._worst, row))
        for i, (verdict, state) in enumerate(zip(verdicts, states, strict=True)):
            self._verdicts[i][verdict] += 1
            self._states[i][state] += 1

    def summary(self) -> DeadlineSummary:
        """Snapshot so far. Sorts every kept period: milliseconds for a day, so not inside a period."""
        kept = self._rows[: min(self._periods, len(self._rows))]
        quantiles = {}
        for column, name in enumerate(QUANTITIES):
            values = kept[:, column]
            values = values[~np.isnan(values)]
            if values.size:
                percents = SMALL_IS_BAD_PERCENTS if name in SMALL_IS_BAD else LARGE_IS_BAD_PERCENTS
                median, p99, p999 = (float(value) for value in np.percentile(values, percents))
                present, worst = int(self._present[column]), float(self._worst[column])
                quantiles[name] = Quantiles(present, median, p99, p999, worst)
        return DeadlineSummary(
            periods=self._periods,
            exact=self._periods <= len(self._rows),
            quantiles=quantiles,
            sections={
                name: SectionTally(dict(self._verdicts[i]), dict(self._states[i])) for i, name in enumerate(self._names)
            },
            period_s=self._period_s,
        )


_SMALL = np.array([name in SMALL_IS_BAD for name in QUANTITIES])
