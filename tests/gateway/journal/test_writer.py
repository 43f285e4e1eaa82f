"""Tests of `gateway.journal.writer`: the thread behind the journal."""

from __future__ import annotations

import threading
from collections.abc import Callable
from pathlib import Path

import msgspec
import pytest

from gateway.journal import (
    Alarm,
    AlarmKind,
    Journal,
    JournalReader,
    LastRun,
    Previous,
    RunEnd,
    RunStart,
    StorageBusyError,
    StorageUnwritableError,
)
from gateway.journal.backlog import Batch
from gateway.journal.database import Opened, open_to_write
from gateway.journal.schema import JOURNAL
from gateway.journal.store import Store, Unrecordable
from tests.gateway.journal.samples import WALL_NS, event, large_period, outcome, period, run, wall_ns

RUN = run().id
PATIENCE_S = 30.0
"""Longer than anything here takes; only a failing test waits for it."""


def ignore(alarm: Alarm) -> None:
    """Nobody listens."""


def open_journal(path: Path, id_: str = RUN, alarm: Callable[[Alarm], None] = ignore, capacity: int = 1200) -> Journal:
    """A journal with its thread."""
    return Journal.open(path, run(id_), alarm=alarm, wall_ns=wall_ns, capacity=capacity)


class SlowStore(Store):
    """A disk that answers when the test lets it."""

    def __init__(self, path: Path, run: RunStart) -> None:
        self.entered = threading.Event()
        self.release = threading.Event()
        super().__init__(lambda check: open_to_write(path, JOURNAL, WALL_NS, check=check), run)

    def commit(self, batch: Batch) -> tuple[Unrecordable, ...]:
        """Wait, then write."""
        self.entered.set()
        assert self.release.wait(PATIENCE_S)
        return super().commit(batch)


class BuggyStore(Store):
    """An error of ours in the thread."""

    def commit(self, batch: Batch) -> tuple[Unrecordable, ...]:
        """Fail in a way nobody foresaw."""
        raise ZeroDivisionError("our fault")


def test_what_is_flushed_is_on_the_disk(tmp_path: Path) -> None:
    """After a flush a reader sees everything, while the journal is still open."""
    journal = open_journal(tmp_path / "journal")
    for k in range(5):
        assert journal.put_period(period(k))
    assert journal.put_event(event(1))
    assert journal.put_outcome(outcome(2))
    assert journal.flush(PATIENCE_S)
    with JournalReader(tmp_path / "journal") as reader:
        assert [record.k for record in reader.periods(RUN, 0, 100)] == [0, 1, 2, 3, 4]
        assert len(reader.events(RUN)) == 1
        assert len(reader.outcomes(RUN)) == 1
    journal.close(WALL_NS, RunEnd.COMPLETED)


def test_a_run_is_on_the_disk_before_its_first_period(tmp_path: Path) -> None:
    """A start that is killed at once leaves a run without an end."""
    journal = open_journal(tmp_path / "journal")
    with JournalReader(tmp_path / "journal") as reader:
        assert [found.id for found in reader.runs()] == [RUN]
    journal.close(WALL_NS, RunEnd.COMPLETED)


def test_closing_writes_what_waits_and_marks_the_end(tmp_path: Path) -> None:
    """Nothing put before the close is lost, and the end is there."""
    journal = open_journal(tmp_path / "journal")
    for k in range(500):
        journal.put_period(period(k))
    assert journal.close(WALL_NS + 3, RunEnd.STOPPED, PATIENCE_S)
    with JournalReader(tmp_path / "journal") as reader:
        assert reader.span(RUN) == (0, 499)
        assert (reader.run(RUN).ended_ns, reader.run(RUN).how) == (WALL_NS + 3, RunEnd.STOPPED)
        assert reader.losses(RUN) == ()


def test_closing_twice_is_one_close(tmp_path: Path) -> None:
    """The first end stands."""
    journal = open_journal(tmp_path / "journal")
    assert journal.close(WALL_NS, RunEnd.STOPPED)
    assert journal.close(WALL_NS + 9, RunEnd.FAILED)
    with JournalReader(tmp_path / "journal") as reader:
        assert reader.run(RUN).how is RunEnd.STOPPED


def test_after_the_close_a_record_is_lost_and_counted(tmp_path: Path) -> None:
    """Whoever puts too late is told."""
    journal = open_journal(tmp_path / "journal")
    journal.close(WALL_NS, RunEnd.STOPPED)
    assert not journal.put_period(period(1))
    assert journal.statistics().lost_periods == 1


