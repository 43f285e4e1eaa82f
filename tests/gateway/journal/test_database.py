"""Tests of `gateway.journal.database`: what is found at the path, and what is done about it."""

from collections.abc import Callable
from pathlib import Path

import apsw
import pytest

from gateway.journal import database
from gateway.journal.database import Schema, moved_aside, open_to_read, open_to_share, open_to_write
from gateway.journal.exceptions import (
    StorageDamagedError,
    StorageError,
    StorageForeignError,
    StorageMissingError,
    StorageUnwritableError,
    StorageVersionError,
)
from tests.gateway.journal.samples import WALL_NS

NOTES = Schema(noun="notebook", application_id=0x7ACE0001, version=3, tables="CREATE TABLE notes (text TEXT) STRICT;")


def write_notes(path: Path, count: int) -> None:
    """Fill a notebook with rows that take a page each."""
    connection = open_to_write(path, NOTES, WALL_NS).connection
    connection.executemany("INSERT INTO notes VALUES (?)", [("x" * 3000,)] * count)
    connection.close()


def damage(path: Path) -> bytes:
    """Overwrite a page in the middle; return what the file holds then."""
    content = bytearray(path.read_bytes())
    content[3 * 4096 : 4 * 4096] = b"\xa5" * 4096
    path.write_bytes(content)
    return bytes(content)


def test_a_new_file_is_created_durable(tmp_path: Path) -> None:
    """The tables are there, the log is written ahead, every commit is synchronised (2 is FULL)."""
    connection = open_to_write(tmp_path / "a", NOTES, WALL_NS).connection
    assert connection.pragma("journal_mode") == "wal"
    assert connection.pragma("synchronous") == 2
    assert list(connection.execute("SELECT * FROM notes")) == []
    connection.close()


def test_an_empty_file_is_taken_for_new(tmp_path: Path) -> None:
    """A process killed before its first transaction leaves an empty file; the next one creates the tables."""
    path = tmp_path / "a"
    path.touch()
    opened = open_to_write(path, NOTES, WALL_NS)
    assert opened.aside is None
    assert list(opened.connection.execute("SELECT * FROM notes")) == []
    opened.connection.close()


def test_a_sound_file_is_used(tmp_path: Path) -> None:
    """What an earlier process wrote is still there."""
    path = tmp_path / "a"
    write_notes(path, 5)
    opened = open_to_write(path, NOTES, WALL_NS)
    assert opened.aside is None
    assert opened.connection.execute("SELECT count(*) FROM notes").get == 5
    opened.connection.close()


def test_a_damaged_file_is_moved_aside_whole(tmp_path: Path) -> None:
    """Nothing of it is deleted, and a new one takes its place."""
    path = tmp_path / "a"
    write_notes(path, 20)
    content = damage(path)
    opened = open_to_write(path, NOTES, WALL_NS)
    assert opened.aside == tmp_path / "a.damaged-20250102T030000Z"
    assert opened.aside.read_bytes() == content
    assert list(opened.connection.execute("SELECT * FROM notes")) == []
    opened.connection.close()


def test_the_log_of_a_damaged_file_goes_with_it(tmp_path: Path) -> None:
    """What was committed but not yet moved from the log to the file is kept beside the file, unchanged."""
    path = tmp_path / "a"
    write_notes(path, 20)
    writer = open_to_write(path, NOTES, WALL_NS).connection
    writer.execute("INSERT INTO notes VALUES ('in the log')")
    log, copy = (tmp_path / "a-wal").read_bytes(), tmp_path / "copy"
    copy.mkdir()
    (copy / "a").write_bytes(path.read_bytes())
    (copy / "a-wal").write_bytes(log)
    writer.close()
    damage(copy / "a")
    opened = open_to_write(copy / "a", NOTES, WALL_NS)
    opened.connection.close()
    assert opened.aside is not None
    assert opened.aside.with_name(opened.aside.name + "-wal").read_bytes() == log


def test_two_damaged_files_of_one_second_are_both_kept(tmp_path: Path) -> None:
    """A file moved aside never replaces another one."""
    path = tmp_path / "a"
    for _ in range(2):
        write_notes(path, 20)
        damage(path)
        open_to_write(path, NOTES, WALL_NS).connection.close()
    assert [found.name for found in moved_aside(path)] == [
        "a.damaged-20250102T030000Z",
        "a.damaged-20250102T030000Z-2",
    ]


