"""The file of requests: its tables, and every statement that touches them. Synchronous; see the package's head.

Writers are many (each page, each command line, the desk), each with a connection of its own. Every change is one
immediate transaction whose condition is part of the statement, so that of two who change one row one finds it changed.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum

import apsw
import msgspec

from gateway.journal.database import Schema, transaction

REQUESTS = Schema(
    noun="file of requests",
    application_id=0x4C535251,  # "LSRQ"
    version=1,
    tables="""
    CREATE TABLE desk (
        one INTEGER PRIMARY KEY CHECK (one = 1),
        run TEXT NOT NULL,
        plant TEXT NOT NULL,
        opened_ns INTEGER NOT NULL,
        closed_ns INTEGER
    ) STRICT;
    CREATE TABLE requests (
        number INTEGER PRIMARY KEY AUTOINCREMENT,
        run TEXT NOT NULL,
        asked_ns INTEGER NOT NULL,
        who TEXT NOT NULL,
        words TEXT NOT NULL,
        taken_ns INTEGER,
        state TEXT NOT NULL DEFAULT 'pending' CHECK (state IN ('pending', 'applied', 'refused')),
        reason TEXT NOT NULL DEFAULT '',
        answered_ns INTEGER,
        k INTEGER
    ) STRICT;
    CREATE INDEX pending ON requests (number) WHERE state = 'pending';
    """,
)

VOID_AFTER_S = 10.0
CLOCK_TOLERANCE_S = 1.0
"""How far in the future a request may be dated: a slewed clock is no fault of whoever asks."""


class RequestState(StrEnum):
    """Where a request stands."""

    PENDING = "pending"
    APPLIED = "applied"
    REFUSED = "refused"


class Row(msgspec.Struct, frozen=True, kw_only=True):
    """One request as the file has it."""

    number: int
    run: str
    asked_ns: int
    who: str
    words: str
    taken_ns: int | None
    state: RequestState
    reason: str
    answered_ns: int | None
    k: int | None


@dataclass(frozen=True)
class Reply:
    """An answer on its way into the file."""

    number: int
    state: RequestState
    reason: str
    answered_ns: int
    k: int | None


@dataclass(frozen=True)
class Desk:
    """Who takes requests: the run, its plant, and whether it is over."""

    run: str
    plant: str
    open: bool


def void_reason(asked_ns: int, addressed: str, run: str, now_ns: int) -> str | None:
    """Why a request must not act on this run now; None when it may.

    Args:
        asked_ns: when it was asked, Unix nanoseconds.
        addressed: the run it was made to.
        run: the run that takes it.
        now_ns: now, Unix nanoseconds.
    """
    if addressed != run:
        return f"it was made to run {addressed}, this is run {run}"
    age_s = (now_ns - asked_ns) / 1e9
    if age_s > VOID_AFTER_S:
        return f"it was {age_s:.1f} s old when it was taken; a request is void after {VOID_AFTER_S:g} s"
    if age_s < -CLOCK_TOLERANCE_S:
        return f"it is dated {-age_s:.1f} s in the future; was the wall clock set back?"
    return None


def open_desk(connection: apsw.Connection, run: str, plant: str, opened_ns: int) -> None:
    """Say that this run takes requests now."""
    with transaction(connection):
        connection.execute(
            "INSERT OR REPLACE INTO desk (one, run, plant, opened_ns) VALUES (1, ?, ?, ?)", (run, plant, opened_ns)
        )


def close_desk(connection: apsw.Connection, run: str, closed_ns: int) -> None:
    """Say that this run takes no more requests, and refuse those it has not answered."""
    with transaction(connection):
        connection.execute("UPDATE desk SET closed_ns = ? WHERE run = ?", (closed_ns, run))
        connection.execute(
            "UPDATE requests SET state = 'refused', reason = 'the run ended first', answered_ns = ? "
            "WHERE state = 'pending' AND run = ?",
            (closed_ns, run),
        )


def desk(connection: apsw.Connection) -> Desk | None:
    """Who takes requests; None when nobody ever did."""
    for run, plant, closed_ns in connection.execute("SELECT run, plant, closed_ns FROM desk"):
        return Desk(str(run), str(plant), closed_ns is None)
    return None


def post(connection: apsw.Connection, run: str, asked_ns: int, who: str, words: str) -> int:
    """Add a request; return its number."""
    with transaction(connection):
        connection.execute(
            "INSERT INTO requests (run, asked_ns, who, words) VALUES (?, ?, ?, ?)", (run, asked_ns, who, words)
        )
        return connection.last_insert_rowid()


def row(connection: apsw.Connection, number: int) -> Row | None:
    """One request; None when there is none of this number."""
    return next(iter(_rows(connection, "number = ?", (number,))), None)


def unclaimed(connection: apsw.Connection, run: str, limit: int) -> list[Row]:
    """Oldest requests nobody has dealt with; those an earlier run took and never answered are among them."""
    return _rows(
        connection, "state = 'pending' AND (taken_ns IS NULL OR run <> ?) ORDER BY number LIMIT ?", (run, limit)
    )


def claim(connection: apsw.Connection, number: int, taken_ns: int) -> bool:
    """Take a request; False when it was withdrawn or taken meanwhile."""
    with transaction(connection):
        connection.execute(
            "UPDATE requests SET taken_ns = ? WHERE number = ? AND state = 'pending' AND taken_ns IS NULL",
            (taken_ns, number),
        )
        return connection.changes() == 1


def reply(connection: apsw.Connection, replies: list[Reply]) -> None:
    """Write answers, all or none; what was answered before keeps its first answer."""
    with transaction(connection):
        for answer in replies:
            connection.execute(
                "UPDATE requests SET state = ?, reason = ?, answered_ns = ?, k = ? "
                "WHERE number = ? AND state = 'pending'",
                (answer.state, answer.reason, answer.answered_ns, answer.k, answer.number),
            )


def withdraw(connection: apsw.Connection, number: int, reason: str, now_ns: int) -> bool:
    """Refuse one's own request before anybody took it; False when it is too late for that."""
    with transaction(connection):
        connection.execute(
            "UPDATE requests SET state = 'refused', reason = ?, answered_ns = ? "
            "WHERE number = ? AND state = 'pending' AND taken_ns IS NULL",
            (reason, now_ns, number),
        )
        return connection.changes() == 1


def _rows(connection: apsw.Connection, condition: str, bindings: tuple[str | int, ...]) -> list[Row]:
    names = Row.__struct_fields__
    sql = f"SELECT {', '.join(names)} FROM requests WHERE {condition}"
    return [
        msgspec.convert(dict(zip(names, found, strict=True)), Row) for found in list(connection.execute(sql, bindings))
    ]
