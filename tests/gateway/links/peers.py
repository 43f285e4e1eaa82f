"""Peers for the link tests: a real server on loopback, a proxy that can fall silent, a listener that never answers.

Virtual time stands still unless a test moves it, so nothing here ever times out by accident: real sockets, no sleeping.
"""

from __future__ import annotations

import asyncio
import contextlib
import itertools
from collections.abc import Awaitable, Callable, Coroutine, Iterator
from types import TracebackType
from typing import Any, TypeVar

from asyncua import ua
from asyncua.common.callback import CallbackType
from asyncua.common.node import Node
from asyncua.server.server import Server
from asyncua.ua.object_ids import ObjectIds

from gateway.clock import NS, VirtualClock
from gateway.links.events import LinkEvent, LinkEventKind
from gateway.links.opcua_addresses import node_id

T = TypeVar("T")

GUARD_S = 30.0
"""A test that waits longer than this for a peer is broken."""

_counter = itertools.count()


async def soon(awaitable: Awaitable[T]) -> T:
    """Await something that happens by itself, with a guard against waiting for ever."""
    async with asyncio.timeout(GUARD_S):
        return await awaitable


async def until(holds: Callable[[], bool]) -> None:
    """Turn the loop until something holds."""
    async with asyncio.timeout(GUARD_S):
        while not holds():  # noqa: ASYNC110 - the peer offers no event
            await asyncio.sleep(0)


async def in_time(clock: VirtualClock, work: Coroutine[Any, Any, T], sent: Awaitable[object], due_ns: int) -> T:
    """Start `work`, and once `sent` has happened move time to `due_ns`; its result."""
    task = asyncio.ensure_future(work)
    await soon(sent)
    clock.advance_to(due_ns)
    return await soon(task)


def ahead(clock: VirtualClock, seconds: float) -> int:
    """Instant this far ahead."""
    return clock.monotonic_ns() + round(seconds * NS)


def answer(value: object, code: Any = 0, kind: ua.VariantType | None = None, stamp: Any = None) -> ua.DataValue:
    """A value with a status code and, for both timestamps, the same instant."""
    variant = ua.Variant(value, kind) if kind is not None else ua.Variant(value)
    return ua.DataValue(Value=variant, StatusCode=ua.StatusCode(code), SourceTimestamp=stamp, ServerTimestamp=stamp)


class Events:
    """Collects link events and lets a test wait for one."""

    def __init__(self) -> None:
        self.seen: list[LinkEvent] = []
        self._fresh = asyncio.Event()

    def __call__(self, event: LinkEvent) -> None:
        """Take one event."""
        self.seen.append(event)
        self._fresh.set()

    async def next(self, kind: LinkEventKind) -> LinkEvent:
        """Wait for an event of this kind, dropping everything up to it."""
        async with asyncio.timeout(GUARD_S):
            while True:
                while self.seen:
                    event = self.seen.pop(0)
                    if event.kind is kind:
                        return event
                self._fresh.clear()
                await self._fresh.wait()


class Bench:
    """A real server with one namespace of its own; `listen` and `deafen` are its process coming and going."""

    def __init__(self, server: Server, *, disposable: bool = False) -> None:
        self.server = server
        self._disposable = disposable
        self.uri = f"urn:lengthsman:test-{next(_counter)}"
        self.index = 0
        self.reads: list[ua.ReadParameters] = []
        self.writes: list[ua.WriteParameters] = []
        self.gate = asyncio.Event()
        self.gate.set()
        self.held = asyncio.Event()
        self._nodes: list[Node] = []

    @property
    def endpoint(self) -> str:
        """Where it listens."""
        return f"opc.tcp://127.0.0.1:{self.port}"

    @property
    def port(self) -> int:
        """Port it listens on."""
        assert self.server.bserver is not None
        return self.server.bserver.port

    async def __aenter__(self) -> Bench:
        """Register the namespace and start listening to what clients ask for."""
        self.index = await self.server.register_namespace(self.uri)
        self.server.subscribe_server_callback(CallbackType.PreRead, self._on_read)
        self.server.subscribe_server_callback(CallbackType.PreWrite, self._on_write)
        return self

    async def __aexit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        """Take everything back, so that the next test finds the server as new."""
        self.gate.set()
        self.server.unsubscribe_server_callback(CallbackType.PreRead, self._on_read)
        self.server.unsubscribe_server_callback(CallbackType.PreWrite, self._on_write)
        if not self._disposable:  # deleting takes long with many nodes
            await self.server.delete_nodes(self._nodes)
        await self.set_state(ua.ServerState.Running)
        await until(lambda: not self.sessions)

    async def add(
        self,
        identifier: str,
        value: object = 0.0,
        kind: ua.VariantType | None = None,
        *,
        writable: bool = False,
        data_type: ua.NodeId | None = None,
    ) -> Node:
        """Add a variable with this string identifier."""
        node = await self.server.nodes.objects.add_variable(
            node_id(identifier, self.index), f"{self.index}:{identifier}", value, varianttype=kind, datatype=data_type
        )
        if writable:
            await node.set_writable()
        self._nodes.append(node)
        return node

    async def renumber(self) -> None:
        """Give the namespace another index, and its nodes with it, as a restarted server may."""
        uris = list(await self.server.get_namespace_array())
        values = [(node, await node.read_data_value(raise_on_bad_status=False)) for node in self._nodes]
        await self.server.delete_nodes(self._nodes)
        self._nodes = []
        uris[self.index] = f"{self.uri}-retired"
        await self.server.get_node(node_id(ObjectIds.Server_NamespaceArray)).write_value([*uris, self.uri])
        self.index = len(uris)
        for node, value in values:
            await self.add(str(node.nodeid.Identifier), value.Value, writable=True)

    async def set_state(self, state: ua.ServerState) -> None:
        """Make the server say that it is in this state."""
        await self.server.get_node(node_id(ObjectIds.Server_ServerStatus_State)).write_value(
            int(state), ua.VariantType.Int32
        )

    @property
    def sessions(self) -> list[object]:
        """Sessions of clients that the server still holds."""
        return list(self.server.iserver._external_sessions)

    async def deafen(self) -> None:
        """Drop all clients and stop listening; their sessions die."""
        assert self.server.bserver is not None
        await self.server.bserver.stop()
        self.server.iserver._external_sessions.clear()

    async def listen(self) -> None:
        """Listen again where it listened before."""
        assert self.server.bserver is not None
        await self.server.bserver.start()

    def hold(self) -> None:
        """Let the server take requests without working on them; `held` tells that one waits, `gate` lets it go on."""
        self.gate.clear()
        self.held.clear()

    async def _on_read(self, event: Any, _: object) -> None:
        if event.is_external:
            self.reads.append(event.request_params)
            await self._pass_gate()

    async def _on_write(self, event: Any, _: object) -> None:
        if event.is_external:
            self.writes.append(event.request_params)
            await self._pass_gate()

    async def _pass_gate(self) -> None:
        if not self.gate.is_set():
            self.held.set()
            await self.gate.wait()