def test_the_next_run_knows_how_the_last_one_ended(tmp_path: Path) -> None:
    """Clean after a close; the first one had no predecessor."""
    first = open_journal(tmp_path / "journal", "first")
    assert first.previous == LastRun(Previous.NONE)
    first.close(WALL_NS, RunEnd.STOPPED)
    second = open_journal(tmp_path / "journal", "second")
    assert second.previous.ended_cleanly
    assert second.previous.run is not None
    assert second.previous.run.id == "first"
    second.close(WALL_NS, RunEnd.STOPPED)


def test_a_damaged_journal_is_replaced_and_told(tmp_path: Path) -> None:
    """The new journal begins with an event that names the file kept, and the start is not a clean one."""
    path = tmp_path / "journal"
    path.write_bytes(bytes(range(256)) * 64)
    journal = open_journal(path)
    assert not journal.previous.ended_cleanly
    assert journal.aside is not None
    assert journal.flush(PATIENCE_S)
    with JournalReader(path) as reader:
        (told,) = reader.events(RUN)
    assert journal.aside.name in told.sentence
    journal.close(WALL_NS, RunEnd.STOPPED)


def test_two_controls_cannot_share_a_journal(tmp_path: Path) -> None:
    """The second one is refused, and the first goes on."""
    journal = open_journal(tmp_path / "journal", "first")
    with pytest.raises(StorageBusyError, match="written by process"):
        open_journal(tmp_path / "journal", "second")
    assert journal.put_event(event(1))
    assert journal.close(WALL_NS, RunEnd.STOPPED)


def test_a_failed_open_leaves_no_lock(tmp_path: Path) -> None:
    """After an error at the start the next attempt is not told that the file is busy."""
    open_journal(tmp_path / "journal").close(WALL_NS, RunEnd.STOPPED)
    with pytest.raises(ValueError, match="run id"):
        open_journal(tmp_path / "journal")
    open_journal(tmp_path / "journal", "second").close(WALL_NS, RunEnd.STOPPED)


