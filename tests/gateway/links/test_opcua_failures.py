"""What breaks on a real wire, and what the link makes of it (rows of the failure table named beside each test)."""

from __future__ import annotations

import asyncio
import random
import struct
from collections.abc import AsyncIterator, Callable
from typing import Any

import pytest
import pytest_asyncio
from asyncua import ua
from asyncua.ua.status_codes import StatusCodes

from gateway.clock import VirtualClock
from gateway.links.backoff import Backoff
from gateway.links.events import LinkEventKind
from gateway.links.opcua import OpcUaLink, OpcUaSettings
from gateway.links.opcua_session import SessionTimes
from gateway.links.protocol import LinkState, PeerUnreachableError, WriteOutcome
from gateway.signals import MISSING, Tag
from tests.gateway.links.peers import (
    Bench,
    Events,
    Mute,
    Proxy,
    ahead,
    free_port,
    in_time,
    soon,
    until,
)

pytestmark = [pytest.mark.wire, pytest.mark.asyncio(loop_scope="module")]

LEVEL = Tag("tank-1.level", "tank-1/level")
PUMP = Tag("tank-1.pump", "ns=2;s=tank-1/pump", writable=True)
SETTINGS = OpcUaSettings(
    times=SessionTimes(call_timeout_s=0.2, session_timeout_s=10.0, keep_alive_s=2.0, channel_lifetime_s=600.0),
    dial_timeout_s=5.0,
    backoff=Backoff(first_s=0.25, ceiling_s=5.0),
)

OpenLink = Callable[..., Any]


@pytest.fixture
def events() -> Events:
    """Give a collector of link events."""
    return Events()


@pytest_asyncio.fixture(loop_scope="module")
async def open_link(bench: Bench, clock: VirtualClock, events: Events) -> AsyncIterator[OpenLink]:
    """Give a function that opens a link for a level and a pump, directly or through a proxy."""
    links: list[OpcUaLink] = []
    await bench.add(LEVEL.address, 3.0)
    await bench.add("tank-1/pump", 1.0, writable=True)

    async def connect(endpoint: str | None = None, **other: Any) -> OpcUaLink:
        link = OpcUaLink(
            endpoint or bench.endpoint,
            bench.uri,
            [LEVEL, PUMP],
            clock,
            settings=SETTINGS,
            on_event=other.get("on_event", events),
            rng=random.Random(5),
        )
        await soon(link.open(5.0))
        links.append(link)
        return link

    yield connect
    for link in links:
        closing = asyncio.ensure_future(link.close())
        while not closing.done():
            await asyncio.sleep(0)
            if closing.done() or (due := clock.next_ns()) is None:
                continue
            clock.advance_to(due)
        await closing


async def retried(clock: VirtualClock, events: Events) -> None:
    """Let the announced wait pass."""
    event = await events.next(LinkEventKind.RETRYING)
    assert event.retry_in_s is not None
    clock.advance_to(ahead(clock, event.retry_in_s) + 1)


async def test_a_hung_peer_costs_its_cut_off_then_its_session(
    bench: Bench, clock: VirtualClock, events: Events, open_link: OpenLink
) -> None:
    """Rows 2, 3: half-open; MISSING at the cut-off, lost at the call timeout, a fresh session when it speaks again."""
    async with Proxy(bench.port) as proxy:
        link = await open_link(proxy.endpoint)
        proxy.fall_silent()
        call_timeout_ns, due_ns = ahead(clock, 0.2), ahead(clock, 0.05)

        gathered = await in_time(clock, link.gather(due_ns), proxy.swallowed.wait(), due_ns)

        assert gathered.readings == {LEVEL.name: MISSING, PUMP.name: MISSING}
        assert link.statistics().state is LinkState.UP
        clock.advance_to(call_timeout_ns)
        lost = await events.next(LinkEventKind.LOST)
        assert lost.reason == "no answer within 200 ms"
        assert link.statistics().state is LinkState.CONNECTING
        assert not (await soon(link.gather(ahead(clock, 0.05)))).complete

        proxy.speak()
        await retried(clock, events)
        await events.next(LinkEventKind.CONNECTED)
        gathered = await soon(link.gather(ahead(clock, 0.05)))
        assert gathered.readings[LEVEL.name].value == 3.0
        assert (link.statistics().connects, link.statistics().losses) == (2, 1)


