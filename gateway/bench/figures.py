"""The figures of a finished run, from its journal alone.

    error of a section    e_k = reading − target, good readings only, of its first measured signal that has a target
    mean error            mean of e_k over the last `window_s`, percent of span
    work                  start to acknowledgement of a period
    slack                 budget left at the acknowledgement, counted to the write cut-off; its bad end is the small one

Quantiles are `numpy.percentile` over all periods that have the quantity (definitions as `gateway.deadline`).
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from math import nan

import numpy as np

from gateway.bench.following import targets_after
from gateway.bench.story import Step, excused
from gateway.deadline import LARGE_IS_BAD_PERCENTS, SMALL_IS_BAD_PERCENTS, Quantiles
from gateway.hold import State
from gateway.journal import JournalReader, Outcome, PeriodRecord, RunEnd, RunRecord
from gateway.plantfile.plant import Plant, Role, SectionSpec, Signal
from gateway.verdict import Verdict

WINDOW_S = 30.0
"""Seconds at the end over which errors are averaged."""


@dataclass(frozen=True)
class SectionFigures:
    """How one section fared.

    Attributes:
        name: of the section.
        tag: signal the errors are of; empty when it has none with a target.
        unit: of that signal.
        value: its last good reading, NaN without one.
        target: at the end.
        mean_error_percent: over the last seconds, of span; NaN without a reading.
        states: periods by state.
        misses: periods by verdict, misses only.
        unprovoked: misses that no step of the story explains.
        state: at the end.
    """

    name: str
    tag: str
    unit: str
    value: float
    target: float
    mean_error_percent: float
    states: Mapping[State, int]
    misses: Mapping[Verdict, int]
    unprovoked: int
    state: State


@dataclass(frozen=True)
class Figures:
    """A run in figures.

    Attributes:
        run: its id.
        periods: recorded.
        skipped: that did not run although others after them did.
        seconds: from the first to the end of the last.
        window_s: over which mean errors were taken.
        sections: in the plant's order.
        work_us, slack_us: None when no period has them.
        out_of_limits: values written outside their hard limits.
        lost: records the journal could not keep.
        ended: whether the run ended in order.
    """

    run: str
    periods: int
    skipped: int
    seconds: float
    window_s: float
    sections: tuple[SectionFigures, ...]
    work_us: Quantiles | None
    slack_us: Quantiles | None
    out_of_limits: int
    lost: int
    ended: bool

    @property
    def unprovoked(self) -> int:
        """Section-periods missed for no reason of the story's."""
        return sum(section.unprovoked for section in self.sections)

    @property
    def held(self) -> tuple[str, ...]:
        """Sections on hold at the end."""
        return tuple(section.name for section in self.sections if section.state is State.HOLDING)


def figures_of(
    reader: JournalReader, run: RunRecord, plant: Plant, steps: Sequence[Step] = (), window_s: float = WINDOW_S
) -> Figures:
    """Work out the figures of a run.

    Args:
        reader: of its journal.
        run: the run.
        plant: the plant file it ran with.
        steps: of the story: what they disturb is provoked.
        window_s: length of the end over which errors are averaged.

    Raises:
        StorageDamagedError: the journal cannot be read.
    """
    span = reader.span(run.id)
    last_k = -1 if span is None else span[1]
    outcomes = reader.outcomes(run.id)
    gathering = [_Section(spec, steps, outcomes) for spec in plant.sections]
    window_k = last_k - round(window_s / plant.period_s)
    work: list[float] = []
    slack: list[float] = []
    out, count, first_ns = 0, 0, 0
    for period in () if span is None else reader.periods(run.id, span[0], span[1] + 1):
        first_ns = first_ns or period.due_ns
        count += 1
        if period.timing.total_us is not None:
            work.append(period.timing.total_us)
        if period.slack_us is not None:
            slack.append(period.slack_us)
        for i, section in enumerate(gathering):
            section.add(period, i, (period.due_ns - first_ns) / 1e9, in_window=period.k > window_k)
            out += section.out_of_limits(period, i)
    return Figures(
        run=run.id,
        periods=count,
        skipped=0 if span is None else span[1] - span[0] + 1 - count,
        seconds=0.0 if span is None else (span[1] - span[0] + 1) * plant.period_s,
        window_s=window_s,
        sections=tuple(section.figures() for section in gathering),
        work_us=_quantiles(work, LARGE_IS_BAD_PERCENTS, worst_percent=100.0),
        slack_us=_quantiles(slack, SMALL_IS_BAD_PERCENTS, worst_percent=0.0),
        out_of_limits=out,
        lost=sum(loss.count for loss in reader.losses(run.id)),
        ended=run.how not in (None, RunEnd.FAILED),
    )


