"""Tests of `gateway.upkeep`: garbage between periods, and the figures of one interval."""

from __future__ import annotations

import gc
from collections.abc import Iterator

import pytest

from gateway.hold import State
from gateway.upkeep import GarbageKeeper, IntervalSummary
from gateway.verdict import Verdict
from tests.gateway.virtual import Rig


class Loop:
    """Something only the collector can free."""

    alive = 0

    def __init__(self) -> None:
        self.itself = self
        Loop.alive += 1

    def __del__(self) -> None:
        Loop.alive -= 1


@pytest.fixture
def keeper() -> Iterator[GarbageKeeper]:
    """A keeper at work, every third collection a full one."""
    keeper = GarbageKeeper(full_every=3)
    keeper.start()
    yield keeper
    keeper.stop()


def test_collection_is_taken_from_the_interpreter_and_given_back() -> None:
    """While periods run nothing is collected by itself."""
    keeper = GarbageKeeper(full_every=3)
    keeper.start()
    assert not gc.isenabled()
    assert gc.get_freeze_count() > 0
    keeper.stop()
    assert gc.isenabled()
    assert gc.get_freeze_count() == 0


def test_what_a_period_left_is_freed_after_it(keeper: GarbageKeeper) -> None:
    """Not during it."""
    before = Loop.alive
    Loop()
    assert Loop.alive == before + 1
    keeper.between_periods()
    assert Loop.alive == before


def test_what_grew_old_is_freed_now_and_then(keeper: GarbageKeeper) -> None:
    """A young collection passes it over, every third one looks at everything."""
    before = Loop.alive
    kept = Loop()
    gc.collect(0)
    gc.collect(1)
    del kept
    keeper.between_periods()
    keeper.between_periods()
    assert Loop.alive == before + 1
    keeper.between_periods()
    assert Loop.alive == before


async def test_an_interval_says_nothing_before_it_is_full(rig: Rig) -> None:
    """And then tells what its periods were like."""
    summary = IntervalSummary(rig.names, 4, 0.5)
    intervals = []
    for _ in range(4):
        (happened,) = await rig.run()
        intervals.append(summary.add(rig.standing, happened))
    assert intervals[:3] == [None] * 3
    interval = intervals[3]
    assert interval is not None
    assert (interval.seconds, interval.periods, interval.misses) == (2.0, 4, {})
    assert interval.states == {State.DRIVING: 8}
    assert interval.held == []


async def test_misses_count_section_periods_by_verdict(rig: Rig) -> None:
    """One late period of eight sections, one blind section in another."""
    await rig.run(2)
    summary = IntervalSummary(rig.names, 3, 0.5)
    rig.ask("rehearse slow 1")
    (late,) = await rig.run()
    summary.add(rig.standing, late)
    rig.plant.provoke("dropout tank-4.level for 0.6 s")
    (blind,) = await rig.run()
    summary.add(rig.standing, blind)
    rig.ask("hold tank-7")
    (last,) = await rig.run()
    interval = summary.add(rig.standing, last)
    assert interval is not None
    assert interval.misses == {Verdict.LATE: 8, Verdict.BLIND: 1}
    assert interval.held == ["tank-7"]


async def test_an_interval_forgets_what_was_said(rig: Rig) -> None:
    """The next one starts from nothing."""
    summary = IntervalSummary(rig.names, 1, 0.5)
    rig.ask("rehearse slow 1")
    (late,) = await rig.run()
    first = summary.add(rig.standing, late)
    (good,) = await rig.run()
    second = summary.add(rig.standing, good)
    assert first is not None
    assert second is not None
    assert (first.misses, second.misses) == ({Verdict.LATE: 8}, {})


async def test_slack_is_its_median_and_its_least(rig: Rig) -> None:
    """In virtual time gathering alone takes time, as long as it is told to."""
    summary = IntervalSummary(rig.names, 3, 0.5)
    interval = None
    for milliseconds in (10, 30, 20):
        rig.link.takes_ns = milliseconds * 1_000_000
        (happened,) = await rig.run()
        interval = summary.add(rig.standing, happened)
    assert interval is not None
    assert (interval.slack_median_us, interval.slack_least_us) == (430_000, 420_000)