async def test_a_write_into_a_dead_line_is_unknown(
    bench: Bench, clock: VirtualClock, events: Events, open_link: OpenLink
) -> None:
    """Row 1: sent, unanswered; after the loss nothing more is sent."""
    async with Proxy(bench.port) as proxy:
        link = await open_link(proxy.endpoint)
        proxy.fall_silent()
        call_timeout_ns, due_ns = ahead(clock, 0.2), ahead(clock, 0.1)

        outcome = await in_time(clock, link.write([(PUMP, 35.0)], due_ns), proxy.swallowed.wait(), due_ns)

        assert outcome == {PUMP.name: WriteOutcome.UNKNOWN}
        clock.advance_to(call_timeout_ns)
        await events.next(LinkEventKind.LOST)
        outcome = await soon(link.write([(PUMP, 36.0)], ahead(clock, 0.1)))
        assert outcome == {PUMP.name: WriteOutcome.NOT_SENT}


async def test_a_cut_off_past_the_call_timeout_is_not_waited_for(
    bench: Bench, clock: VirtualClock, open_link: OpenLink
) -> None:
    """Once the session is judged dead, gather and write return at once."""
    async with Proxy(bench.port) as proxy:
        link = await open_link(proxy.endpoint)
        proxy.fall_silent()
        gathering = link.gather(ahead(clock, 60.0))
        gathered = await in_time(clock, gathering, proxy.swallowed.wait(), ahead(clock, 0.2))
        assert not gathered.complete
        assert "no answer within 200 ms" in link.statistics().last_error


async def test_a_restarted_server_gets_a_fresh_session(
    bench: Bench, clock: VirtualClock, events: Events, open_link: OpenLink
) -> None:
    """Row 5: the loss is seen between calls, attempts are refused while nobody listens, then all is as before."""
    link = await open_link()

    await bench.deafen()
    assert (await events.next(LinkEventKind.LOST)).reason == "the peer closed the connection"
    await retried(clock, events)
    second = await events.next(LinkEventKind.RETRYING)
    assert (second.attempt, "nobody listens there" in second.reason) == (2, True)
    outcome = await soon(link.write([(PUMP, 36.0)], ahead(clock, 0.1)))
    assert outcome == {PUMP.name: WriteOutcome.NOT_SENT}

    await bench.listen()
    assert second.retry_in_s is not None
    clock.advance_to(ahead(clock, second.retry_in_s) + 1)
    await events.next(LinkEventKind.CONNECTED)
    assert (await soon(link.gather(ahead(clock, 0.1)))).complete
    outcome = await soon(link.write([(PUMP, 37.0)], ahead(clock, 0.1)))
    assert outcome == {PUMP.name: WriteOutcome.WRITTEN}


async def test_a_forgotten_session_is_replaced(
    bench: Bench, clock: VirtualClock, events: Events, open_link: OpenLink
) -> None:
    """Row 5: the socket lives but the server answers with a fault of its own; the status names the reason."""
    link = await open_link()
    bench.reads.clear()

    def forget(*_: object) -> None:
        raise ua.UaStatusCodeError(StatusCodes.BadSessionIdInvalid)  # type: ignore[attr-defined]

    reads = bench.server.iserver.attribute_service.read
    bench.server.iserver.attribute_service.read = forget  # type: ignore[assignment]
    try:
        gathered = await soon(link.gather(ahead(clock, 0.1)))
    finally:
        bench.server.iserver.attribute_service.read = reads  # type: ignore[method-assign]

    assert not gathered.complete
    assert (await events.next(LinkEventKind.LOST)).reason == "the server answered BadSessionIdInvalid"
    await retried(clock, events)
    await events.next(LinkEventKind.CONNECTED)
    assert (await soon(link.gather(ahead(clock, 0.1)))).complete
    await until(lambda: len(bench.sessions) == 1)


