"""Tests of `gateway.journal.recorder` and `store`: full disks, failing disks, and what is told about them.

No thread here: every attempt is made by the test. The disk that fills up is a limit on the number of pages
(`max_page_count`), which SQLite answers with the same error as a full disk; the disk that fails is a function that
gives no connection.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path

import apsw
import msgspec
import pytest

from gateway.journal import Alarm, AlarmKind, JournalReader, RunEnd
from gateway.journal.backlog import Backlog
from gateway.journal.database import Opened, moved_aside, open_to_write
from gateway.journal.recorder import FIRST_RETRY_S, LONGEST_RETRY_S, Recorder, retry_s
from gateway.journal.schema import JOURNAL
from gateway.journal.store import Store
from tests.gateway.journal.samples import (
    WALL_NS,
    event,
    large_period,
    outcome,
    period,
    run,
    unrecordable_period,
    wall_ns,
)

RUN = run().id


@dataclass
class Disk:
    """The disk under the journal: room for so many pages more, or out of order altogether."""

    path: Path
    spare_pages: int | None = None
    broken: Exception | None = None
    connection: apsw.Connection | None = None
    checks: list[bool] = field(default_factory=list)

    def open(self, check: bool) -> Opened:
        """Give a connection under today's conditions."""
        self.checks.append(check)
        if self.broken is not None:
            raise self.broken
        opened = open_to_write(self.path, JOURNAL, WALL_NS, check=check)
        self.connection = opened.connection
        self.fill()
        return opened

    def fill(self) -> None:
        """Let the limit bite on the connection that is open."""
        if self.spare_pages is not None and self.connection is not None:
            used = int(self.connection.pragma("page_count") or 0)
            self.connection.pragma("max_page_count", used + self.spare_pages)


@dataclass
class Bench:
    """A recorder on such a disk, and the alarms it raised."""

    disk: Disk
    recorder: Recorder
    backlog: Backlog
    store: Store
    alarms: list[Alarm]

    @property
    def kinds(self) -> list[AlarmKind]:
        """Kinds of the alarms so far."""
        return [alarm.kind for alarm in self.alarms]

    def work_off(self) -> None:
        """Attempt until nothing waits."""
        while self.recorder.attempt() is not None:
            pass


@pytest.fixture
def bench(tmp_path: Path) -> Iterator[Bench]:
    """A recorder with room for eight records, on a sound disk."""
    disk = Disk(tmp_path / "journal")
    store = Store(disk.open, run())
    alarms: list[Alarm] = []
    backlog = Backlog(8)
    yield Bench(disk, Recorder(store, backlog, alarm=alarms.append, wall_ns=wall_ns), backlog, store, alarms)
    store.close()


def read(bench: Bench) -> JournalReader:
    """A reader on the bench's journal."""
    return JournalReader(bench.disk.path)


def ks(bench: Bench) -> list[int]:
    """Periods that are on the disk."""
    with read(bench) as reader:
        return [record.k for record in reader.periods(RUN, 0, 10**6)]


def test_one_attempt_writes_all_that_waits(bench: Bench) -> None:
    """Periods, events and outcomes are committed together, and counted."""
    bench.recorder.put_period(period(1))
    bench.recorder.put_note(event(1, k=1))
    bench.recorder.put_note(outcome(3))
    assert bench.recorder.attempt() is None
    assert ks(bench) == [1]
    assert (bench.recorder.progress.periods, bench.recorder.progress.notes, bench.recorder.progress.last_k) == (1, 2, 1)
    assert bench.alarms == []


def test_a_full_disk_raises_one_alarm_and_backs_off(bench: Bench) -> None:
    """Three refused attempts: one alarm that says why, longer waits, nothing lost while there is room in memory."""
    bench.disk.spare_pages = 0
    bench.disk.fill()
    bench.recorder.put_period(large_period(1))
    assert [bench.recorder.attempt() for _ in range(3)] == [0.1, 0.2, 0.4]
    assert bench.kinds == [AlarmKind.FAILING]
    assert "database or disk is full" in bench.alarms[0].notice.sentence
    assert bench.recorder.progress.failing
    assert bench.backlog.lost == (0, 0)
    assert ks(bench) == []


