"""Keeping one connection: whoever loses a session gets a fresh one, until told to stop.

    start -> tend session -> lost -> wait (back-off) -> dial -> tend session -> ...
                                         ^                |
                                         +---- refused ---+

A session is dialled, used, lost, thrown away; nothing of it is reused. The back-off starts over only after a session
has lived for as long as the longest wait, so a peer that accepts and then fails is not hammered. Knows no protocol.
"""

from __future__ import annotations

import asyncio
import logging
import random
from collections.abc import Awaitable, Callable
from typing import Generic, Protocol, TypeVar

from gateway.clock import NS, Clock
from gateway.links.backoff import Backoff
from gateway.links.deadline import first_of
from gateway.links.events import LinkEvent, LinkEventKind, OnLinkEvent
from gateway.links.protocol import LinkState

logger = logging.getLogger(__name__)


class KeptSession(Protocol):
    """What is kept: `lost` gets the reason when the session is over."""

    lost: asyncio.Future[str]

    @property
    def next_ns(self) -> int:
        """Instant at which `tend` has something to do."""

    async def tend(self) -> None:
        """Do what is due; sets `lost` when the session does not survive it."""

    def lose(self, reason: str) -> None:
        """End the session at once."""

    async def close(self) -> None:
        """End the session politely, in bounded time."""


S = TypeVar("S", bound=KeptSession)


class Keeper(Generic[S]):
    """Keeps one session of one endpoint alive in a background task.

    `dial` returns a fresh session in bounded time or raises; what it raises is the reason to wait and try again.
    """

    def __init__(
        self,
        endpoint: str,
        dial: Callable[[], Awaitable[S]],
        clock: Clock,
        *,
        backoff: Backoff,
        rng: random.Random,
        on_event: OnLinkEvent,
    ) -> None:
        self._endpoint = endpoint
        self._dial = dial
        self._clock = clock
        self._backoff = backoff
        self._rng = rng
        self._on_event = on_event
        self._session: S | None = None
        self._task: asyncio.Task[None] | None = None
        self._attempt = 0
        self._announced = ""
        self.connects = 0
        self.losses = 0
        self.last_error = ""

    @property
    def session(self) -> S | None:
        """The living session, None while there is none."""
        return self._session if self._session is not None and not self._session.lost.done() else None

    @property
    def state(self) -> LinkState:
        """Up with a living session, connecting while one is sought, down before `start` and after `stop`."""
        if self.session is not None:
            return LinkState.UP
        return LinkState.DOWN if self._task is None else LinkState.CONNECTING

    def start(self, first: S) -> None:
        """Keep this session from now on; the keeper must not be started already."""
        self._adopt(first)
        self._task = asyncio.create_task(self._keep(), name=f"keeper of {self._endpoint}")

    def revive(self) -> None:
        """Restart the keeping task if it died; called once per period, so that its death lasts no longer."""
        if self._task is None or not self._task.done():
            return
        reason = "cancelled" if self._task.cancelled() else repr(self._task.exception())
        self.last_error = f"the keeping task died: {reason}"
        self._emit(LinkEvent(LinkEventKind.KEEPER_RESTARTED, self._endpoint, self.last_error))
        self._task = asyncio.create_task(self._keep(), name=f"keeper of {self._endpoint}")

    async def stop(self) -> None:
        """Stop keeping and close the session; a second call does nothing."""
        task, self._task = self._task, None
        if task is None:
            return
        task.cancel()
        session, self._session = self._session, None
        try:
            await asyncio.wait({task})  # bounded: every await of the task yields to cancellation at once
        finally:
            if session is not None:
                await session.close()
        self._emit(LinkEvent(LinkEventKind.CLOSED, self._endpoint))

    async def _keep(self) -> None:
        while True:
            if self._session is not None:
                await self._tend(self._session)
            await self._wait_before_dialling()
            try:
                fresh = await self._dial()
            except Exception as error:  # noqa: BLE001 - no reason whatever ends the search for a fresh session
                self.last_error = str(error) or type(error).__name__
                continue
            self._adopt(fresh)

    async def _tend(self, session: S) -> None:
        """Look after a session until it is lost."""
        since_ns = self._clock.monotonic_ns()
        while not session.lost.done():
            await first_of(self._clock, session.next_ns, session.lost)
            if session.lost.done():
                break
            try:
                await session.tend()
            except Exception as error:  # noqa: BLE001 - reported below as the reason of the loss
                session.lose(str(error) or type(error).__name__)
        self._session = None
        self.losses += 1
        self.last_error = session.lost.result()
        if self._clock.monotonic_ns() - since_ns >= self._backoff.ceiling_s * NS:
            self._attempt = 0
        self._announced = ""
        self._emit(LinkEvent(LinkEventKind.LOST, self._endpoint, self.last_error))

    async def _wait_before_dialling(self) -> None:
        self._attempt += 1
        delay_s = self._backoff.delay_s(self._attempt, self._rng)
        self._announce(delay_s)
        await self._clock.sleep_until(self._clock.monotonic_ns() + round(delay_s * NS))

    def _announce(self, delay_s: float) -> None:
        """Say that we retry: at attempts 1, 2, 4, 8 ... and whenever the reason is another, not all night long."""
        if self.last_error == self._announced and self._attempt & (self._attempt - 1):
            return
        self._announced = self.last_error
        self._emit(
            LinkEvent(LinkEventKind.RETRYING, self._endpoint, self.last_error, self._attempt, retry_in_s=delay_s)
        )

    def _adopt(self, session: S) -> None:
        self._session = session
        self.connects += 1
        self._emit(LinkEvent(LinkEventKind.CONNECTED, self._endpoint))

    def _emit(self, event: LinkEvent) -> None:
        try:
            self._on_event(event)
        except Exception:
            logger.exception("the receiver of link events failed on: %s", event)