async def test_namespaces_are_looked_up_again_after_a_restart(
    bench: Bench, clock: VirtualClock, events: Events, open_link: OpenLink
) -> None:
    """Row 8: the same addresses lead to the same variables under another index, for reading and for writing."""
    link = await open_link()
    before = bench.index

    await bench.deafen()
    await bench.renumber()
    await bench.listen()
    await retried(clock, events)
    await events.next(LinkEventKind.CONNECTED)

    assert bench.index != before
    assert (await soon(link.gather(ahead(clock, 0.1)))).readings[LEVEL.name].value == 3.0
    outcome = await soon(link.write([(PUMP, 40.0)], ahead(clock, 0.1)))
    assert outcome == {PUMP.name: WriteOutcome.WRITTEN}
    assert (await soon(link.gather(ahead(clock, 0.1)))).readings[PUMP.name].value == 40.0


async def test_namespaces_renumbered_under_a_living_session_are_noticed(
    bench: Bench, clock: VirtualClock, events: Events, open_link: OpenLink
) -> None:
    """Row 8: the keep-alive compares the array with what the session was built on."""
    link = await open_link()

    await bench.renumber()
    clock.advance_to(ahead(clock, 2.0))

    assert (await events.next(LinkEventKind.LOST)).reason == "the server renumbered its namespaces"
    await retried(clock, events)
    await events.next(LinkEventKind.CONNECTED)
    assert (await soon(link.gather(ahead(clock, 0.1)))).readings[LEVEL.name].value == 3.0


async def test_a_server_gone_out_of_operation_is_left(
    bench: Bench, clock: VirtualClock, events: Events, open_link: OpenLink
) -> None:
    """Row 40: every gather carries the server's state; in Test nothing it shows is used."""
    link = await open_link()
    await bench.set_state(ua.ServerState.Test)

    gathered = await soon(link.gather(ahead(clock, 0.1)))

    assert gathered.readings == {LEVEL.name: MISSING, PUMP.name: MISSING}
    assert (await events.next(LinkEventKind.LOST)).reason == "server state is Test, it must be Running"
    await retried(clock, events)
    assert "server state is Test" in (await events.next(LinkEventKind.RETRYING)).reason
    await until(lambda: not bench.sessions)


async def test_a_node_gone_from_a_living_server_is_one_bad_value(
    bench: Bench, clock: VirtualClock, open_link: OpenLink
) -> None:
    """Row 19: a bad status of one value is that value's own business."""
    link = await open_link()
    await bench.server.get_node(f"ns={bench.index};s={LEVEL.address}").delete()

    gathered = await soon(link.gather(ahead(clock, 0.1)))

    assert gathered.readings[LEVEL.name].status == StatusCodes.BadNodeIdUnknown
    assert gathered.readings[PUMP.name].value == 1.0
    assert gathered.complete


async def test_the_channel_is_renewed_before_it_expires(
    bench: Bench, clock: VirtualClock, events: Events, open_link: OpenLink
) -> None:
    """Row 11: renewal is a call like any other; the session goes on through it."""
    link = await open_link()
    for _ in range(3):
        clock.advance_to(ahead(clock, 450.0))
        served = len(bench.reads)
        await until(lambda served=served: len(bench.reads) > served)  # type: ignore[misc]
        assert (await soon(link.gather(ahead(clock, 0.1)))).complete
    assert link.statistics().losses == 0
    assert [event.kind for event in events.seen] == [LinkEventKind.CONNECTED]


async def test_a_renewal_without_an_answer_loses_the_session(
    bench: Bench, clock: VirtualClock, events: Events, open_link: OpenLink
) -> None:
    """Row 11: trouble near renewal means a full reconnect, not a channel in doubt."""
    async with Proxy(bench.port) as proxy:
        await open_link(proxy.endpoint)
        proxy.fall_silent()
        clock.advance_to(ahead(clock, 450.0))
        await soon(proxy.swallowed.wait())
        clock.advance_to(ahead(clock, 0.2))
        assert (await events.next(LinkEventKind.LOST)).reason == "no answer within 200 ms"


