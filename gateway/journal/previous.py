"""How the run before this one ended: what decides whether a start may drive or must begin on hold."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from pathlib import Path

from gateway.journal.database import moved_aside
from gateway.journal.exceptions import StorageDamagedError, StorageMissingError
from gateway.journal.reader import JournalReader
from gateway.journal.records import RunRecord


class Previous(StrEnum):
    """What is known about the end of the previous run."""

    NONE = "none"
    """There was none."""
    CLEAN = "clean"
    UNCLEAN = "unclean"
    """It failed, was killed, or still runs."""
    UNKNOWN = "unknown"
    """The file that would tell is damaged, or was moved aside before it was replaced."""


@dataclass(frozen=True)
class LastRun:
    """The previous run, None where there is none to read, and how it ended."""

    previous: Previous
    run: RunRecord | None = None

    @property
    def ended_cleanly(self) -> bool:
        """Whether the next run may start as if nothing had happened; without, every section starts on hold."""
        return self.previous in (Previous.NONE, Previous.CLEAN)


def last_run(path: Path) -> LastRun:
    """Look at the journal a run is about to continue; asked before `Journal.open`, which starts the next run.

    Raises:
        StorageForeignError, StorageVersionError: as `JournalReader`.
    """
    try:
        with JournalReader(path) as reader:
            runs = reader.runs()
    except StorageDamagedError:
        return LastRun(Previous.UNKNOWN)
    except StorageMissingError:
        runs = ()
    if not runs:
        return LastRun(Previous.UNKNOWN if moved_aside(path) else Previous.NONE)
    how = runs[-1].how
    return LastRun(Previous.CLEAN if how is not None and how.clean else Previous.UNCLEAN, runs[-1])