def test_after_a_full_disk_the_journal_tells_the_whole_story(bench: Bench) -> None:
    """Room again: what waited is written, what was lost is named, and the outage has its beginning and its end."""
    bench.disk.spare_pages = 0
    bench.disk.fill()
    kept = []
    for k in range(1, 12):
        kept.append(bench.recorder.put_period(large_period(k)))
        bench.recorder.attempt()
    assert len(bench.backlog) == bench.backlog.capacity
    bench.disk.spare_pages = None
    bench.work_off()
    # Eight places, two of them taken by the events that tell of the failure and of the long queue.
    assert kept == [True] * 6 + [False] * 5
    assert ks(bench) == [1, 2, 3, 4, 5, 6]
    with read(bench) as reader:
        losses, events = reader.losses(RUN), reader.events(RUN)
    assert [(loss.what, loss.cause, loss.count, loss.first_k, loss.last_k, loss.wall_ns) for loss in losses] == [
        ("period", "the queue was full", 5, 7, 11, WALL_NS)
    ]
    assert [(told.kind, told.detail.get("state")) for told in events] == [
        ("journal", "failing"),
        ("journal", "behind"),
        ("journal_lost", None),
        ("journal", "recovered"),
    ]
    assert events[2].sentence == "The journal lacks 5 periods between periods 7 and 11: the queue was full."
    assert events[3].detail == {"state": "recovered", "failed_attempts": 11, "lost": 5}
    assert bench.kinds == [AlarmKind.FAILING, AlarmKind.BEHIND, AlarmKind.LOSING, AlarmKind.RECOVERED]


def test_after_recovery_the_next_outage_is_a_new_alarm(bench: Bench) -> None:
    """An alarm that ended can be raised again, with its own counts."""
    for k in (1, 2):
        bench.disk.spare_pages = 0
        bench.disk.fill()
        bench.recorder.put_period(large_period(k))
        bench.recorder.attempt()
        bench.disk.spare_pages = None
        bench.work_off()
    assert bench.kinds == [AlarmKind.FAILING, AlarmKind.RECOVERED] * 2
    assert bench.alarms[-1].notice.detail["failed_attempts"] == 1


def test_events_outlive_samples_in_a_full_queue(bench: Bench) -> None:
    """However long nothing is written, what happened is told; samples gave way and are counted."""
    for k in range(1, 8):
        bench.recorder.put_period(period(k))
    for number in range(5):
        bench.recorder.put_note(event(number))
    bench.work_off()
    with read(bench) as reader:
        told = [found.detail["number"] for found in reader.events(RUN) if found.kind == "transition"]
        losses = reader.losses(RUN)
    assert told == [0, 1, 2, 3, 4]
    assert [(loss.what, loss.cause, loss.count, loss.first_k) for loss in losses] == [
        ("period", "gave way to an event", 5, 1)
    ]
    assert ks(bench) == [6, 7]


@pytest.mark.parametrize("broken", [apsw.IOError("disk I/O error"), apsw.CantOpenError("unable to open")])
def test_a_disk_that_is_gone_is_tried_again(bench: Bench, broken: apsw.Error) -> None:
    """The file is opened anew at each attempt, and written as soon as that works."""
    bench.disk.spare_pages = 0
    bench.disk.fill()
    bench.recorder.put_period(large_period(1))
    bench.recorder.attempt()
    bench.disk.broken, bench.disk.spare_pages = broken, None
    assert bench.recorder.attempt() == 0.2
    assert bench.recorder.attempt() == 0.4
    bench.disk.broken = None
    bench.work_off()
    assert ks(bench) == [1]
    assert bench.disk.checks == [True, False, False, False]


def test_a_file_damaged_while_it_is_written_is_moved_aside(bench: Bench) -> None:
    """SQLite calls the file damaged: it is kept under another name, and the run goes on in a new one that says so."""
    for k in range(1, 6):
        bench.recorder.put_period(large_period(k))
    bench.work_off()
    bench.disk.spare_pages = 0
    bench.disk.fill()
    bench.recorder.put_period(large_period(6))
    bench.recorder.attempt()
    bench.disk.spare_pages = None
    bench.store.close()
    content = bytearray(bench.disk.path.read_bytes())
    content[2 * 4096 :] = b"\xa5" * (len(content) - 2 * 4096)
    bench.disk.path.write_bytes(content)
    assert bench.recorder.attempt() == 0.2
    assert bench.recorder.attempt() is not None
    bench.work_off()
    assert bench.disk.checks == [True, False, True]
    assert ks(bench) == [6]
    (aside,) = moved_aside(bench.disk.path)
    assert aside.read_bytes() == bytes(content)
    with read(bench) as reader:
        assert [run.id for run in reader.runs()] == [RUN]
        (told,) = [found for found in reader.events(RUN) if found.detail.get("state") == "moved_aside"]
    assert aside.name in told.sentence


