"""One SQLite file of ours, opened: created, recognised, checked, or moved aside.

What is found at the path, and what a writer does about it:

    nothing, or an empty file            create the tables
    ours, this version, sound            use it
    ours, this version, damaged          move it aside, whole, with its log; create a new one; say so
    ours, another version                refuse: `StorageVersionError`
    somebody else's database, or text    refuse: `StorageForeignError`, touch nothing
    neither SQLite nor text              damaged, as above

Readers never change anything: they refuse in all cases but the second.

A process killed between moving aside and creating leaves no file but the moved one beside it (`moved_aside` finds it).
"""

from __future__ import annotations

import contextlib
from collections.abc import Iterator
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path

import apsw

from gateway.journal.exceptions import (
    StorageDamagedError,
    StorageError,
    StorageForeignError,
    StorageMissingError,
    StorageUnwritableError,
    StorageVersionError,
)

BUSY_TIMEOUT_MS = 2000
LEAST_SQLITE = 3_051_003
"""SQLite before 3.51.3 can, rarely, damage a write-ahead log that several connections write (its own release notes)."""

_SNIFFED_BYTES = 512
_DAMAGE = (apsw.CorruptError, apsw.NotADBError)


@dataclass(frozen=True)
class Schema:
    """One sort of file: SQLite's application id (31 bits, not 0) and user version mark it as ours; its tables."""

    noun: str
    application_id: int
    version: int
    tables: str


@dataclass(frozen=True)
class Opened:
    """A connection ready to write, and where the damaged file it replaces was moved, if there was one."""

    connection: apsw.Connection
    aside: Path | None


def open_to_write(path: Path, schema: Schema, wall_ns: int, *, check: bool = True) -> Opened:
    """Open a file for writing as the table above says; write-ahead log, every commit synchronised to the disk.

    Args:
        path: the file; its folder must exist.
        schema: what it must be.
        wall_ns: now, Unix nanoseconds; dates the name of a file moved aside.
        check: read the whole file for damage (about a second per gigabyte); without, only its head is looked at.

    Raises:
        StorageForeignError: the file is not ours.
        StorageVersionError: the file has another schema version.
        StorageUnwritableError: the file cannot be created or written.
    """
    _require_sqlite()
    with _explained(path, schema):
        aside = None
        try:
            connection = _connect(path, apsw.SQLITE_OPEN_READWRITE | apsw.SQLITE_OPEN_CREATE)
            try:
                _recognise(connection, path, schema, new_allowed=True)
                if check:
                    _check(connection, path)
            except BaseException:
                connection.close()
                raise
        except (*_DAMAGE, StorageDamagedError):
            _refuse_text(path, schema)
            aside = _move_aside(path, wall_ns)
            connection = _connect(path, apsw.SQLITE_OPEN_READWRITE | apsw.SQLITE_OPEN_CREATE)
        try:
            prepare(connection, schema)
        except BaseException:
            connection.close()
            raise
        return Opened(connection, aside)


def open_to_read(path: Path, schema: Schema) -> apsw.Connection:
    """Open a file read-only; the writer may be at work on it.

    Raises:
        StorageMissingError: there is no such file.
        StorageForeignError: the file is not ours.
        StorageVersionError: the file has another schema version.
        StorageDamagedError: the file cannot be read.
    """
    return _open_existing(path, schema, apsw.SQLITE_OPEN_READONLY)


def open_to_share(path: Path, schema: Schema) -> apsw.Connection:
    """Open a file that another process created, to write beside it; raises as `open_to_read`."""
    connection = _open_existing(path, schema, apsw.SQLITE_OPEN_READWRITE)
    connection.execute("PRAGMA synchronous = FULL")
    return connection


def prepare(connection: apsw.Connection, schema: Schema) -> None:
    """Set how a writing connection writes, and create the tables in one transaction if they are not there."""
    mode = connection.pragma("journal_mode", "wal")
    if mode != "wal":
        raise StorageUnwritableError(
            f"the {schema.noun} needs a write-ahead log, but SQLite answered {mode!r}; put it on a local disk"
        )
    connection.execute("PRAGMA synchronous = FULL")
    connection.execute("PRAGMA foreign_keys = ON")
    connection.config(apsw.SQLITE_DBCONFIG_NO_CKPT_ON_CLOSE, 0)
    with transaction(connection):
        if _pragma(connection, "application_id") == 0:
            connection.execute(schema.tables)
            connection.execute(f"PRAGMA application_id = {schema.application_id}")
            connection.execute(f"PRAGMA user_version = {schema.version}")


@contextlib.contextmanager
def transaction(connection: apsw.Connection) -> Iterator[None]:
    """All or nothing; the lock is taken at the start, so that no second writer can make a later statement fail."""
    connection.execute("BEGIN IMMEDIATE")
    try:
        yield
        connection.execute("COMMIT")
    except BaseException:
        # SQLite has rolled back by itself after some errors (full disk, I/O); a second rollback would be one more.
        if not connection.getautocommit():
            connection.execute("ROLLBACK")
        raise


