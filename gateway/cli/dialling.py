"""A site dialled once, to see whether its addresses are there and how long a read takes; nothing is ever written."""

from __future__ import annotations

from dataclasses import dataclass
from statistics import median

from gateway.clock import NS, Clock
from gateway.links.opcua import OpcUaLink
from gateway.plantfile.plant import Plant, SiteSpec
from gateway.signals import MISSING
from gateway.status_codes import Severity, name, severity
from gateway.tags import tags_of

DIAL_TIMEOUT_S = 5.0
READ_TIMEOUT_S = 2.0
READS = 10


@dataclass(frozen=True)
class Reached:
    """What a site answered.

    Attributes:
        tags: how many were read.
        dial_ms: connecting, and looking at every address.
        read_median_ms, read_worst_ms: reading all tags once; NaN when no read was answered.
        unanswered: reads without an answer.
        bad: tag and what is wrong with its value, for tags whose status is bad.
    """

    tags: int
    dial_ms: float
    read_median_ms: float
    read_worst_ms: float
    unanswered: int
    bad: tuple[str, ...]


async def reach(plant: Plant, site: SiteSpec, clock: Clock) -> Reached:
    """Dial a site, read every tag a few times, hang up.

    Raises:
        PeerUnreachableError: nobody answered, or the peer refused; names the endpoint and the fix.
        AddressUnknownError: some tags cannot be used there; lists all of them.
    """
    tags = tags_of(plant, site)
    link = OpcUaLink.for_site(site, tags, clock)
    began_ns = clock.monotonic_ns()
    try:
        await link.open(DIAL_TIMEOUT_S)
        dial_ms = (clock.monotonic_ns() - began_ns) / 1e6
        times_ms: list[float] = []
        bad: tuple[str, ...] = ()
        for _ in range(READS):
            asked_ns = clock.monotonic_ns()
            gathered = await link.gather(asked_ns + round(READ_TIMEOUT_S * NS))
            if not gathered.complete:
                continue
            times_ms.append((clock.monotonic_ns() - asked_ns) / 1e6)
            readings = [(tag, gathered.readings.get(tag.name, MISSING)) for tag in tags]
            bad = tuple(
                f"{tag.name} ({name(one.status)})" for tag, one in readings if severity(one.status) is Severity.BAD
            )
    finally:
        await link.close()
    nothing = float("nan")
    return Reached(
        tags=len(tags),
        dial_ms=dial_ms,
        read_median_ms=median(times_ms) if times_ms else nothing,
        read_worst_ms=max(times_ms, default=nothing),
        unanswered=READS - len(times_ms),
        bad=bad,
    )
