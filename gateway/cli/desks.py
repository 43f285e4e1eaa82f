"""Which running gateway a request goes to.

A request moves a plant, so it must never reach the wrong one: given a place, that one is meant; without, there must be
exactly one gateway that takes requests below `runs`.
"""

from __future__ import annotations

import contextlib
import os
from pathlib import Path

import apsw

from gateway.cli.faults import CommandError
from gateway.exit_codes import ExitCode
from gateway.journal import StorageError
from gateway.journal.database import open_to_read
from gateway.requests.file import REQUESTS, Desk, desk

FILE_NAME = "requests.sqlite"
RUNS = Path("runs")
PATTERNS = (f"*/{FILE_NAME}", f"*/*/{FILE_NAME}")
"""Where `run` and `bench` put the file, below `RUNS`."""


def requests_file(at: Path | None, runs: Path = RUNS) -> Path:
    """Find the file of requests to use.

    Args:
        at: the file itself, the journal beside it, or the folder of both; None looks for the one open below `runs`.
        runs: where runs are kept.

    Raises:
        CommandError: there is none, or several take requests, so that nobody can tell which is meant.
    """
    if at is not None:
        path = at / FILE_NAME if at.is_dir() else at.with_name(FILE_NAME) if at.name.startswith("journal") else at
        if not path.exists():
            raise CommandError(
                f"there is no file of requests at {path}; is a gateway running there?", ExitCode.UNREACHABLE
            )
        return path
    found = {path: taker for pattern in PATTERNS for path in runs.glob(pattern) if (taker := _taker(path))}
    if not found:
        raise CommandError(
            f"no running gateway was found below {runs.absolute()}; "
            "start one, or say with --at where it keeps its journal",
            ExitCode.UNREACHABLE,
        )
    if len(found) > 1:
        listed = "\n".join(f"  --at {path.parent}   ({taker.plant}, run {taker.run})" for path, taker in found.items())
        raise CommandError(f"{len(found)} gateways take requests; say which one is meant:\n{listed}")
    return next(iter(found))


def _taker(path: Path) -> Desk | None:
    """Who takes requests from a file, None when nobody does (any more)."""
    if not _writer_lives(path):
        return None
    try:
        connection = open_to_read(path, REQUESTS)
    except StorageError:
        return None
    with contextlib.closing(connection):
        try:
            found = desk(connection)
        except apsw.Error:
            return None
    return found if found is not None and found.open else None


def _writer_lives(path: Path) -> bool:
    """Whether the process that last locked the file exists; a gateway that was killed leaves its desk open."""
    try:
        pid = int(path.with_name(path.name + ".lock").read_text())
        os.kill(pid, 0)
    except PermissionError:
        return True
    except (OSError, ValueError):
        return False
    return True