def test_nothing_starts_on_a_full_disk(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A run that cannot be recorded from its first line does not begin; the error says what to do."""

    def full(path: Path, run: RunStart, wall_ns: Callable[[], int]) -> Store:
        def open_(check: bool) -> Opened:
            opened = open_to_write(path, JOURNAL, WALL_NS)
            opened.connection.pragma("max_page_count", int(opened.connection.pragma("page_count") or 0))
            return opened

        return Store(open_, run)

    monkeypatch.setattr("gateway.journal.writer.Store.at", full)
    with pytest.raises(StorageUnwritableError, match=r"is full\. Make room"):
        Journal.open(
            tmp_path / "journal",
            msgspec.structs.replace(run(), canonical=b"x" * 50_000),
            alarm=ignore,
            wall_ns=wall_ns,
        )


def test_a_slow_disk_never_blocks_a_period(tmp_path: Path) -> None:
    """While one commit hangs, periods are queued, then counted as lost; nothing waits, and alarms come at once."""
    alarms: list[AlarmKind] = []
    store = SlowStore(tmp_path / "journal", run())
    journal = Journal(
        store,
        run(),
        alarm=lambda alarm: alarms.append(alarm.kind),
        wall_ns=wall_ns,
        capacity=8,
        previous=LastRun(Previous.NONE),
    )
    journal.put_period(period(0))
    assert store.entered.wait(PATIENCE_S)
    kept = [journal.put_period(period(k)) for k in range(1, 12)]
    assert kept == [True] * 6 + [False] * 5  # the eighth place is taken by the event that tells of the long queue
    assert alarms == [AlarmKind.BEHIND, AlarmKind.LOSING]
    assert not journal.flush(0.0)
    statistics = journal.statistics()
    assert (statistics.depth, statistics.capacity, statistics.lost_periods, statistics.periods) == (8, 8, 5, 0)
    store.release.set()
    assert journal.close(WALL_NS, RunEnd.STOPPED, PATIENCE_S)
    assert alarms[-1] is AlarmKind.RECOVERED
    with JournalReader(tmp_path / "journal") as reader:
        assert [record.k for record in reader.periods(RUN, 0, 100)] == [0, 1, 2, 3, 4, 5, 6]
        assert [(loss.count, loss.first_k, loss.last_k) for loss in reader.losses(RUN)] == [(5, 7, 11)]


def test_a_disk_that_stays_full_does_not_hang_the_close(tmp_path: Path) -> None:
    """The close gives up when its time is over; without an end the next start is not a clean one."""

    def open_(check: bool) -> Opened:
        opened = open_to_write(tmp_path / "journal", JOURNAL, WALL_NS, check=check)
        opened.connection.pragma("max_page_count", 30)
        return opened

    failing = threading.Event()
    journal = Journal(
        Store(open_, run()),
        run(),
        alarm=lambda alarm: failing.set() if alarm.kind is AlarmKind.FAILING else None,
        wall_ns=wall_ns,
        previous=LastRun(Previous.NONE),
    )
    k = 0
    while not failing.is_set():
        journal.put_period(large_period(k))
        journal.flush(0.01)
        k += 1
    assert journal.put_period(period(k))
    assert journal.statistics().failing
    assert not journal.close(WALL_NS, RunEnd.STOPPED, timeout_s=0.0)
    assert not journal.statistics().alive
    with JournalReader(tmp_path / "journal") as reader:
        assert reader.run(RUN).how is None


@pytest.mark.filterwarnings("ignore::pytest.PytestUnhandledThreadExceptionWarning")
def test_a_dead_thread_is_told_and_blocks_nobody(tmp_path: Path) -> None:
    """An error of ours in the thread: an alarm, losses counted, flush and close return."""
    alarms: list[Alarm] = []
    store = BuggyStore(lambda check: open_to_write(tmp_path / "journal", JOURNAL, WALL_NS, check=check), run())
    journal = Journal(store, run(), alarm=alarms.append, wall_ns=wall_ns, previous=LastRun(Previous.NONE))
    journal.put_period(period(1))
    assert not journal.flush(PATIENCE_S)
    assert [alarm.kind for alarm in alarms] == [AlarmKind.DEAD]
    assert "ZeroDivisionError: our fault" in alarms[0].notice.sentence
    assert not journal.put_period(period(2))
    assert journal.statistics().lost_periods == 1
    assert not journal.close(WALL_NS, RunEnd.STOPPED)
    assert not journal.statistics().alive


def test_a_period_of_another_layout_is_refused(tmp_path: Path) -> None:
    """Rows that nobody could assign to sections are a mistake of the caller, told at once."""
    journal = open_journal(tmp_path / "journal")
    with pytest.raises(ValueError, match="period 1 has 1 section rows, the run's layout has 2"):
        journal.put_period(msgspec.structs.replace(period(1), sections=period(1).sections[:1]))
    journal.close(WALL_NS, RunEnd.STOPPED)


def test_readers_follow_a_journal_that_is_being_written(tmp_path: Path) -> None:
    """Readers in other threads see whole periods, in order, ever more, and never an error."""
    journal = open_journal(tmp_path / "journal")
    problems: list[str] = []
    seen: list[int] = []
    started = threading.Barrier(4)

    def follow() -> None:
        last = -1
        with JournalReader(tmp_path / "journal") as reader:
            started.wait(PATIENCE_S)
            while last < 299:
                for record in reader.periods(RUN, last + 1, 1000):
                    if record != period(record.k) or record.k != last + 1:
                        problems.append(f"{record.k} after {last}")
                    last = record.k
        seen.append(last)

    threads = [threading.Thread(target=follow) for _ in range(3)]
    for thread in threads:
        thread.start()
    started.wait(PATIENCE_S)
    for k in range(300):
        journal.put_period(period(k))
        if k % 50 == 0:
            journal.flush(PATIENCE_S)
    journal.flush(PATIENCE_S)
    for thread in threads:
        thread.join(PATIENCE_S)
    journal.close(WALL_NS, RunEnd.COMPLETED)
    assert (problems, seen) == ([], [299] * 3)


def test_statistics_count_what_is_on_the_disk(tmp_path: Path) -> None:
    """Periods, notes and the last period are those committed."""
    journal = open_journal(tmp_path / "journal")
    for k in (7, 8):
        journal.put_period(period(k))
    journal.put_event(event(1))
    journal.flush(PATIENCE_S)
    statistics = journal.statistics()
    assert (statistics.periods, statistics.notes, statistics.last_k, statistics.depth) == (2, 1, 8, 0)
    assert (statistics.lost_periods, statistics.lost_notes, statistics.failing, statistics.alive) == (0, 0, False, True)
    journal.close(WALL_NS, RunEnd.STOPPED)