def aimed_signal(section: SectionSpec) -> tuple[int, Signal] | None:
    """A section's first measured signal that has a target, and its place among the measured ones."""
    for place, signal in enumerate(section.signals_of(Role.MEASURED)):
        if signal.target is not None:
            return place, signal
    return None


class _Section:
    """Sums of one section while its periods go by."""

    def __init__(self, spec: SectionSpec, steps: Sequence[Step], outcomes: tuple[Outcome, ...]) -> None:
        self._spec = spec
        self._aimed = aimed_signal(spec)
        self._hard = [signal.hard for signal in spec.signals_of(Role.DRIVEN)]
        self._steps = steps
        self._targets = _targets_by_period(self._aimed[1], outcomes) if self._aimed else []
        self._errors: list[float] = []
        self._value = nan
        self._states: Counter[State] = Counter()
        self._misses: Counter[Verdict] = Counter()
        self._unprovoked = 0
        self._state = State.WATCHING

    def add(self, period: PeriodRecord, i: int, at_s: float, *, in_window: bool) -> None:
        row = period.sections[i]
        self._state = row.state
        self._states[row.state] += 1
        if row.verdict.is_miss:
            self._misses[row.verdict] += 1
            self._unprovoked += not excused(self._steps, self._spec.name, at_s)
        if self._aimed is None:
            return
        reading = row.measured[self._aimed[0]]
        if reading.quality.usable and isinstance(reading.value, int | float):
            self._value = float(reading.value)
            if in_window:
                self._errors.append(self._value - self._target(period.k))

    def out_of_limits(self, period: PeriodRecord, i: int) -> int:
        """Values this period wrote outside their hard limits."""
        written = period.sections[i].written
        return sum(value < low or value > high for value, (low, high) in zip(written, self._hard, strict=True))

    def figures(self) -> SectionFigures:
        signal = self._aimed[1] if self._aimed else None
        mean = float(np.mean(self._errors)) if self._errors else nan
        return SectionFigures(
            name=self._spec.name,
            tag="" if signal is None else signal.tag,
            unit="" if signal is None else signal.unit,
            value=self._value,
            target=nan if signal is None else self._targets[-1][1],
            mean_error_percent=nan if signal is None else 100.0 * mean / signal.width,
            states=dict(self._states),
            misses=dict(self._misses),
            unprovoked=self._unprovoked,
            state=self._state,
        )

    def _target(self, k: int) -> float:
        return next(target for since, target in reversed(self._targets) if since <= k)


def _targets_by_period(signal: Signal, outcomes: tuple[Outcome, ...]) -> list[tuple[int, float]]:
    """(first period, target) of a signal, in order; the plant file's from the beginning."""
    found = [(0, nan if signal.target is None else signal.target)]
    for outcome in outcomes:
        changed = targets_after({}, (outcome,))
        if signal.tag in changed:
            found.append((outcome.k or 0, changed[signal.tag]))
    return found


def _quantiles(values: list[float], percents: tuple[float, ...], *, worst_percent: float) -> Quantiles | None:
    if not values:
        return None
    median, p99, p999, worst = (float(value) for value in np.percentile(values, (*percents, worst_percent)))
    return Quantiles(len(values), median, p99, p999, worst)
