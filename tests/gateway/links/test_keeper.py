"""Keeping a session, with sessions that are not on any wire and in virtual time."""

from __future__ import annotations

import asyncio
import random
from collections.abc import Callable

import pytest

from gateway.clock import NS, VirtualClock
from gateway.links.backoff import Backoff
from gateway.links.events import LinkEvent, LinkEventKind
from gateway.links.keeper import Keeper
from gateway.links.protocol import LinkState

BACKOFF = Backoff(first_s=0.5, ceiling_s=4.0)


class FakeSession:
    """A session that lives until it is told to end."""

    def __init__(self, clock: VirtualClock) -> None:
        self._clock = clock
        self.lost: asyncio.Future[str] = asyncio.get_running_loop().create_future()
        self.next_ns = clock.monotonic_ns() + NS
        self.tended = 0
        self.closed = 0
        self.trouble: BaseException | None = None

    async def tend(self) -> None:
        """Count, or fail as told."""
        self.tended += 1
        self.next_ns = self._clock.monotonic_ns() + NS
        if self.trouble is not None:
            raise self.trouble

    def lose(self, reason: str) -> None:
        """End."""
        if not self.lost.done():
            self.lost.set_result(reason)

    async def close(self) -> None:
        """Count."""
        self.closed += 1
        self.lose("closed by us")


class Stage:
    """A keeper with everything around it."""

    def __init__(self) -> None:
        self.clock = VirtualClock(seed=1)
        self.events: list[LinkEvent] = []
        self.dialled: list[FakeSession] = []
        self.refusals: list[Exception] = []
        self.keeper = Keeper(
            "opc.tcp://x:1",
            self.dial,
            self.clock,
            backoff=BACKOFF,
            rng=random.Random(2),
            on_event=self.events.append,
        )

    async def dial(self) -> FakeSession:
        """Refuse as often as told, then connect."""
        if self.refusals:
            raise self.refusals.pop(0)
        self.dialled.append(FakeSession(self.clock))
        return self.dialled[-1]

    async def start(self) -> FakeSession:
        """Start with a session."""
        session = await self.dial()
        self.keeper.start(session)
        await self.turn()
        return session

    async def turn(self) -> None:
        """Let every ready task run."""
        for _ in range(10):
            await asyncio.sleep(0)

    async def run(self, until: Callable[[], bool]) -> None:
        """Move time from sleeper to sleeper until something holds."""
        for _ in range(10_000):
            await self.turn()
            if until():
                return
            due_ns = self.clock.next_ns()
            assert due_ns is not None
            self.clock.advance_to(due_ns)
        raise AssertionError("it never came to hold")

    def session(self) -> FakeSession | None:
        """Session that is kept right now."""
        return self.keeper.session

    def state(self) -> LinkState:
        """State right now."""
        return self.keeper.state

    def kinds(self) -> list[LinkEventKind]:
        """Kinds of the events so far."""
        return [event.kind for event in self.events]


async def test_a_session_is_tended_whenever_it_is_due() -> None:
    """The keeper does the session's chores at the session's instants."""
    stage = Stage()
    session = await stage.start()
    await stage.run(lambda: session.tended == 3)
    assert stage.state() is LinkState.UP
    await stage.keeper.stop()


async def test_a_lost_session_is_replaced_by_a_fresh_one() -> None:
    """One event per step: connected, lost with its reason, retrying in so many seconds, connected."""
    stage = Stage()
    session = await stage.start()
    session.lose("line cut")
    assert stage.session() is None
    await stage.run(lambda: len(stage.dialled) == 2)
    await stage.turn()

    assert stage.session() is stage.dialled[1]
    connected, lost, retrying, again = stage.events
    assert (connected.kind, again.kind) == (LinkEventKind.CONNECTED, LinkEventKind.CONNECTED)
    assert (lost.kind, lost.reason) == (LinkEventKind.LOST, "line cut")
    assert (retrying.kind, retrying.attempt) == (LinkEventKind.RETRYING, 1)
    assert retrying.retry_in_s is not None
    assert 0.25 <= retrying.retry_in_s <= 0.5
    assert (stage.keeper.connects, stage.keeper.losses, stage.keeper.last_error) == (2, 1, "line cut")
    await stage.keeper.stop()