@contextlib.asynccontextmanager
async def running_server() -> Any:
    """A server on a free port of loopback, without the second its own shutdown takes."""
    server = Server()
    await server.init()
    server.set_endpoint("opc.tcp://127.0.0.1:0")
    server.set_security_policy([ua.SecurityPolicyType.NoSecurity])
    await server.start()
    try:
        yield server
    finally:
        ticking = server.iserver.time_task
        if ticking is not None:
            ticking.cancel()
            await asyncio.wait({ticking})
            server.iserver.time_task = None
        await server.stop()


class Proxy:
    """Forwards to a server, until it is told to swallow everything: a half-open connection."""

    def __init__(self, port: int) -> None:
        self._target = port
        self._listener: asyncio.Server | None = None
        self._pipes: set[asyncio.Task[None]] = set()
        self._silent = False
        self.swallowed = asyncio.Event()

    @property
    def endpoint(self) -> str:
        """Where it listens."""
        assert self._listener is not None
        return f"opc.tcp://127.0.0.1:{self._listener.sockets[0].getsockname()[1]}"

    async def __aenter__(self) -> Proxy:
        """Listen on a free port."""
        self._listener = await asyncio.start_server(self._serve, "127.0.0.1", 0)
        return self

    async def __aexit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        """Close everything."""
        assert self._listener is not None
        self._listener.close()
        for pipe in tuple(self._pipes):
            pipe.cancel()
        if self._pipes:
            await asyncio.wait(self._pipes)

    @property
    def busy(self) -> bool:
        """Whether any connection is open."""
        return bool(self._pipes)

    def fall_silent(self) -> None:
        """Swallow whatever comes from now on, on old connections and new ones, without closing any."""
        self._silent = True
        self.swallowed.clear()

    def speak(self) -> None:
        """Forward again; what was swallowed is lost."""
        self._silent = False

    async def _serve(self, reader: asyncio.StreamReader, writer: asyncio.StreamWriter) -> None:
        there, back = await asyncio.open_connection("127.0.0.1", self._target)
        for source, sink in ((reader, back), (there, writer)):
            pipe = asyncio.create_task(self._pump(source, sink))
            self._pipes.add(pipe)
            pipe.add_done_callback(self._pipes.discard)

    async def _pump(self, source: asyncio.StreamReader, sink: asyncio.StreamWriter) -> None:
        try:
            with contextlib.suppress(ConnectionError):
                while data := await source.read(65536):
                    if self._silent:
                        self.swallowed.set()
                    else:
                        sink.write(data)
        finally:
            sink.close()


class Mute:
    """Listens, accepts, takes everything, never answers."""

    def __init__(self, greeting: bytes = b"") -> None:
        self._greeting = greeting
        self._listener: asyncio.Server | None = None
        self._writers: list[asyncio.StreamWriter] = []
        self.received = asyncio.Event()
        self.ended = asyncio.Event()
        self.was_reset = False

    @property
    def endpoint(self) -> str:
        """Where it listens."""
        assert self._listener is not None
        return f"opc.tcp://127.0.0.1:{self._listener.sockets[0].getsockname()[1]}"

    async def __aenter__(self) -> Mute:
        """Listen on a free port."""
        self._listener = await asyncio.start_server(self._serve, "127.0.0.1", 0)
        return self

    async def __aexit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        """Close everything."""
        assert self._listener is not None
        self._listener.close()
        for writer in self._writers:
            writer.close()

    async def _serve(self, reader: asyncio.StreamReader, writer: asyncio.StreamWriter) -> None:
        self._writers.append(writer)
        try:
            while await reader.read(65536):
                self.received.set()
                writer.write(self._greeting)
        except ConnectionResetError:
            self.was_reset = True
        finally:
            writer.close()
            self.ended.set()


@contextlib.contextmanager
def free_port() -> Iterator[int]:
    """Port of loopback on which nobody listens."""
    import socket

    with socket.socket() as bound:
        bound.bind(("127.0.0.1", 0))
        yield bound.getsockname()[1]