async def test_a_lost_session_is_reset_not_drained(clock: VirtualClock) -> None:
    """A socket given up is reset, so that our kernel forgets what the peer has not taken yet."""
    async with Mute() as mute:
        link = OpcUaLink(mute.endpoint, "urn:x", [LEVEL], clock, settings=SETTINGS)
        opening = link.open(1.0)
        with pytest.raises(PeerUnreachableError, match="did not answer within 1 s"):
            await in_time(clock, opening, mute.received.wait(), ahead(clock, 1.0))
        await soon(mute.ended.wait())
        assert mute.was_reset


async def test_a_peer_that_speaks_something_else_costs_no_more_than_the_timeout(clock: VirtualClock) -> None:
    """Bytes that are no OPC UA end the attempt within the caller's time."""
    async with Mute(greeting=b"HTTP/1.1 400 Bad Request\r\n\r\n") as mute:
        link = OpcUaLink(mute.endpoint, "urn:x", [LEVEL], clock, settings=SETTINGS)
        with pytest.raises(PeerUnreachableError, match="did not answer within 1 s"):
            await in_time(clock, link.open(1.0), mute.received.wait(), ahead(clock, 1.0))


async def test_a_refusal_keeps_the_peers_own_reason(clock: VirtualClock) -> None:
    """An Error message (OPC 10000-6, 7.1.2.5) ends the attempt at once and its status is told."""
    code = StatusCodes.BadTcpEndpointUrlInvalid
    async with Mute(greeting=struct.pack("<4sIIi", b"ERRF", 16, code, -1)) as mute:
        link = OpcUaLink(mute.endpoint, "urn:x", [LEVEL], clock, settings=SETTINGS)
        with pytest.raises(PeerUnreachableError, match="the server answered BadTcpEndpointUrlInvalid"):
            await soon(link.open(1.0))


async def test_nobody_listening_is_told_so(clock: VirtualClock) -> None:
    """The message names the endpoint and the fix."""
    with free_port() as port:
        link = OpcUaLink(f"opc.tcp://127.0.0.1:{port}", "urn:x", [LEVEL], clock, settings=SETTINGS)
        with pytest.raises(PeerUnreachableError, match=f"127.0.0.1:{port} cannot be reached: nobody listens there"):
            await soon(link.open(1.0))
        assert link.statistics().state is LinkState.DOWN


async def test_a_cancelled_open_leaves_nothing_behind(bench: Bench, clock: VirtualClock) -> None:
    """Cancelled while the server dawdles, the attempt drops its socket and the server its session."""
    await bench.add(LEVEL.address, 3.0)
    link = OpcUaLink(bench.endpoint, bench.uri, [LEVEL], clock, settings=SETTINGS)
    bench.hold()
    opening = asyncio.ensure_future(link.open(5.0))
    await soon(bench.held.wait())

    opening.cancel()
    with pytest.raises(asyncio.CancelledError):
        await opening

    bench.gate.set()
    await until(lambda: not bench.sessions)
    assert link.statistics().state is LinkState.DOWN


async def test_a_link_closed_while_opening_stays_closed(bench: Bench, clock: VirtualClock) -> None:
    """The session that arrives too late is given back."""
    await bench.add(LEVEL.address, 3.0)
    link = OpcUaLink(bench.endpoint, bench.uri, [LEVEL], clock, settings=SETTINGS)
    bench.hold()
    opening = asyncio.ensure_future(link.open(5.0))
    await soon(bench.held.wait())
    await soon(link.close())
    bench.gate.set()
    with pytest.raises(RuntimeError, match="was closed while it was being opened"):
        await soon(opening)
    await until(lambda: not bench.sessions)


