"""What the period asks of a link; a new protocol is one more file that does this.

A link never raises past `open`: what goes wrong on the wire is an outcome. Every await has a deadline. Instants are
nanoseconds of the injected clock (`gateway.clock`).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from enum import StrEnum
from typing import Protocol

from gateway.signals import Reading, Tag


class LinkState(StrEnum):
    """Whether a link can carry a period's traffic."""

    DOWN = "down"
    CONNECTING = "connecting"
    UP = "up"


class WriteOutcome(StrEnum):
    """What became of one written value."""

    WRITTEN = "written"
    REJECTED = "rejected"
    """The peer answered with a bad status: it was not taken."""
    UNKNOWN = "unknown"
    """No answer before the deadline or the connection broke: it may still be taken later."""
    NOT_SENT = "not_sent"
    """Nothing left this process."""


@dataclass(frozen=True)
class Gathered:
    """One period's readings, by tag name; tags that did not arrive are `MISSING`."""

    readings: Mapping[str, Reading]
    complete: bool


@dataclass(frozen=True)
class LinkStatistics:
    """Snapshot of a link's counters since start."""

    state: LinkState
    connects: int
    losses: int
    reads: int
    read_failures: int
    writes: int
    write_failures: int
    last_error: str


class PeerUnreachableError(Exception):
    """The peer could not be reached or refused us; the message names the endpoint and the fix."""


class AddressUnknownError(Exception):
    """The peer is there but lacks addresses the plant file names; the message lists them."""


class Link(Protocol):
    """One connection to one peer for one site's tags."""

    async def open(self, timeout_s: float) -> None:
        """Connect once and resolve every tag, then keep the connection in the background until `close`.

        Raises:
            PeerUnreachableError: nobody answered, or the peer refused.
            AddressUnknownError: some tags do not exist there.
        """

    async def gather(self, due_ns: int) -> Gathered:
        """Read every tag, return at `due_ns` at the latest with what is there."""

    async def write(self, values: Sequence[tuple[Tag, float | int | bool]], due_ns: int) -> Mapping[str, WriteOutcome]:
        """Write in this order in one request, return by `due_ns` with an outcome for each tag name."""

    async def close(self) -> None:
        """Close for good; safe to call twice and while disconnected."""

    def statistics(self) -> LinkStatistics:
        """Counters so far."""
