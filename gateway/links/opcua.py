"""The OPC UA link: one batched Read per gather, one batched Write per set of inputs, a session kept in the background.

Two clocks run against every exchange. The period's cut-off says when `gather` and `write` return, with or without an
answer. The call timeout says when the session is taken for dead: an exchange that missed its cut-off may still answer
within it, which a busy server is forgiven for, and its answer is thrown away; past it the socket is cut and the keeper
builds a fresh session.

A write without an answer is unknown, never failed: the server may still take it. Only a write that provably never
left this process is `NOT_SENT`.
"""

from __future__ import annotations

import asyncio
import random
from collections.abc import Coroutine, Mapping, Sequence
from dataclasses import dataclass, field
from math import isfinite
from typing import TYPE_CHECKING, Any, TypeVar

from gateway.clock import Clock
from gateway.links.backoff import Backoff
from gateway.links.deadline import CallBrokenError, DeadlineMissedError, result_by
from gateway.links.events import LinkEvent, OnLinkEvent
from gateway.links.keeper import Keeper
from gateway.links.opcua_addresses import checked_endpoint, parse_all
from gateway.links.opcua_client import hush_library
from gateway.links.opcua_session import OpcUaSession, SessionLostError, SessionTimes
from gateway.links.opcua_survey import OpcUaSite
from gateway.links.opcua_values import UnencodableError, outcome_of, reading
from gateway.links.protocol import Gathered, LinkState, LinkStatistics, WriteOutcome
from gateway.signals import MISSING, Tag
from gateway.status_codes import name

if TYPE_CHECKING:  # the link runs without the plant file's reader and its libraries
    from gateway.plantfile.plant import SiteSpec

T = TypeVar("T")


@dataclass(frozen=True)
class OpcUaSettings:
    """Times of an OPC UA link.

    Attributes:
        times: those of one session.
        dial_timeout_s: how long one attempt to reconnect may take.
        backoff: waits between attempts.
    """

    times: SessionTimes = field(default_factory=SessionTimes)
    dial_timeout_s: float = 5.0
    backoff: Backoff = field(default_factory=Backoff)


def _ignore(_: object) -> None:
    """Receive events that nobody asked for."""


