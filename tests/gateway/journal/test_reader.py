"""Tests of `gateway.journal.reader`."""

from collections.abc import Iterator
from pathlib import Path

import apsw
import msgspec
import pytest

from gateway.journal import JournalReader, RunEnd, StorageDamagedError, reader
from gateway.journal.backlog import Batch
from gateway.journal.store import Store
from tests.gateway.journal.samples import LAYOUT, WALL_NS, event, outcome, period, run, wall_ns

RUN = run().id


@pytest.fixture
def store(tmp_path: Path) -> Iterator[Store]:
    """A journal with one run, ready to be written."""
    store = Store.at(tmp_path / "journal", run(), wall_ns)
    yield store
    store.close()


@pytest.fixture
def journal(tmp_path: Path, store: Store) -> Iterator[JournalReader]:
    """A reader on it."""
    with JournalReader(tmp_path / "journal") as journal:
        yield journal


def test_a_run_is_read_as_it_was_started(journal: JournalReader) -> None:
    """Who, what, where and which plant; open as long as it runs."""
    (found,) = journal.runs()
    assert (found.ended_ns, found.how) == (None, None)
    assert {name: getattr(found, name) for name in run().__struct_fields__} == msgspec.structs.asdict(run())
    assert found.layout == LAYOUT
    assert journal.run(RUN) == found


def test_an_ended_run_says_when_and_how(store: Store, journal: JournalReader) -> None:
    """The reader sees the end as soon as it is on the disk."""
    store.end(WALL_NS + 77, RunEnd.COMPLETED)
    assert (journal.run(RUN).ended_ns, journal.run(RUN).how) == (WALL_NS + 77, RunEnd.COMPLETED)


def test_an_unknown_run_is_an_error(journal: JournalReader) -> None:
    """A run that is not there is not an empty one."""
    with pytest.raises(KeyError, match="nobody"):
        journal.run("nobody")


def test_periods_are_read_as_they_were_put(store: Store, journal: JournalReader) -> None:
    """From k0 on, before k1, in order, as the same frozen objects."""
    store.commit(Batch(periods=tuple(period(k) for k in (3, 4, 5, 6))))
    assert list(journal.periods(RUN, 4, 6)) == [period(4), period(5)]
    assert journal.span(RUN) == (3, 6)


def test_a_run_without_periods_has_no_span(journal: JournalReader) -> None:
    """Nothing recorded is None, not zero."""
    assert journal.span(RUN) is None
    assert list(journal.periods(RUN, 0, 10)) == []


def test_gaps_between_chunks_are_crossed(store: Store, journal: JournalReader, monkeypatch: pytest.MonkeyPatch) -> None:
    """Periods that were not recorded do not end the reading, wherever the chunks end."""
    monkeypatch.setattr(reader, "CHUNK", 2)
    there = [1, 2, 9, 10, 11, 40]
    store.commit(Batch(periods=tuple(period(k) for k in there)))
    assert [record.k for record in journal.periods(RUN, 0, 100)] == there


def test_reading_periods_does_not_hold_the_log(tmp_path: Path, store: Store, journal: JournalReader) -> None:
    """Between two periods a reader holds no read transaction, so that the log can be emptied under it."""
    store.commit(Batch(periods=tuple(period(k) for k in range(2000))))
    reading = journal.periods(RUN, 0, 2000)
    next(reading)
    store.commit(Batch(periods=(period(5000),)))
    other = apsw.Connection(str(tmp_path / "journal"))
    assert other.execute("PRAGMA wal_checkpoint(TRUNCATE)").get[0] == 0
    other.close()
    assert sum(1 for _ in reading) == 1999


def test_events_since_a_number(store: Store, journal: JournalReader) -> None:
    """A page asks for what is new since the last event it knows."""
    store.commit(Batch(notes=tuple(event(number, k=number) for number in range(4))))
    known = journal.events(RUN, limit=2)
    assert [found.detail["number"] for found in known] == [0, 1]
    new = journal.events(RUN, since=known[-1].seq)
    assert [found.detail["number"] for found in new] == [2, 3]
    assert msgspec.structs.replace(new[0], seq=0) == event(2, k=2)


def test_outcomes_are_read_as_they_were_put(store: Store, journal: JournalReader) -> None:
    """Who asked what and what became of it."""
    store.commit(Batch(notes=(outcome(1), event(1), outcome(2))))
    assert [msgspec.structs.replace(found, seq=0) for found in journal.outcomes(RUN)] == [outcome(1), outcome(2)]


def test_runs_are_kept_apart(tmp_path: Path, store: Store, journal: JournalReader) -> None:
    """Two runs in one file do not see each other's periods and events."""
    store.commit(Batch(periods=(period(1),), notes=(event(1),)))
    store.close()
    second = Store.at(tmp_path / "journal", run("second"), wall_ns)
    second.commit(Batch(periods=(period(1), period(2)), notes=(event(2),)))
    second.close()
    assert [found.id for found in journal.runs()] == [RUN, "second"]
    assert (journal.span(RUN), journal.span("second")) == ((1, 1), (1, 2))
    assert [found.detail["number"] for found in journal.events("second")] == [2]


def test_rows_that_cannot_be_decoded_are_damage(tmp_path: Path, store: Store, journal: JournalReader) -> None:
    """A torn record is named as such, never shown as if it were one."""
    store.commit(Batch(periods=(period(1),)))
    other = apsw.Connection(str(tmp_path / "journal"))
    other.execute("UPDATE periods SET rows = ?", (b"\x92\x01",))
    other.close()
    with pytest.raises(StorageDamagedError, match="cannot be read"):
        list(journal.periods(RUN, 0, 10))


def test_what_readers_hold_is_frozen(store: Store, journal: JournalReader) -> None:
    """Nobody changes the past by accident."""
    store.commit(Batch(periods=(period(1),)))
    (found,) = journal.periods(RUN, 1, 2)
    with pytest.raises(AttributeError, match="immutable"):
        found.k = 2  # type: ignore[misc]