@pytest.mark.parametrize("trouble", [RuntimeError("boom"), OSError(), asyncio.InvalidStateError("odd")])
async def test_trouble_of_any_kind_while_tending_is_a_loss(trouble: Exception) -> None:
    """No exception of a session ends the keeping."""
    stage = Stage()
    session = await stage.start()
    session.trouble = trouble
    await stage.run(lambda: len(stage.dialled) == 2)
    assert stage.keeper.losses == 1
    assert stage.keeper.last_error == (str(trouble) or type(trouble).__name__)
    await stage.keeper.stop()


async def test_waits_grow_and_are_announced_sparingly() -> None:
    """A night without the peer: attempts 1, 2, 4, 8 ... are announced, and every change of the reason."""
    stage = Stage()
    session = await stage.start()
    stage.refusals += [OSError("refused")] * 20 + [OSError("server state is Test")] * 3
    session.lose("line cut")
    await stage.run(lambda: len(stage.dialled) == 2)

    retries = [event for event in stage.events if event.kind is LinkEventKind.RETRYING]
    assert [(event.attempt, event.reason) for event in retries] == [
        (1, "line cut"),
        (2, "refused"),
        (4, "refused"),
        (8, "refused"),
        (16, "refused"),
        (22, "server state is Test"),
    ]
    assert all(event.retry_in_s is not None and event.retry_in_s <= BACKOFF.ceiling_s for event in retries)
    await stage.keeper.stop()


async def test_a_peer_that_accepts_and_fails_is_not_hammered() -> None:
    """Waits keep growing over short-lived sessions and start over after one that lasted."""
    stage = Stage()
    session = await stage.start()
    for number in (2, 3, 4):
        session.lose("no answer")
        await stage.run(lambda number=number: len(stage.dialled) == number)  # type: ignore[misc]
        await stage.turn()
        session = stage.dialled[-1]
    await stage.run(lambda: session.tended == 5)
    session.lose("no answer")
    await stage.run(lambda: len(stage.dialled) == 5)

    retries = [event.attempt for event in stage.events if event.kind is LinkEventKind.RETRYING]
    assert retries == [1, 2, 3, 1]
    await stage.keeper.stop()


async def test_a_dead_keeping_task_is_revived_at_the_next_period() -> None:
    """Row 21: a stray cancellation kills the task; the next call restarts it, says so, and the session goes on."""
    stage = Stage()
    session = await stage.start()
    session.trouble = asyncio.CancelledError()
    await stage.run(lambda: session.tended == 1)
    await stage.turn()
    session.trouble = None

    stage.keeper.revive()
    stage.keeper.revive()

    assert stage.kinds() == [LinkEventKind.CONNECTED, LinkEventKind.KEEPER_RESTARTED]
    await stage.run(lambda: session.tended == 3)
    assert stage.session() is session
    await stage.keeper.stop()


async def test_stop_ends_a_search_and_a_session_alike() -> None:
    """Stopped while seeking or while up, nothing goes on and a living session is closed politely."""
    seeking = Stage()
    session = await seeking.start()
    session.lose("line cut")
    await seeking.turn()
    assert seeking.state() is LinkState.CONNECTING
    await seeking.keeper.stop()
    assert seeking.state() is LinkState.DOWN
    assert len(seeking.dialled) == 1

    up = Stage()
    session = await up.start()
    await up.keeper.stop()
    await up.keeper.stop()
    assert session.closed == 1
    assert up.kinds() == [LinkEventKind.CONNECTED, LinkEventKind.CLOSED]


async def test_the_state_is_down_before_the_start() -> None:
    """Nothing is kept that was never started; stopping and reviving that is harmless."""
    stage = Stage()
    stage.keeper.revive()
    await stage.keeper.stop()
    assert stage.state() is LinkState.DOWN
    assert stage.events == []


def test_an_event_reads_as_one_line() -> None:
    """A person follows a night from the log alone: peer, what, when next, why, on one line even for a long reason."""
    event = LinkEvent(LinkEventKind.RETRYING, "opc.tcp://x:1", "first\n  second", attempt=4, retry_in_s=1.25)
    assert str(event) == "opc.tcp://x:1 retrying, attempt 4 in 1.25 s: first second"
    assert str(LinkEvent(LinkEventKind.CONNECTED, "opc.tcp://x:1")) == "opc.tcp://x:1 connected"
