"""What must not disturb a period and is therefore done between two of them: garbage, clock steps, summaries."""

from __future__ import annotations

import gc
from collections import Counter
from collections.abc import Sequence
from statistics import median

from gateway.hold import State
from gateway.period import Happened
from gateway.sentences import Interval
from gateway.standing import Standing
from gateway.verdict import Verdict


class GarbageKeeper:
    """Collects garbage in the slack of a period, never inside one: an automatic collection can cost 200 ms.

    Everything alive at the start is frozen, so that what remains is what the periods made.
    """

    def __init__(self, full_every: int) -> None:
        self._full_every = full_every
        self._count = 0

    def start(self) -> None:
        """Take collection over from the interpreter."""
        gc.collect()
        gc.freeze()
        gc.disable()

    def between_periods(self) -> None:
        """Collect the young generation, all of them now and then."""
        self._count += 1
        gc.collect(2 if self._count % self._full_every == 0 else 0)

    def stop(self) -> None:
        """Hand collection back to the interpreter."""
        gc.enable()
        gc.unfreeze()


class IntervalSummary:
    """Gathers what the one line per summary interval says; forgets it when it was said."""

    def __init__(self, names: Sequence[str], every_periods: int, period_s: float) -> None:
        self._names = tuple(names)
        self._every = every_periods
        self._period_s = period_s
        self._periods = 0
        self._misses: Counter[Verdict] = Counter()
        self._slack_us: list[int] = []

    def add(self, after: Standing, happened: Happened) -> Interval | None:
        """Count one period; the interval when it is full."""
        self._periods += 1
        self._misses.update(verdict for verdict in happened.verdicts if verdict.is_miss)
        if happened.timing.slack_us is not None:
            self._slack_us.append(happened.timing.slack_us)
        if self._periods < self._every:
            return None
        interval = Interval(
            seconds=self._periods * self._period_s,
            periods=self._periods,
            misses=dict(self._misses),
            states=dict(Counter(hold.state for hold in after.holds)),
            held=[name for name, hold in zip(self._names, after.holds, strict=True) if hold.state is State.HOLDING],
            slack_median_us=median(self._slack_us) if self._slack_us else None,
            slack_least_us=min(self._slack_us) if self._slack_us else None,
        )
        self._periods, self._misses, self._slack_us = 0, Counter(), []
        return interval
