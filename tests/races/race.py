"""Measuring: every period of a course by every racer, in turning order, again and again."""

from __future__ import annotations

import ctypes
import gc
import os
from collections.abc import Sequence
from dataclasses import dataclass
from math import inf
from pathlib import Path
from time import perf_counter

from tests.races.contest import Contest
from tests.races.course import Stretch
from tests.races.racers.protocol import Answer, Entry, Racer, Setup

WARM_UP = 3  # periods at the head of a course that nobody is judged by: the first is cold


@dataclass(frozen=True)
class Lap:
    """One racer's one period."""

    racer: str
    repeat: int
    period: int
    duration_s: float
    iterations: int
    error_spans: float


@dataclass(frozen=True)
class Entrant:
    """A racer set up for one contest, and the memory that took."""

    entry: Entry
    setup: Setup
    racer: Racer
    memory_bytes: int


def enter(contest: Contest, entry: Entry, setup: Setup) -> Entrant:
    """Set a racer up without asking how much memory it takes."""
    return Entrant(entry, setup, entry.enter(contest, setup), 0)


def enter_weighed(contest: Contest, entry: Entry, setup: Setup) -> Entrant:
    """Set a racer up and see what it holds: what it says itself, else by how much the process grew."""
    before = resident_bytes()
    racer = entry.enter(contest, setup)
    grown = max(0, resident_bytes() - before)
    return Entrant(entry, setup, racer, grown if entry.held_bytes is None else entry.held_bytes(contest))


def resident_bytes() -> int:
    """Memory of this process that is really there, what is free given back; 0 where the system does not say."""
    statm = Path("/proc/self/statm")
    if not statm.exists():
        return 0
    gc.collect()
    give_back = getattr(ctypes.CDLL(None), "malloc_trim", None)
    if give_back is not None:
        give_back(0)
    return int(statm.read_text().split()[1]) * os.sysconf("SC_PAGESIZE")


def lap(contest: Contest, entrant: Entrant, stretch: Stretch, repeat: int, period: int) -> Lap:
    """Time one solve and hold its answer against the truth."""
    duration_s, answer = timed(entrant.racer, stretch)
    error = contest.error_spans(answer.inputs, stretch.truth)
    return Lap(entrant.entry.name, repeat, period, duration_s, answer.iterations, error)


def timed(racer: Racer, stretch: Stretch) -> tuple[float, Answer]:
    """Duration in seconds and answer of one solve, garbage collection off."""
    gc.disable()
    try:
        start = perf_counter()
        answer = racer.solve(stretch.measured, stretch.data)
        return perf_counter() - start, answer
    finally:
        gc.enable()


def race(contest: Contest, entrants: Sequence[Entrant], stretches: Sequence[Stretch], repeats: int) -> list[Lap]:
    """Run the whole course `repeats` times; the warm-up is run but not returned."""
    laps = []
    for repeat in range(repeats):
        for entrant in entrants:
            entrant.racer.forget()
        for period, stretch in enumerate(stretches):
            turn = (repeat + period) % len(entrants)
            in_turn = (*entrants[turn:], *entrants[:turn])
            laps += [lap(contest, entrant, stretch, repeat, period) for entrant in in_turn]
    return judged(laps)


def alone(contest: Contest, entrant: Entrant, stretches: Sequence[Stretch], patience_s: float) -> list[Lap]:
    """One racer by itself over the course, cold at its head; ends at the first period that takes too long.

    The warm-up may take ten times as long.
    """
    entrant.racer.forget()
    laps: list[Lap] = []
    for period, stretch in enumerate(stretches):
        laps.append(lap(contest, entrant, stretch, 0, period))
        if too_slow(laps[-1], patience_s):
            break
    return laps


def too_slow(each: Lap, patience_s: float) -> bool:
    """Whether a lap took longer than anybody waits."""
    return each.duration_s > patience_s * (1 if each.period >= WARM_UP else 10)


def judged(laps: Sequence[Lap]) -> list[Lap]:
    """The laps after the warm-up."""
    return [each for each in laps if each.period >= WARM_UP]


def worst_error(laps: Sequence[Lap]) -> float:
    """Largest error of these laps after the warm-up, in spans; infinite when there is none."""
    return max((each.error_spans for each in judged(laps)), default=inf)


def by_racer(laps: Sequence[Lap]) -> dict[str, list[Lap]]:
    """Laps of every racer, in order of time."""
    out: dict[str, list[Lap]] = {}
    for each in laps:
        out.setdefault(each.racer, []).append(each)
    return out