def test_a_record_no_disk_would_take_does_not_block_the_others(bench: Bench) -> None:
    """It is left out, counted and told; its neighbours are written."""
    bench.recorder.put_period(period(1))
    bench.recorder.put_period(unrecordable_period(2))
    bench.recorder.put_period(period(3))
    bench.work_off()
    assert ks(bench) == [1, 3]
    assert (bench.recorder.progress.periods, bench.recorder.progress.last_k) == (2, 3)
    with read(bench) as reader:
        (loss,) = reader.losses(RUN)
    assert (loss.what, loss.cause, loss.first_k) == ("period", "cannot be recorded (TypeError)", 2)
    assert bench.kinds == [AlarmKind.UNRECORDABLE]
    assert "object cannot be recorded" in bench.alarms[0].notice.sentence


def test_the_same_period_written_again_is_no_loss(bench: Bench) -> None:
    """A commit may be on the disk although it was reported as failed; writing it once more changes nothing."""
    for _ in range(2):
        bench.recorder.put_period(period(1))
        bench.work_off()
    assert ks(bench) == [1]
    assert (bench.alarms, bench.backlog.lost) == ([], (0, 0))


def test_another_record_of_a_period_is_an_error_of_ours(bench: Bench) -> None:
    """The first record of a period stands; a different one is counted and told, and blocks nothing."""
    bench.recorder.put_period(period(1))
    bench.work_off()
    bench.recorder.put_period(msgspec.structs.replace(period(1), iterations=99))
    bench.recorder.put_period(period(2))
    bench.work_off()
    with read(bench) as reader:
        assert [record.iterations for record in reader.periods(RUN, 1, 3)] == [17, 17]
        assert [loss.cause for loss in reader.losses(RUN)] == ["cannot be recorded (ConstraintError)"]


def test_the_same_fault_of_ours_is_one_alarm(bench: Bench) -> None:
    """A record like this in every period does not flood a person; the counts tell how many."""
    for k in range(5):
        bench.recorder.put_period(unrecordable_period(k))
        bench.work_off()
    assert bench.kinds == [AlarmKind.UNRECORDABLE]
    with read(bench) as reader:
        assert sum(loss.count for loss in reader.losses(RUN)) == 5


def test_the_end_waits_for_the_disk(bench: Bench) -> None:
    """A run whose end could not be written is not marked; the next attempt that works marks it."""
    bench.disk.spare_pages = 0
    bench.disk.fill()
    bench.recorder.put_period(large_period(1))
    bench.recorder.attempt()
    bench.disk.broken = apsw.IOError("disk I/O error")
    assert bench.recorder.end(WALL_NS + 9, RunEnd.STOPPED) == 0.2
    bench.disk.broken, bench.disk.spare_pages = None, None
    assert bench.recorder.end(WALL_NS + 9, RunEnd.STOPPED) is None
    with read(bench) as reader:
        found = reader.run(RUN)
    assert (found.ended_ns, found.how) == (WALL_NS + 9, RunEnd.STOPPED)


def test_a_run_id_is_used_once(bench: Bench) -> None:
    """Two runs of one name could not be told apart; the error names it."""
    with pytest.raises(ValueError, match=f"run id '{RUN}' is in the journal already"):
        Store(Disk(bench.disk.path).open, run())


def test_waits_double_up_to_the_longest() -> None:
    """Attempts never stop, and never come more often than at first nor more rarely than the longest wait."""
    waits = [retry_s(failures) for failures in range(1, 2000)]
    assert waits[0] == FIRST_RETRY_S
    assert waits == sorted(waits)
    assert waits[-1] == LONGEST_RETRY_S
