"""Setting every racer to the same accuracy: as loose as it may be, and as well tuned as a careful user would.

`calibrate` tries, on a small plant of the same kind and horizon, every tuning of a racer, each with the loosest
tolerance that reaches the accuracy in every period, and keeps the fastest few. `verify` runs those on the plant that
is raced, tightens each tolerance until it holds there, too, and enters the fastest.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from statistics import median
from time import perf_counter

from tests.races.contest import Contest
from tests.races.course import Stretch
from tests.races.race import Entrant, Lap, alone, enter, enter_weighed, judged, too_slow, worst_error
from tests.races.racers.protocol import Entry, Setup

TIGHTENED = 10**-0.5
MOST_TIGHTENINGS = 6
FINALISTS = 2


@dataclass(frozen=True)
class Retired:
    """Why a racer does not take part."""

    racer: str
    reason: str


@dataclass(frozen=True)
class Patience:
    """How long is too long, in seconds: for one period, for calibrating one tuning, for verifying one."""

    period_s: float = 2.0
    tuning_s: float = 5.0
    verifying_s: float = 30.0


@dataclass(frozen=True)
class Calibrated:
    """A setup that reaches the accuracy, and its median seconds per period."""

    setup: Setup
    period_s: float


def calibrate(
    contest: Contest, entry: Entry, stretches: Sequence[Stretch], accuracy: float, patience: Patience
) -> tuple[Calibrated, ...] | Retired:
    """Find the fastest setups that reach the accuracy (largest error of first inputs, in spans) on a small contest."""
    found = [
        setup
        for tuning in entry.tunings
        if (setup := _loosest(contest, entry, Setup(0.0, tuning), stretches, accuracy, patience)) is not None
    ]
    if not found:
        return Retired(entry.name, f"does not reach {accuracy:g} of span in time at {contest.size} sections")
    return tuple(sorted(found, key=lambda each: each.period_s)[:FINALISTS])


def _loosest(
    contest: Contest, entry: Entry, setup: Setup, stretches: Sequence[Stretch], accuracy: float, patience: Patience
) -> Calibrated | None:
    """The loosest tolerance that will do, None when none does in time."""
    until = perf_counter() + patience.tuning_s
    for tolerance in entry.tolerances:
        tried = replace(setup, tolerance=tolerance)
        laps = alone(contest, enter(contest, entry, tried), stretches, patience.period_s)
        if _too_slow(laps, patience) or perf_counter() > until:
            return None
        if worst_error(laps) <= accuracy:
            return Calibrated(tried, median(each.duration_s for each in judged(laps)))
    return None


def verify(
    contest: Contest,
    entry: Entry,
    finalists: Sequence[Calibrated],
    stretches: Sequence[Stretch],
    accuracy: float,
    patience: Patience,
) -> Entrant | Retired:
    """Enter the contest that is raced with the finalist that is fastest there, at the accuracy."""
    verified: list[tuple[float, Setup]] = []
    retired = None
    for finalist in finalists:
        found = _tightened(contest, entry, finalist.setup, stretches, accuracy, patience)
        if isinstance(found, Retired):
            retired = found
        else:
            verified.append((found.period_s, found.setup))
    if verified:
        return enter_weighed(contest, entry, min(verified, key=lambda each: each[0])[1])
    return retired or Retired(entry.name, "has no setup to verify")


def _tightened(
    contest: Contest, entry: Entry, setup: Setup, stretches: Sequence[Stretch], accuracy: float, patience: Patience
) -> Calibrated | Retired:
    """This setup, tightened until it reaches the accuracy in all periods of the contest that is raced."""
    error = float("inf")
    until = perf_counter() + patience.verifying_s
    for _ in range(MOST_TIGHTENINGS):
        if perf_counter() > until:
            break
        laps = alone(contest, enter(contest, entry, setup), stretches, patience.period_s)
        if _too_slow(laps, patience):
            return Retired(entry.name, f"took {laps[-1].duration_s:.1f} s for one period")
        error = worst_error(laps)
        if error <= accuracy:
            return Calibrated(setup, median(each.duration_s for each in judged(laps)))
        setup = replace(setup, tolerance=setup.tolerance * TIGHTENED)
    return Retired(entry.name, f"does not reach {accuracy:g} of span (last error {error:.1e})")


def _too_slow(laps: Sequence[Lap], patience: Patience) -> bool:
    return too_slow(laps[-1], patience.period_s)
