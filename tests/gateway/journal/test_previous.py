"""Tests of `gateway.journal.previous`: may the next run drive, or must it start on hold?"""

from pathlib import Path

import pytest

from gateway.journal import Previous, RunEnd, StorageForeignError, last_run
from gateway.journal.store import Store
from tests.gateway.journal.samples import WALL_NS, run, wall_ns


def record(path: Path, id_: str, how: RunEnd | None) -> None:
    """A run that ended like this, or not at all."""
    store = Store.at(path, run(id_), wall_ns)
    if how is not None:
        store.end(WALL_NS + 10, how)
    store.close()


def test_without_a_journal_there_was_no_run(tmp_path: Path) -> None:
    """The first start of all is a clean one."""
    found = last_run(tmp_path / "journal")
    assert (found.previous, found.run, found.ended_cleanly) == (Previous.NONE, None, True)


@pytest.mark.parametrize(
    ("how", "previous", "clean"),
    [
        (RunEnd.COMPLETED, Previous.CLEAN, True),
        (RunEnd.STOPPED, Previous.CLEAN, True),
        (RunEnd.FAILED, Previous.UNCLEAN, False),
        (None, Previous.UNCLEAN, False),
    ],
)
def test_the_end_decides(tmp_path: Path, how: RunEnd | None, previous: Previous, clean: bool) -> None:
    """A run that failed or never ended makes the next one start on hold."""
    record(tmp_path / "journal", "first", how)
    found = last_run(tmp_path / "journal")
    assert (found.previous, found.ended_cleanly) == (previous, clean)
    assert found.run is not None
    assert (found.run.id, found.run.how) == ("first", how)


def test_the_latest_run_counts(tmp_path: Path) -> None:
    """An unclean end long ago has been dealt with."""
    record(tmp_path / "journal", "killed", None)
    record(tmp_path / "journal", "later", RunEnd.STOPPED)
    assert last_run(tmp_path / "journal").ended_cleanly


def test_a_damaged_journal_is_not_trusted(tmp_path: Path) -> None:
    """Nobody knows how the previous run ended, so the next one starts on hold."""
    (tmp_path / "journal").write_bytes(bytes(range(256)) * 64)
    found = last_run(tmp_path / "journal")
    assert (found.previous, found.ended_cleanly) == (Previous.UNKNOWN, False)


def test_a_kill_after_moving_aside_is_not_a_first_start(tmp_path: Path) -> None:
    """A damaged file lies beside the place where the journal should be: something happened here."""
    (tmp_path / "journal.damaged-20250102T030000Z").write_bytes(b"\0")
    assert last_run(tmp_path / "journal").previous is Previous.UNKNOWN


def test_a_new_journal_beside_a_damaged_one_counts(tmp_path: Path) -> None:
    """Once a run was recorded in the new file, that one tells."""
    (tmp_path / "journal.damaged-20250102T030000Z").write_bytes(b"\0")
    record(tmp_path / "journal", "first", RunEnd.COMPLETED)
    assert last_run(tmp_path / "journal").ended_cleanly


def test_another_file_is_an_error(tmp_path: Path) -> None:
    """A wrong path is not taken for a first start."""
    (tmp_path / "journal").write_text("[plant]\n" * 100)
    with pytest.raises(StorageForeignError, match="not a journal"):
        last_run(tmp_path / "journal")
