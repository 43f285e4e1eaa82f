"""The simulated plant as an OPC UA server of its own, in real time.

No security and no login: this is for the bench, on loopback unless told otherwise. What is modelled as the standard
has it: a namespace by URI, process values as AnalogItemType with EURange and EngineeringUnits (OPC 10000-8, 5.3.2.3),
a status code and a source timestamp with every value, access levels, and one method, `Rehearsal/provoke`, that takes
a line of `sim_plant.faults`.

`address_space` lays out the nodes, `values` fills them, `attributes` hands writes to the panel.
"""

from __future__ import annotations

import asyncio
import logging
from collections.abc import Callable, Mapping
from types import TracebackType
from typing import Self
from urllib.parse import urlparse

from asyncua import ua
from asyncua.server.server import Server

from sim_plant.direct import Clock, DirectPlant
from sim_plant.servers.address_space import lay_out
from sim_plant.servers.attributes import PlantAttributeService
from sim_plant.servers.values import PlantValues
from sim_plant.spec import SimulatedPlantSpec

LONGEST_GAP_S = 10.0
"""A process that was stopped for longer doesn't integrate what it missed."""

_log = logging.getLogger(__name__)


class OpcUaPlant:
    """A plant on the wire, as an asynchronous context manager; `scan` must run for its time to go on.

    Args:
        plant: the running plant.
        clock: the one it runs on.
        endpoint: `opc.tcp://host:port`; port 0 takes a free one, see `endpoint` afterwards.
        namespace: URI of the plant's namespace.
        identifiers: string identifier of the node of every tag, by tag.

    Raises:
        ValueError: a malformed endpoint, a tag without identifier, or two tags with the same one.
    """

    def __init__(
        self, plant: DirectPlant, clock: Clock, endpoint: str, namespace: str, identifiers: Mapping[str, str]
    ) -> None:
        self._host, self._port = _host_and_port(endpoint)
        self._identifiers = _checked(plant, identifiers)
        self._plant = plant
        self._clock = clock
        self._namespace = namespace
        self._server = Server()
        self._values = PlantValues(plant, self._server.iserver.aspace, clock)

    @property
    def endpoint(self) -> str:
        """Where it listens; the real port once it is started."""
        host = f"[{self._host}]" if ":" in self._host else self._host
        return f"opc.tcp://{host}:{self._port}"

    async def __aenter__(self) -> Self:
        """Lay out the address space and listen.

        Raises:
            OSError: the port is taken or the host is not ours.
        """
        server, name = self._server, self._plant.spec.name
        server.name = f"{name}, simulated"
        server.manufacturer_name = "Lengthsman"
        server.product_uri = "urn:lengthsman:simulated-plant"
        server.set_endpoint(self.endpoint)
        server.set_security_policy([ua.SecurityPolicyType.NoSecurity])
        server.set_identity_tokens([ua.AnonymousIdentityToken])
        server.iserver.allow_remote_admin = False
        server.disable_clock()  # the server's time is written with every scan, from the injected clock
        await server.init()
        await server.set_application_uri("urn:lengthsman:simulated-plant")
        index = await server.register_namespace(self._namespace)
        nodes = await lay_out(server, index, name, self._plant.tags, self._identifiers, self._plant.provoke)
        self._values.fill(nodes)
        server.iserver.attribute_service = PlantAttributeService(server.iserver.aspace, self._plant, self._values)
        await server.start()
        if server.bserver is not None:
            self._port = server.bserver.port
        _log.info("%s is served at %s, namespace %s", name, self.endpoint, self._namespace)
        return self

    async def __aexit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        """Close every connection and stop listening."""
        await self._server.stop()
        _log.info("%s is no longer served at %s", self._plant.spec.name, self.endpoint)

    async def scan(self) -> None:
        """Scan the plant at its instants until cancelled; instants are absolute, so lateness never adds up."""
        while True:
            await self._clock.sleep_until(self._plant.next_scan_ns())
            self._plant.catch_up()
            await self._values.publish()


async def serve(
    spec: SimulatedPlantSpec,
    endpoint: str,
    namespace: str,
    identifiers: Mapping[str, str],
    clock: Clock,
    stop_event: asyncio.Event,
    *,
    on_listening: Callable[[str], None] | None = None,
) -> None:
    """Simulate and serve a plant until the event is set; `on_listening` is told the endpoint once clients may come.

    Raises:
        ValueError: see `OpcUaPlant`.
        OSError: the port is taken or the host is not ours.
        ExceptionGroup: the simulation died; nobody is served by a dead plant.
    """
    plant = DirectPlant(spec, clock, longest_gap_s=LONGEST_GAP_S)
    async with OpcUaPlant(plant, clock, endpoint, namespace, identifiers) as server:
        if on_listening is not None:
            on_listening(server.endpoint)
        async with asyncio.TaskGroup() as group:
            scanning = group.create_task(server.scan(), name="scan")
            await stop_event.wait()
            scanning.cancel()


def _host_and_port(endpoint: str) -> tuple[str, int]:
    try:
        url = urlparse(endpoint)
        host, port = url.hostname, url.port
    except ValueError:
        host, port = None, None
    if host is None or port is None or url.scheme != "opc.tcp":
        raise ValueError(f"endpoint {endpoint!r}: must be opc.tcp://host:port")
    return host, port


def _checked(plant: DirectPlant, identifiers: Mapping[str, str]) -> Mapping[str, str]:
    if missing := [tag.tag for tag in plant.tags if tag.tag not in identifiers]:
        raise ValueError(f"identifiers lack {missing}: every tag needs a node")
    used = [identifiers[tag.tag] for tag in plant.tags]
    if twins := sorted({one for one in used if used.count(one) > 1}):
        raise ValueError(f"identifiers {twins} stand for more than one tag: each node carries one value")
    return identifiers
