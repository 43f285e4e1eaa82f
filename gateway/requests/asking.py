"""Whoever asks: post one request, wait for its answer. No event loop; time is injected."""

from __future__ import annotations

import getpass
import socket
import time
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import apsw

from gateway.clock import Clock, RealClock
from gateway.journal.database import open_to_share
from gateway.journal.exceptions import StorageUnwritableError
from gateway.plantfile.plant import Plant
from gateway.requests import file
from gateway.requests.file import REQUESTS, VOID_AFTER_S, RequestState
from gateway.requests.words import RequestError, parse_request

LONGEST_WORDS = 200
LONGEST_WHO = 100
LOOK_EVERY_S = 0.05
GRACE_S = 5.0
"""How much longer to wait for the answer to a request that was taken: it can no longer be withdrawn."""


class NobodyThereError(Exception):
    """No gateway takes requests from this file; the message says what was found."""


@dataclass(frozen=True)
class Answer:
    """What became of a request; `pending` when it was taken but not answered, so that nobody knows yet."""

    number: int
    run: str
    state: RequestState
    reason: str
    k: int | None


def whoami() -> str:
    """Return who asks, "user@host", as the system knows them."""
    return f"{getpass.getuser()}@{socket.gethostname()}"


def ask(
    path: Path,
    words: str,
    *,
    who: str,
    plant: Plant | None = None,
    timeout_s: float = VOID_AFTER_S,
    clock: Clock | None = None,
    sleep: Callable[[float], None] = time.sleep,
) -> Answer:
    """Ask something of the run that takes requests from this file, and wait for its answer.

    Args:
        path: the file of requests.
        words: what is asked, "hold tank-3".
        who: who asks, "user@host".
        plant: check the words against this plant before posting; without, the gateway checks them.
        timeout_s: seconds to wait; a request nobody took by then is withdrawn.
        clock: the injected clock.
        sleep: waits this many seconds of that clock.

    Raises:
        RequestError: the words cannot be a request; nothing was posted.
        NobodyThereError: no gateway takes requests there; nothing was posted.
        StorageMissingError, StorageForeignError, StorageVersionError: it is no file of requests.
        StorageUnwritableError: the request could not be posted.
    """
    clock = clock or RealClock()
    _require_plain("words", words, LONGEST_WORDS)
    _require_plain("who", who, LONGEST_WHO)
    if plant is not None:
        parse_request(words, plant)
    connection = open_to_share(path, REQUESTS)
    try:
        found = file.desk(connection)
        if found is None or not found.open:
            ended = f"run {found.run} of {found.plant} has ended" if found else "no run ever opened it"
            raise NobodyThereError(f"nobody takes requests from {path}: {ended}. Start the gateway first.")
        number = file.post(connection, found.run, clock.wall_ns(), who, words)
        return _wait(connection, number, timeout_s, clock, sleep)
    except apsw.Error as error:
        raise StorageUnwritableError(f"the file of requests at {path} cannot be used: {error}") from error
    finally:
        connection.close()


def _wait(
    connection: apsw.Connection, number: int, timeout_s: float, clock: Clock, sleep: Callable[[float], None]
) -> Answer:
    deadline_ns = clock.monotonic_ns() + round(timeout_s * 1e9)
    last_ns = deadline_ns + round(GRACE_S * 1e9)
    while True:
        answer = _look(connection, number)
        now_ns = clock.monotonic_ns()
        if answer.state is not RequestState.PENDING or now_ns >= last_ns:
            return answer
        if now_ns >= deadline_ns:
            reason = f"nobody took it within {timeout_s:g} s; it was withdrawn"
            if file.withdraw(connection, number, reason, clock.wall_ns()):
                continue
        sleep(LOOK_EVERY_S)


def _look(connection: apsw.Connection, number: int) -> Answer:
    found = file.row(connection, number)
    if found is None:
        raise apsw.NotFoundError(f"request {number} has disappeared")
    unknown = found.state is RequestState.PENDING and found.taken_ns is not None
    reason = "it was taken, but not answered yet; the journal will tell" if unknown else found.reason
    return Answer(found.number, found.run, found.state, reason, found.k)


def _require_plain(name: str, text: str, longest: int) -> None:
    """What people type ends up in logs and on pages: one line, no control characters, no flood."""
    if not text.strip() or len(text) > longest or not text.isprintable():
        raise RequestError(f"{name} = {text[:longest]!r}: give one line of 1 to {longest} printable characters")