def test_noise_is_damage(tmp_path: Path) -> None:
    """A file that is neither SQLite nor text is a torn file of ours."""
    path = tmp_path / "a"
    path.write_bytes(bytes(range(256)) * 64)
    opened = open_to_write(path, NOTES, WALL_NS)
    opened.connection.close()
    assert opened.aside is not None


def test_a_text_file_is_left_alone(tmp_path: Path) -> None:
    """A slip of the hand on the command line must not rename somebody's plant file."""
    path = tmp_path / "plant.toml"
    path.write_text("[plant]\nname = 'Tarn Row'\n" * 40)
    with pytest.raises(StorageForeignError, match="text file, not a notebook"):
        open_to_write(path, NOTES, WALL_NS)
    assert path.read_text().startswith("[plant]")
    assert moved_aside(path) == []


def test_somebody_elses_database_is_left_alone(tmp_path: Path) -> None:
    """A sound database without our mark is refused by writers and readers, and not changed."""
    path = tmp_path / "a"
    other = apsw.Connection(str(path))
    other.execute("CREATE TABLE accounts (owner TEXT)")
    other.close()
    content = path.read_bytes()
    for open_ in (lambda: open_to_write(path, NOTES, WALL_NS), lambda: open_to_read(path, NOTES)):
        with pytest.raises(StorageForeignError, match="somebody else's database"):
            open_()
    assert path.read_bytes() == content


def test_another_version_is_refused_with_both_numbers(tmp_path: Path) -> None:
    """The error says what was found, what is written, and what to do; the file is not changed."""
    path = tmp_path / "a"
    write_notes(path, 1)
    content = path.read_bytes()
    newer = Schema(NOTES.noun, NOTES.application_id, 4, NOTES.tables)
    for open_ in (lambda: open_to_write(path, newer, WALL_NS), lambda: open_to_read(path, newer)):
        with pytest.raises(StorageVersionError, match=r"schema version 3, this program writes 4.*Move it away"):
            open_()
    assert path.read_bytes() == content


def test_a_folder_that_is_not_there_is_named(tmp_path: Path) -> None:
    """The error names the folder to create."""
    with pytest.raises(StorageUnwritableError, match=r"Check that .*nowhere is a folder"):
        open_to_write(tmp_path / "nowhere" / "a", NOTES, WALL_NS)


@pytest.mark.parametrize("open_", [open_to_read, open_to_share])
def test_what_is_not_there_is_not_created_by_others(
    tmp_path: Path, open_: Callable[[Path, Schema], apsw.Connection]
) -> None:
    """Only the owner creates a file."""
    with pytest.raises(StorageMissingError, match="no notebook at"):
        open_(tmp_path / "a", NOTES)
    assert list(tmp_path.iterdir()) == []


def test_a_reader_cannot_write(tmp_path: Path) -> None:
    """The connection is read-only, not only by agreement."""
    path = tmp_path / "a"
    write_notes(path, 1)
    reader = open_to_read(path, NOTES)
    with pytest.raises(apsw.ReadOnlyError):
        reader.execute("DELETE FROM notes")
    reader.close()


def test_a_reader_says_when_a_file_is_noise(tmp_path: Path) -> None:
    """Readers never move anything; they name the damage."""
    path = tmp_path / "a"
    path.write_bytes(bytes(range(256)) * 64)
    with pytest.raises(StorageDamagedError, match=r"notebook at .* cannot be read"):
        open_to_read(path, NOTES)
    assert path.exists()


def test_a_transaction_is_all_or_nothing(tmp_path: Path) -> None:
    """An error inside leaves nothing behind, and the connection usable."""
    connection = open_to_write(tmp_path / "a", NOTES, WALL_NS).connection

    def half() -> None:
        with database.transaction(connection):
            connection.execute("INSERT INTO notes VALUES ('half')")
            raise KeyError("midway")

    with pytest.raises(KeyError, match="midway"):
        half()
    assert connection.execute("SELECT count(*) FROM notes").get == 0
    connection.close()


def test_an_old_sqlite_is_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A library that may damage logs is not used at all."""
    monkeypatch.setattr(apsw, "sqlite_lib_version", lambda: "3.51.2")
    with pytest.raises(StorageError, match=r"SQLite 3\.51\.2; 3\.51\.3 or newer"):
        open_to_write(tmp_path / "a", NOTES, WALL_NS)
