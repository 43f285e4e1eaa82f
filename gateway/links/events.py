"""What a link tells the service about its connection: one event per log line and per journal entry."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from enum import StrEnum


class LinkEventKind(StrEnum):
    """What happened to a link's connection."""

    CONNECTED = "connected"
    LOST = "lost"
    RETRYING = "retrying"
    KEEPER_RESTARTED = "keeper_restarted"
    """The task that keeps the connection had died (our fault); it runs again."""
    CLOSED = "closed"
    """Closed by us, for good."""


@dataclass(frozen=True, slots=True)
class LinkEvent:
    """One event of one link.

    Attributes:
        kind: what happened.
        endpoint: the peer.
        reason: why, empty when there is nothing to explain.
        attempt: which attempt to reconnect comes next, counted from 1, for `RETRYING`.
        retry_in_s: how long until that attempt, for `RETRYING`.
    """

    kind: LinkEventKind
    endpoint: str
    reason: str = ""
    attempt: int = 0
    retry_in_s: float | None = None

    def __str__(self) -> str:
        """Say it in one line."""
        attempt = "" if self.retry_in_s is None else f", attempt {self.attempt} in {self.retry_in_s:.2f} s"
        reason = f": {self.reason}" if self.reason else ""
        return " ".join(f"{self.endpoint} {self.kind}{attempt}{reason}".split())


OnLinkEvent = Callable[[LinkEvent], None]
"""Called on the event loop: it must not block. What it raises is logged and otherwise ignored."""
