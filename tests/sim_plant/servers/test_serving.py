"""Starting, scanning and stopping a served plant."""

from __future__ import annotations

import asyncio
import socket
from typing import Any

import pytest
from asyncua.client.client import Client
from asyncua.ua.object_ids import ObjectIds

from gateway.clock import VirtualClock
from sim_plant.direct import DirectPlant
from sim_plant.servers.library import node_id
from sim_plant.servers.opcua import OpcUaPlant, serve
from tests.sim_plant.rows import row
from tests.sim_plant.servers.peer import NAMESPACE, identifiers_of

ANY_PORT = "opc.tcp://127.0.0.1:0"


class Subscriber:
    """Puts what it is told into a queue."""

    def __init__(self) -> None:
        self.told: asyncio.Queue[Any] = asyncio.Queue(maxsize=100)

    def datachange_notification(self, _: object, value: object, __: object) -> None:
        """Take one notification."""
        self.told.put_nowait(value)


@pytest.mark.wire
async def test_serve_scans_tells_subscribers_and_stops_when_asked() -> None:
    """From the first connection to the closed port, on virtual time."""
    clock, stop = VirtualClock(seed=9), asyncio.Event()
    listening: asyncio.Future[str] = asyncio.get_running_loop().create_future()
    identifiers = identifiers_of(DirectPlant(row(), clock))
    serving = asyncio.create_task(
        serve(row(), ANY_PORT, NAMESPACE, identifiers, clock, stop, on_listening=listening.set_result)
    )
    endpoint = await listening
    assert answers(endpoint)
    subscriber = Subscriber()
    async with Client(endpoint) as client:
        index = await client.get_namespace_index(NAMESPACE)
        subscription = await client.create_subscription(10, subscriber)
        await subscription.subscribe_data_change(client.get_node(node_id("panel/clock", index)))
        first = await asyncio.wait_for(subscriber.told.get(), 5)
        clock.advance_to(clock.monotonic_ns() + 1_000_000_000)
        second = await asyncio.wait_for(subscriber.told.get(), 5)
        assert second >= first + 1000
        time_node = client.get_node(node_id(ObjectIds.Server_ServerStatus_CurrentTime))
        server_time = (await time_node.read_value()).timestamp()
        assert server_time == pytest.approx(clock.wall_ns() / 1e9, abs=1.0)
        await subscription.delete()
    stop.set()
    await serving
    assert not answers(endpoint)


@pytest.mark.wire
async def test_dead_simulation_ends_the_service() -> None:
    """A plant that no longer moves must not go on being served as if it did."""

    class Broken(VirtualClock):
        async def sleep_until(self, instant_ns: int) -> None:
            raise RuntimeError("no more time")

    clock = Broken(seed=9)
    identifiers = identifiers_of(DirectPlant(row(), clock))
    with pytest.raises(ExceptionGroup) as caught:
        await serve(row(), ANY_PORT, NAMESPACE, identifiers, clock, asyncio.Event())
    assert caught.group_contains(RuntimeError, match="no more time")


@pytest.mark.wire
async def test_cancelled_service_closes_its_port() -> None:
    """As when the process is interrupted instead of being asked."""
    clock = VirtualClock(seed=9)
    listening: asyncio.Future[str] = asyncio.get_running_loop().create_future()
    identifiers = identifiers_of(DirectPlant(row(), clock))
    serving = asyncio.create_task(
        serve(row(), ANY_PORT, NAMESPACE, identifiers, clock, asyncio.Event(), on_listening=listening.set_result)
    )
    endpoint = await listening
    serving.cancel()
    with pytest.raises(asyncio.CancelledError):
        await serving
    assert not answers(endpoint)


@pytest.mark.wire
async def test_taken_port_is_an_os_error() -> None:
    """Whoever starts the plant can say so and exit."""
    with socket.socket() as holder:
        holder.bind(("127.0.0.1", 0))
        holder.listen()
        endpoint = f"opc.tcp://127.0.0.1:{holder.getsockname()[1]}"
        served = OpcUaPlant(plant(), VirtualClock(), endpoint, NAMESPACE, identifiers_of(plant()))
        with pytest.raises(OSError, match="address already in use"):
            await served.__aenter__()


def answers(endpoint: str) -> bool:
    """Whether somebody listens there."""
    with socket.socket() as probe:
        return probe.connect_ex(("127.0.0.1", int(endpoint.rpartition(":")[2]))) == 0


def plant() -> DirectPlant:
    """A plant to be served."""
    return DirectPlant(row(), VirtualClock())


@pytest.mark.parametrize("endpoint", ["http://127.0.0.1:4840", "opc.tcp://127.0.0.1", "opc.tcp://127.0.0.1:x", "4840"])
def test_malformed_endpoint(endpoint: str) -> None:
    """Says what one looks like."""
    with pytest.raises(ValueError, match=r"must be opc\.tcp://host:port"):
        OpcUaPlant(plant(), VirtualClock(), endpoint, NAMESPACE, identifiers_of(plant()))


def test_tag_without_identifier() -> None:
    """Every tag needs a node; the missing ones are listed."""
    identifiers = {tag: one for tag, one in identifiers_of(plant()).items() if tag != "panel.clock"}
    with pytest.raises(ValueError, match=r"identifiers lack \['panel\.clock'\]"):
        OpcUaPlant(plant(), VirtualClock(), ANY_PORT, NAMESPACE, identifiers)


def test_identifier_used_twice() -> None:
    """A pattern that forgets the section, say."""
    identifiers = {**identifiers_of(plant()), "tank-1.level": "level", "tank-2.level": "level"}
    with pytest.raises(ValueError, match=r"identifiers \['level'\] stand for more than one tag"):
        OpcUaPlant(plant(), VirtualClock(), ANY_PORT, NAMESPACE, identifiers)
