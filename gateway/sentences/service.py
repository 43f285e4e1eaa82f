"""Sentences about the service itself: intervals, skipped periods, clocks, tasks."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from gateway.hold import State
from gateway.sentences.notice import Kind, Level, Notice, counted, full_stop
from gateway.verdict import Verdict


@dataclass(frozen=True)
class Interval:
    """What the periods of one summary interval were like.

    Attributes:
        seconds: its length.
        periods: how many periods ran.
        misses: section-periods by verdict, misses only.
        states: sections by state, now.
        held: names of the sections on hold, now.
        slack_median_us, slack_least_us: over the periods with an acknowledged write; None when there was none.
    """

    seconds: float
    periods: int
    misses: Mapping[Verdict, int]
    states: Mapping[State, int]
    held: Sequence[str]
    slack_median_us: float | None
    slack_least_us: float | None


def summary(interval: Interval) -> Notice:
    """One line per summary interval."""
    missed = sum(interval.misses.values())
    causes = ", ".join(f"{verdict} {count}" for verdict, count in sorted(interval.misses.items()) if count)
    states = ", ".join(f"{count} {state}" for state, count in sorted(interval.states.items()) if count)
    held = f" ({', '.join(interval.held)})" if interval.held else ""
    slack = (
        "nothing written"
        if interval.slack_median_us is None or interval.slack_least_us is None
        else f"slack {interval.slack_median_us / 1e3:.1f} ms median, {interval.slack_least_us / 1e3:.1f} ms least"
    )
    return Notice(
        Kind.SUMMARY,
        Level.INFO,
        f"Last {interval.seconds:g} s: {counted(interval.periods, 'period')}, "
        f"{counted(missed, 'section-period')} missed{f' ({causes})' if causes else ''}, {slack}; {states}{held}.",
        detail={
            "seconds": interval.seconds,
            "periods": interval.periods,
            "misses": dict(interval.misses),
            "states": dict(interval.states),
            "held": list(interval.held),
            "slack_median_us": interval.slack_median_us,
            "slack_least_us": interval.slack_least_us,
        },
    )


def skipped(first_k: int, count: int) -> Notice:
    """Whole periods passed without being run."""
    return Notice(
        Kind.SKIPPED,
        Level.WARNING,
        f"{counted(count, 'period')} from {first_k} on did not run: this process was not given the processor in time.",
        detail={"first_k": first_k, "count": count},
    )


def clock_stepped(step_ns: int) -> Notice:
    """The wall clock was moved; periods are not."""
    return Notice(
        Kind.CLOCK,
        Level.WARNING,
        f"The wall clock was stepped by {step_ns / 1e6:+.0f} ms. Periods keep to the monotonic clock.",
        detail={"step_ms": step_ns / 1e6},
    )


def synthesis_broken(why: str) -> Notice:
    """The synthesis refused to run or broke down; every section is frozen for the period."""
    return Notice(
        Kind.SYNTHESIS,
        Level.ERROR,
        f"The synthesis broke down: {full_stop(why)} Its inputs were thrown away.",
        detail={"why": why},
    )


def task_died(task: str, error: str) -> Notice:
    """A supervised task ended that should not have."""
    return Notice(
        Kind.TASK_DIED,
        Level.ERROR,
        f"Our task {task} died: {full_stop(error)} What depends on it is frozen.",
        detail={"task": task, "error": error},
    )
