"""Tests of `gateway.service` in virtual time: a run from its first period to its last, and its journal."""

from __future__ import annotations

import asyncio
import gc
from collections import Counter
from pathlib import Path

import msgspec
import pytest

from gateway.authority import Authority
from gateway.clock import NS
from gateway.design import PlantDesign
from gateway.hold import State
from gateway.journal import JournalReader, RunEnd
from gateway.verdict import Verdict
from tests.gateway.running import running, states

# Periods and their records --------------------------------------------------------------------------------------------


async def test_every_period_is_recorded_once_and_in_order(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """k without a gap, dated by the wall clock, every section driving from the first on."""
    async with running(tarn_row, tmp_path) as run:
        await run.periods(12)
        records = run.recorded()
        first = records[0].k
        assert [record.k for record in records] == list(range(first, first + 12))
        assert [record.due_ns for record in records] == [k * 500_000_000 for k in range(first, first + 12)]
        assert all({row.state for row in record.sections} == {State.DRIVING} for record in records)
        assert run.service.tally.periods == 12


async def test_every_transition_is_one_event_and_shares_its_line(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """Eight sections begin to drive: eight events, one line. Tank 4 freezes: one event more, one line more."""
    async with running(tarn_row, tmp_path) as run:
        await run.periods(3)
        assert len(run.events("transition")) == 8
        assert len(run.said("transition")) == 1
        run.plant.provoke("dropout tank-4.level for 1 s")
        await run.periods(1)
        event = run.events("transition")[-1]
        assert (event.section, event.k, event.detail["after"]) == ("tank-4", run.recorded()[-1].k, "frozen")
        await run.periods(4)
        assert len(run.events("transition")) == 10
        assert len(run.said("transition")) == 3


async def test_what_is_logged_is_journaled_in_the_same_words(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """All but transitions, which the log gathers by cause."""
    async with running(tarn_row, tmp_path) as run:
        await run.periods(3)
        run.ask("hold tank-4")
        run.plant.provoke("permit off for 1 s")
        run.clock.step_wall(2 * NS)
        await run.periods(4)
        logged = Counter(notice.sentence for notice, _ in run.lines if notice.kind != "transition")
        with JournalReader(run.path) as reader:
            journaled = Counter(event.sentence for event in reader.events(run.id) if event.kind != "transition")
        assert logged == journaled
        assert {"request", "permit", "clock"} <= {str(notice.kind) for notice, _ in run.lines}


async def test_the_same_seed_gives_the_same_journal_twice(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """Records and events, bit for bit, faults and requests included."""
    journals = []
    for attempt in ("one", "two"):
        folder = tmp_path / attempt
        folder.mkdir()
        async with running(tarn_row, folder) as run:
            run.plant.provoke("release tank-3.consumer")
            await run.periods(10)
            run.ask("target tank-2.level 24")
            run.plant.provoke("freeze tank-4.level for 6 s")
            await run.periods(14)
            run.ask("rehearse slow 2")
            await run.periods(14)
            with JournalReader(run.path) as reader:
                events = [msgspec.json.encode(event) for event in reader.events(run.id)]
            journals.append(([msgspec.msgpack.encode(record) for record in run.recorded()], events))
    assert journals[0] == journals[1]


async def test_a_run_ends_after_its_time(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """Three seconds are six periods."""
    async with running(tarn_row, tmp_path, for_s=3.0) as run:
        await run.periods(50)
        assert run.task.done()
        assert len(run.recorded()) == 6


async def test_a_run_ends_when_it_is_told_to(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """At once when it waits for the next period; that period does not run any more."""
    async with running(tarn_row, tmp_path) as run:
        await run.periods(3)
        await run.ended()
        await asyncio.sleep(0)
        assert len(run.recorded()) == 3
        assert run.clock.next_ns() is None


async def test_an_orderly_end_hands_every_section_back(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """Its last write; no watchdog has to run out."""
    async with running(tarn_row, tmp_path) as run:
        await run.periods(3)
        assert len(run.in_charge()) == 8
        await run.ended()
        assert run.in_charge() == []
        assert run.link.sent[-1].bits == {f"tank-{n}": False for n in range(1, 9)}


async def test_a_hand_back_that_is_not_acknowledged_is_told(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """The sections are named; the panel's watchdog takes them."""
    async with running(tarn_row, tmp_path) as run:
        await run.periods(3)
        run.link.refuses = {"tank-4.in_charge"}
        await run.ended()
        (notice,) = run.said("write_unknown")
        assert notice.detail["sections"] == ["tank-4"]
        assert run.in_charge() == ["tank-4"]
        run.clock.spend(3 * NS)
        assert run.in_charge() == []


async def test_a_run_that_never_took_anything_hands_nothing_back(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """An observer's last word is its last heartbeat."""
    async with running(tarn_row, tmp_path, authority=Authority.OBSERVE) as run:
        await run.periods(3)
        await run.ended()
        assert {tuple(sent.names) for sent in run.link.sent} == {("panel.heartbeat",)}


async def test_a_period_that_raises_ends_the_run(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """Our fault: nothing is handed back by code that is known to be wrong, the panel's watchdog does it."""

    async def broken(due_ns: int) -> object:
        raise ZeroDivisionError("ours")

    async with running(tarn_row, tmp_path, how=RunEnd.FAILED) as run:
        await run.periods(3)
        run.link.gather = broken  # type: ignore[method-assign, assignment]
        with pytest.raises(ZeroDivisionError, match="ours"):
            await run.periods(1)
        assert len(run.in_charge()) == 8
        run.clock.spend(3 * NS)
        assert run.in_charge() == []
        assert gc.isenabled()


async def test_a_cancelled_run_leaves_nothing_behind(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """Neither a sleeper nor a collector that is switched off; the panel's watchdog does the rest."""
    async with running(tarn_row, tmp_path, how=RunEnd.FAILED) as run:
        await run.periods(3)
        run.task.cancel()
        with pytest.raises(asyncio.CancelledError):
            await run.task
        await asyncio.sleep(0)
        assert run.clock.next_ns() is None
        assert gc.isenabled()


# Time -----------------------------------------------------------------------------------------------------------------


async def test_periods_that_passed_are_skipped_and_told(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """The processor was gone for three and a half periods: three are lost, counted as misses, and said."""
    async with running(tarn_row, tmp_path) as run:
        await run.periods(4)
        last = run.recorded()[-1].k
        run.clock.spend(round(3.4 * 500_000_000) + 500_000_000)
        await run.periods(1)
        records = run.recorded()
        assert records[-1].k == last + 4
        assert run.service.tally.skipped == 3
        (notice,) = run.said("skipped")
        assert notice.detail == {"first_k": last + 1, "count": 3}
        assert records[-1].timing.start_us == pytest.approx(200_000, abs=1)
        assert states(run) == {State.HOLDING}


async def test_a_step_of_the_wall_clock_is_told_and_moves_no_period(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """k goes on by one, instants stay; only the labels follow the new wall clock."""
    async with running(tarn_row, tmp_path) as run:
        await run.periods(4)
        run.clock.step_wall(3600 * NS)
        await run.periods(4)
        (event,) = run.events("clock")
        assert event.detail["step_ms"] == 3_600_000.0
        records = run.recorded()
        assert [record.k - records[0].k for record in records] == list(range(8))
        assert records[4].due_ns - records[3].due_ns == 3600 * NS + 500_000_000
        assert states(run) == {State.DRIVING}
        assert run.service.tally.missed == 0


async def test_a_peers_clock_that_is_set_back_costs_one_period(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """The plant stamps by the same wall clock here: readings from the past are stale once, and k goes on by one."""
    async with running(tarn_row, tmp_path) as run:
        await run.periods(4)
        run.clock.step_wall(-3600 * NS)
        await run.periods(3)
        records = run.recorded()
        assert [record.k - records[0].k for record in records] == list(range(7))
        assert [record.sections[0].verdict for record in records[3:]] == [
            Verdict.ON_TIME,
            Verdict.BLIND,
            Verdict.ON_TIME,
            Verdict.ON_TIME,
        ]
        assert len(run.events("clock")) == 1


async def test_slack_is_what_is_left_when_the_write_is_acknowledged(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """450 ms to the write's cut-off, less what gathering took."""
    async with running(tarn_row, tmp_path) as run:
        run.link.takes_ns = 30_000_000
        await run.periods(2)
        assert run.recorded()[-1].slack_us == 420_000
        assert run.service.deadlines().quantiles["slack_us"].worst == 420_000


async def test_a_summary_is_told_every_minute(tarn_row: PlantDesign, tmp_path: Path) -> None:
    """120 periods of 500 ms."""
    async with running(tarn_row, tmp_path) as run:
        await run.periods(119)
        assert run.said("summary") == []
        await run.periods(1)
        assert len(run.said("summary")) == 1


async def test_garbage_is_collected_between_periods_and_handed_back_at_the_end(
    tarn_row: PlantDesign, tmp_path: Path
) -> None:
    """Never by the interpreter in the middle of one."""
    async with running(tarn_row, tmp_path) as run:
        await run.periods(1)
        assert not gc.isenabled()
        await run.ended()
        assert gc.isenabled()