async def test_close_gives_the_session_back_once(
    bench: Bench, clock: VirtualClock, events: Events, open_link: OpenLink
) -> None:
    """Row 10: the server frees the session; a second close says and does nothing; the link stays closed."""
    link = await open_link()
    await soon(link.close())
    await until(lambda: not bench.sessions)
    await soon(link.close())

    assert [event.kind for event in events.seen] == [LinkEventKind.CONNECTED, LinkEventKind.CLOSED]
    assert link.statistics().state is LinkState.DOWN
    assert not (await soon(link.gather(ahead(clock, 0.1)))).complete
    assert await soon(link.write([(PUMP, 1.0)], ahead(clock, 0.1))) == {PUMP.name: WriteOutcome.NOT_SENT}
    with pytest.raises(RuntimeError, match="opened already"):
        await link.open(1.0)


async def test_close_does_not_wait_for_a_dead_peer(
    bench: Bench, clock: VirtualClock, events: Events, open_link: OpenLink
) -> None:
    """The farewell has the call timeout, whatever the peer does."""
    async with Proxy(bench.port) as proxy:
        link = await open_link(proxy.endpoint)
        proxy.fall_silent()
        await in_time(clock, link.close(), proxy.swallowed.wait(), ahead(clock, 0.2))
        assert (await events.next(LinkEventKind.CLOSED)).endpoint == proxy.endpoint


async def test_a_cancelled_close_still_drops_the_line(bench: Bench, clock: VirtualClock, open_link: OpenLink) -> None:
    """Cancelled during its farewell, close leaves neither socket nor session behind."""
    async with Proxy(bench.port) as proxy:
        link = await open_link(proxy.endpoint)
        proxy.fall_silent()
        closing = asyncio.ensure_future(link.close())
        await soon(proxy.swallowed.wait())

        closing.cancel()
        with pytest.raises(asyncio.CancelledError):
            await closing

        await until(lambda: not proxy.busy)
        await until(lambda: not bench.sessions)
        assert link.statistics().state is LinkState.DOWN


async def test_a_cancelled_write_may_be_taken_and_leaves_the_link_usable(
    bench: Bench, clock: VirtualClock, open_link: OpenLink
) -> None:
    """Nobody can call a sent request back; the next gather shows what became of it."""
    link = await open_link()
    bench.hold()
    writing = asyncio.ensure_future(link.write([(PUMP, 35.0)], ahead(clock, 0.1)))
    await soon(bench.held.wait())

    writing.cancel()
    with pytest.raises(asyncio.CancelledError):
        await writing

    bench.gate.set()
    assert (await soon(link.gather(ahead(clock, 0.1)))).readings[PUMP.name].value == 35.0


async def test_the_last_error_is_the_latest(
    bench: Bench, clock: VirtualClock, events: Events, open_link: OpenLink
) -> None:
    """A loss after a refused write is what the statistics show."""
    link = await open_link()
    await soon(link.write([(PUMP, 35.0)], clock.monotonic_ns()))
    assert link.statistics().last_error == "write: the cut-off had passed, nothing was sent"
    await bench.deafen()
    await events.next(LinkEventKind.LOST)
    assert link.statistics().last_error == "the peer closed the connection"
    await bench.listen()


async def test_closing_under_a_gather_ends_the_gather(bench: Bench, clock: VirtualClock, open_link: OpenLink) -> None:
    """Whoever waits for readings gets MISSING, not an exception."""
    link = await open_link()
    bench.hold()
    gathering = asyncio.ensure_future(link.gather(ahead(clock, 60.0)))
    await soon(bench.held.wait())
    closing = asyncio.ensure_future(link.close())
    assert not (await soon(gathering)).complete
    bench.gate.set()
    await soon(closing)


async def test_a_receiver_that_fails_harms_nothing(
    bench: Bench, clock: VirtualClock, caplog: pytest.LogCaptureFixture, open_link: OpenLink
) -> None:
    """Row 22: errors of a callback are logged, the link goes on."""

    def fail(_: object) -> None:
        raise OSError("disk full")

    link = await open_link(on_event=fail)
    assert (await soon(link.gather(ahead(clock, 0.1)))).complete
    assert "the receiver of link events failed" in caplog.text
