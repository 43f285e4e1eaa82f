"""What a sentence comes as, and the small words all of them share."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from enum import StrEnum


class Level(StrEnum):
    """How much a notice matters; see the head of the module."""

    INFO = "info"
    WARNING = "warning"
    ERROR = "error"


class Kind(StrEnum):
    """What a notice is about: what to look for in the journal and in JSON lines."""

    RUN_STARTED = "run_started"
    RUN_ENDED = "run_ended"
    UNCLEAN_START = "unclean_start"
    INSECURE = "insecure"
    TRANSITION = "transition"
    AUTHORITY = "authority"
    REQUEST = "request"
    QUALITY = "quality"
    LINK = "link"
    WRITE_UNKNOWN = "write_unknown"
    PANEL = "panel"
    PERMIT = "permit"
    SET_REFUSED = "set_refused"
    SKIPPED = "skipped"
    SYNTHESIS = "synthesis"
    SUMMARY = "summary"
    CLOCK = "clock"
    TASK_DIED = "task_died"
    REHEARSAL = "rehearsal"
    JOURNAL = "journal"
    JOURNAL_LOST = "journal_lost"


@dataclass(frozen=True)
class Notice:
    """One thing that happened, as a sentence and as data (JSON types only, units in the names)."""

    kind: Kind
    level: Level
    sentence: str
    section: str | None = None
    detail: Mapping[str, object] = field(default_factory=dict)


def counted(number: int, noun: str, plural: str | None = None) -> str:
    """Say a number with its noun: "1 miss", "3 misses"."""
    return f"{number} {noun if number == 1 else plural or noun + 's'}"


def ordinal(number: int) -> str:
    """Say which one: "3rd"."""
    suffix = "th" if number % 100 in (11, 12, 13) else {1: "st", 2: "nd", 3: "rd"}.get(number % 10, "th")
    return f"{number}{suffix}"


def full_stop(text: str) -> str:
    """End a text like a sentence."""
    return text if text.endswith((".", "!", "?")) else f"{text}."