def moved_aside(path: Path) -> list[Path]:
    """Damaged predecessors of this file that were moved aside, oldest first."""
    return sorted(found for found in path.parent.glob(f"{path.name}.damaged-*") if not found.name.endswith(_SUFFIXES))


_SUFFIXES = ("-wal", "-shm")


def _open_existing(path: Path, schema: Schema, flags: int) -> apsw.Connection:
    _require_sqlite()
    if not path.exists():
        raise StorageMissingError(f"there is no {schema.noun} at {path}; give the path of one that was written")
    with _explained(path, schema):
        connection = _connect(path, flags)
        try:
            _recognise(connection, path, schema, new_allowed=False)
        except BaseException as error:
            connection.close()
            if isinstance(error, _DAMAGE):
                _refuse_text(path, schema)
            raise
        return connection


def _connect(path: Path, flags: int) -> apsw.Connection:
    connection = apsw.Connection(str(path), flags)
    connection.setbusytimeout(BUSY_TIMEOUT_MS)
    # Until it is known to be ours and sound, closing must not move anything from its log into it.
    connection.config(apsw.SQLITE_DBCONFIG_NO_CKPT_ON_CLOSE, 1)
    return connection


def _recognise(connection: apsw.Connection, path: Path, schema: Schema, *, new_allowed: bool) -> None:
    application_id, version = _pragma(connection, "application_id"), _pragma(connection, "user_version")
    if application_id == 0 and version == 0 and not connection.execute("SELECT 1 FROM sqlite_schema").fetchall():
        if new_allowed:
            return
        raise StorageMissingError(f"the {schema.noun} at {path} is empty: its writer has not started it yet")
    if application_id != schema.application_id:
        raise StorageForeignError(
            f"{path} is somebody else's database (application id {application_id:#010x}), not a {schema.noun}; "
            "it was left as it is. Give another path."
        )
    if version != schema.version:
        raise StorageVersionError(
            f"the {schema.noun} at {path} has schema version {version}, this program writes {schema.version}; "
            "it was left as it is. Move it away, or use the program version that wrote it."
        )


def _check(connection: apsw.Connection, path: Path) -> None:
    found = [str(row[0]) for row in connection.execute("PRAGMA quick_check(1)")]
    if found != ["ok"]:
        raise StorageDamagedError(f"{path} is damaged: {'; '.join(found)}")


def _move_aside(path: Path, wall_ns: int) -> Path:
    stamp = f"{datetime.fromtimestamp(wall_ns // 10**9, UTC):%Y%m%dT%H%M%SZ}"
    aside = path.with_name(f"{path.name}.damaged-{stamp}")
    count = 1
    while aside.exists():
        count += 1
        aside = path.with_name(f"{path.name}.damaged-{stamp}-{count}")
    for suffix in (*_SUFFIXES, ""):  # The file itself last: a kill in between leaves it in place, to be found again.
        with contextlib.suppress(FileNotFoundError):
            path.with_name(path.name + suffix).rename(aside.with_name(aside.name + suffix))
    return aside


def _refuse_text(path: Path, schema: Schema) -> None:
    """A damaged file of ours is full of zero bytes; one without any was more likely written by a person."""
    with path.open("rb") as file:
        if b"\0" in file.read(_SNIFFED_BYTES):
            return
    raise StorageForeignError(f"{path} is a text file, not a {schema.noun}; it was left as it is. Give another path.")


def _pragma(connection: apsw.Connection, name: str) -> int:
    value = connection.pragma(name)
    if not isinstance(value, int):
        raise StorageDamagedError(f"PRAGMA {name} answered {value!r}")
    return value


@contextlib.contextmanager
def _explained(path: Path, schema: Schema) -> Iterator[None]:
    """Turn what SQLite and the system say about the file into our own errors."""
    try:
        yield
    except StorageError:
        raise
    except _DAMAGE as error:
        raise StorageDamagedError(f"the {schema.noun} at {path} cannot be read: {error}") from error
    except (apsw.Error, OSError) as error:
        raise StorageUnwritableError(
            f"the {schema.noun} at {path} cannot be opened: {error}. "
            f"Check that {path.parent} is a folder this user may write to, and that its disk is not full."
        ) from error


def _require_sqlite() -> None:
    if _sqlite_number(apsw.sqlite_lib_version()) < LEAST_SQLITE:
        raise StorageError(
            f"apsw brings SQLite {apsw.sqlite_lib_version()}; 3.51.3 or newer is needed. Reinstall apsw from its wheel."
        )


def _sqlite_number(version: str) -> int:
    major, minor, patch = (int(part) for part in version.split(".")[:3])
    return (major * 1000 + minor) * 1000 + patch
