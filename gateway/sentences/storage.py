"""Sentences about the journal and the file of requests."""

from __future__ import annotations

from gateway.sentences.notice import Kind, Level, Notice, counted, full_stop


def journal_failing(error: str) -> Notice:
    """The journal cannot be written."""
    return Notice(
        Kind.JOURNAL,
        Level.ERROR,
        f"The journal cannot be written: {full_stop(error)} Periods go on; recent records wait in memory. "
        "Make room on its disk.",
        detail={"state": "failing", "error": error},
    )


def journal_behind(depth: int, capacity: int) -> Notice:
    """The journal's queue fills up."""
    return Notice(
        Kind.JOURNAL,
        Level.WARNING,
        f"The journal is behind: {depth} of at most {capacity} records wait. Its disk is too slow, or failing.",
        detail={"state": "behind", "depth": depth, "capacity": capacity},
    )


def journal_losing(why: str) -> Notice:
    """Records are being lost."""
    return Notice(
        Kind.JOURNAL,
        Level.ERROR,
        f"The journal is losing records, and counts them: {full_stop(why)} Periods go on.",
        detail={"state": "losing", "why": why},
    )


def journal_unrecordable(error: str) -> Notice:
    """A record has a form that no disk would take."""
    return Notice(
        Kind.JOURNAL,
        Level.ERROR,
        f"A record cannot be written, whatever the disk does: {full_stop(error)} It is counted as lost; our fault.",
        detail={"state": "unrecordable", "error": error},
    )


def journal_recovered(failed_attempts: int, lost: int) -> Notice:
    """The journal is written again, or has caught up."""
    now = (
        f"is written again, after {counted(failed_attempts, 'failed attempt')}" if failed_attempts else "has caught up"
    )
    return Notice(
        Kind.JOURNAL,
        Level.WARNING if lost else Level.INFO,
        f"The journal {now}; {counted(lost, 'record')} lost.",
        detail={"state": "recovered", "failed_attempts": failed_attempts, "lost": lost},
    )


def journal_dead(error: str) -> Notice:
    """The journal's thread died."""
    return Notice(
        Kind.JOURNAL,
        Level.ERROR,
        f"The journal's thread died: {full_stop(error)} Nothing is recorded any more. Restart when the plant allows.",
        detail={"state": "dead", "error": error},
    )


def journal_unfinished(lost: int) -> Notice:
    """The run ended while its journal could not be written."""
    return Notice(
        Kind.JOURNAL,
        Level.ERROR,
        f"The journal could not be finished: {counted(lost, 'record')} and the end of this run are not in it. "
        "Make room on its disk; the next start comes up on hold.",
        detail={"state": "unfinished", "lost": lost},
    )


def journal_lost(what: str, cause: str, count: int, first_k: int | None, last_k: int | None) -> Notice:
    """The gap in the journal, told inside it."""
    where = "" if first_k is None else f" between periods {first_k} and {last_k}"
    return Notice(
        Kind.JOURNAL_LOST,
        Level.ERROR,
        full_stop(f"The journal lacks {counted(count, what)}{where}: {cause}"),
        detail={"what": what, "cause": cause, "count": count, "first_k": first_k, "last_k": last_k},
    )


def requests_failing(error: str) -> Notice:
    """The file of requests cannot be read or written."""
    return Notice(
        Kind.REQUEST,
        Level.ERROR,
        f"Requests cannot be taken: {full_stop(error)} Periods go on, but nobody can hold or rearm a section.",
        detail={"state": "failing", "error": error},
    )


def requests_recovered() -> Notice:
    """The file of requests works again."""
    return Notice(Kind.REQUEST, Level.INFO, "Requests are taken again.", detail={"state": "recovered"})


def requests_dead(error: str) -> Notice:
    """The thread that takes requests died."""
    return Notice(
        Kind.REQUEST,
        Level.ERROR,
        f"The thread that takes requests died: {full_stop(error)} Nobody can hold or rearm a section.",
        detail={"state": "dead", "error": error},
    )


def moved_aside(noun: str, aside: str) -> Notice:
    """A damaged file was found, kept under another name, and replaced by a new one."""
    return Notice(
        Kind.JOURNAL,
        Level.ERROR,
        f"The {noun} was damaged. It was kept as {aside}, nothing of it was deleted; a new one begins here.",
        detail={"state": "moved_aside", "noun": noun, "aside": aside},
    )