class OpcUaLink:
    """`gateway.links.protocol.Link` over OPC UA.

    Args:
        endpoint: `opc.tcp://host:port[/path]`.
        namespace: URI of the namespace the site's addresses live in.
        tags: every tag the link carries, names unique.
        clock: the injected clock; all deadlines are on it.
        settings: times.
        on_event: told of every change of the connection.
        rng: jitter of the back-off.

    Raises:
        ValueError: a malformed endpoint or address, or a name used twice.
    """

    def __init__(
        self,
        endpoint: str,
        namespace: str,
        tags: Sequence[Tag],
        clock: Clock,
        *,
        settings: OpcUaSettings | None = None,
        on_event: OnLinkEvent = _ignore,
        rng: random.Random | None = None,
    ) -> None:
        self._tags = {tag.name: tag for tag in tags}
        self._site = OpcUaSite(checked_endpoint(endpoint), tuple(tags), parse_all(tags, namespace))
        self._clock = clock
        self._settings = settings or OpcUaSettings()
        self._keeper = Keeper(
            endpoint,
            self._dial,
            clock,
            backoff=self._settings.backoff,
            rng=rng or random.Random(),
            on_event=self._tell,
        )
        self._on_event = on_event
        self._exchanges: set[asyncio.Future[Any]] = set()
        self._closed = False
        self._reads = self._read_failures = self._writes = self._write_failures = 0
        self._last_error = ""

    @classmethod
    def for_site(
        cls,
        site: SiteSpec,
        tags: Sequence[Tag],
        clock: Clock,
        *,
        on_event: OnLinkEvent = _ignore,
        rng: random.Random | None = None,
    ) -> OpcUaLink:
        """Link for one site of a plant file.

        Raises:
            ValueError: see the class.
        """
        settings = OpcUaSettings(times=SessionTimes(call_timeout_s=site.call_timeout_s))
        return cls(site.endpoint, site.namespace, tags, clock, settings=settings, on_event=on_event, rng=rng)

    async def open(self, timeout_s: float) -> None:
        """Connect once and survey the server, then keep a session in the background until `close`.

        Raises:
            PeerUnreachableError: nobody answered in time, or the peer refused; names the endpoint and the fix.
            AddressUnknownError: some tags cannot be used there; lists all of them.
            RuntimeError: the link is open or closed for good already.
        """
        if self._is_closed() or self._keeper.state is not LinkState.DOWN:
            raise RuntimeError(f"link to {self._site.endpoint} was opened already: build a new one")
        hush_library()
        session = await OpcUaSession.dial(self._site, self._clock, self._settings.times, timeout_s)
        if self._is_closed():
            await session.close()
            raise RuntimeError(f"link to {self._site.endpoint} was closed while it was being opened")
        self._keeper.start(session)

    async def gather(self, due_ns: int) -> Gathered:
        """Read every tag; by `due_ns` return what is there, `MISSING` for the rest.

        One Read answers all tags or none. When cancelled, the Read goes on and its answer is thrown away.
        """
        self._keeper.revive()
        self._reads += 1
        session = self._keeper.session
        if session is not None and session.usable:
            try:
                answers = await self._exchange(session.read(), due_ns)
                readings = {tag: reading(answer) for tag, answer in zip(self._tags, answers, strict=True)}
                return Gathered(readings, complete=True)
            except (DeadlineMissedError, SessionLostError, CallBrokenError) as error:
                self._last_error = f"gather: {error or 'no answer before the cut-off'}"
        self._read_failures += 1
        return Gathered(dict.fromkeys(self._tags, MISSING), complete=False)

    async def write(self, values: Sequence[tuple[Tag, float | int | bool]], due_ns: int) -> Mapping[str, WriteOutcome]:
        """Write in this order in one request; by `due_ns` return an outcome for each tag name.

        A set of which one value does not fit its node's type is not sent at all. When cancelled after sending, the
        set may be taken all the same: read back before trusting anything.

        Raises:
            ValueError: a tag that is not this link's, is not writable or comes twice, or a value that is not finite.
        """
        self._check(values)
        self._keeper.revive()
        self._writes += 1
        outcomes = await self._outcomes(values, due_ns)
        if any(outcome is not WriteOutcome.WRITTEN for outcome in outcomes.values()):
            self._write_failures += 1
        return outcomes

    async def close(self) -> None:
        """Close for good, politely if the peer still answers; safe to call twice and while disconnected."""
        self._closed = True
        for exchange in tuple(self._exchanges):
            exchange.cancel()
        await self._keeper.stop()

    def statistics(self) -> LinkStatistics:
        """Counters so far."""
        return LinkStatistics(
            state=self._keeper.state,
            connects=self._keeper.connects,
            losses=self._keeper.losses,
            reads=self._reads,
            read_failures=self._read_failures,
            writes=self._writes,
            write_failures=self._write_failures,
            last_error=self._last_error,
        )

    def _tell(self, event: LinkEvent) -> None:
        self._last_error = event.reason or self._last_error
        self._on_event(event)

    def _is_closed(self) -> bool:
        return self._closed

    async def _dial(self) -> OpcUaSession:
        return await OpcUaSession.dial(self._site, self._clock, self._settings.times, self._settings.dial_timeout_s)

    async def _outcomes(
        self, values: Sequence[tuple[Tag, float | int | bool]], due_ns: int
    ) -> Mapping[str, WriteOutcome]:
        not_sent = {tag.name: WriteOutcome.NOT_SENT for tag, _ in values}
        session = self._keeper.session
        if not values or session is None or not session.usable:
            return not_sent
        if self._clock.monotonic_ns() >= due_ns:
            self._last_error = "write: the cut-off had passed, nothing was sent"
            return not_sent
        try:
            request = session.encode(values)
        except UnencodableError as error:
            self._last_error = f"write: {error}"
            return not_sent
        try:
            codes = await self._exchange(session.write(request), due_ns)
        except (DeadlineMissedError, SessionLostError, CallBrokenError) as error:
            self._last_error = f"write: {error or 'no answer before the cut-off'}"
            return {tag.name: WriteOutcome.UNKNOWN for tag, _ in values}
        outcomes = {tag.name: outcome_of(code) for (tag, _), code in zip(values, codes, strict=True)}
        refused = [f"{tag.name} {name(code)}" for (tag, _), code in zip(values, codes, strict=True) if code]
        if refused:
            self._last_error = f"write: {', '.join(refused)}"
        return outcomes

    async def _exchange(self, work: Coroutine[Any, Any, T], due_ns: int) -> T:
        """Wait for an exchange until `due_ns`; past that it goes on until its session's call timeout judges it."""
        exchange = asyncio.ensure_future(work)
        self._exchanges.add(exchange)
        exchange.add_done_callback(self._ended)
        return await result_by(self._clock, due_ns, exchange)

    def _ended(self, exchange: asyncio.Future[Any]) -> None:
        self._exchanges.discard(exchange)
        if not exchange.cancelled():
            exchange.exception()

    def _check(self, values: Sequence[tuple[Tag, float | int | bool]]) -> None:
        seen: set[str] = set()
        for tag, value in values:
            if self._tags.get(tag.name) != tag:
                raise ValueError(f"{tag.name} is not a tag of this link: write only what it was built with")
            if not tag.writable:
                raise ValueError(f"{tag.name} is not writable: mark it in the plant file, or do not write it")
            if tag.name in seen:
                raise ValueError(f"{tag.name} comes twice in one set: one value per tag")
            if not isfinite(value):
                raise ValueError(f"{tag.name} = {value}: only finite values go to the wire")
            seen.add(tag.name)
