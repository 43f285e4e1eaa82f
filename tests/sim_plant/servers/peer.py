"""An OPC UA client that speaks of tags, and the plant it is connected to."""

from __future__ import annotations

from collections.abc import AsyncIterator, Mapping
from contextlib import asynccontextmanager
from typing import Any

from asyncua import ua
from asyncua.client.client import Client
from asyncua.ua.attribute_ids import AttributeIds
from asyncua.ua.status_codes import get_name_and_doc

from gateway.clock import VirtualClock
from sim_plant.direct import DirectPlant
from sim_plant.servers.library import node_id
from sim_plant.servers.opcua import OpcUaPlant
from sim_plant.spec import SimulatedPlantSpec
from sim_plant.tags import TagType

NAMESPACE = "urn:lengthsman:test:short-row"
VARIANTS = {
    TagType.DOUBLE: ua.VariantType.Double,
    TagType.BOOLEAN: ua.VariantType.Boolean,
    TagType.UINT32: ua.VariantType.UInt32,
    TagType.UINT64: ua.VariantType.UInt64,
    TagType.STRING: ua.VariantType.String,
}


def identifiers_of(plant: DirectPlant) -> Mapping[str, str]:
    """Identifiers as a plant file's address pattern makes them."""
    return {tag.tag: f"{tag.section}/{tag.name}" for tag in plant.tags}


class Peer:
    """A connected client, the plant behind the wire, and its clock."""

    def __init__(self, client: Client, index: int, plant: DirectPlant, clock: VirtualClock) -> None:
        self.client = client
        self.plant = plant
        self.clock = clock
        self.period = 0
        self._index = index
        self._types = {tag.tag: VARIANTS[tag.type] for tag in plant.tags}

    def node_id(self, identifier: str) -> ua.NodeId:
        """A node of the plant's namespace."""
        return node_id(identifier, self._index)

    def node_of(self, tag: str) -> ua.NodeId:
        """The node of a tag."""
        return self.node_id(tag.replace(".", "/"))

    async def answer(self, tag: str) -> ua.DataValue:
        """Everything the server says about a tag's value, whatever its status."""
        return await self.client.get_node(self.node_of(tag)).read_data_value(raise_on_bad_status=False)

    async def read(self, tag: str) -> Any:
        """A tag's value."""
        answer = await self.answer(tag)
        assert answer.Value is not None
        return answer.Value.Value

    async def status(self, tag: str) -> str:
        """Name of a tag's status code."""
        answer = await self.answer(tag)
        assert answer.StatusCode is not None
        return answer.StatusCode.name

    async def write(self, *values: tuple[str, Any]) -> list[str]:
        """Send bare values in one Write request; returns the names of the answers' status codes."""
        bare = [
            (tag, ua.DataValue(Value=ua.Variant(value, self._types[tag]), StatusCode=None)) for tag, value in values
        ]
        return await self.write_as_is(*bare)

    async def write_as_is(self, *values: tuple[str, ua.DataValue]) -> list[str]:
        """Send what is given in one Write request; returns the names of the answers' status codes."""
        items = [
            ua.WriteValue(NodeId=self.node_of(tag), AttributeId=AttributeIds.Value, Value=dv) for tag, dv in values
        ]
        answers = await self.client.uaclient.write(ua.WriteParameters(NodesToWrite=items))
        return [get_name_and_doc(answer.value)[0] for answer in answers]

    async def take(self, *sections: str) -> None:
        """Take sections, with a heartbeat that moves."""
        beat = ("panel.heartbeat", (await self.read("panel.heartbeat") + 1) % 2**32)
        answers = await self.write(beat, *((f"{section}.in_charge", True) for section in sections))
        assert set(answers) == {"Good"}

    async def committed(self, valid_ms: int = 300) -> tuple[tuple[str, Any], tuple[str, Any]]:
        """Expiry and a new period, the end of a set."""
        self.period = max(self.period, await self.read("panel.accepted")) + 1
        return ("panel.expires", await self.read("panel.clock") + valid_ms), ("panel.period", self.period)

    async def provoke(self, line: object) -> Any:
        """Call the rehearsal's method."""
        rehearsal = self.client.get_node(self.node_id("Rehearsal"))
        return await rehearsal.call_method(self.node_id("Rehearsal/provoke"), line)

    def advance(self, seconds: float) -> None:
        """Let the injected clock go on."""
        self.clock.advance_to(self.clock.monotonic_ns() + round(seconds * 1e9))

    async def reset(self) -> None:
        """Bring plant and panel to where a test may start: no faults, permit on, nobody in charge."""
        for line in ("clear all", "permit on", "release tank-2.consumer", "release tank-3.consumer"):
            self.plant.provoke(line)
        sections = [name for name, _ in self.plant.spec.sections]
        self.plant.write([(f"{section}.in_charge", False) for section in sections])
        self.advance(0.05)


@asynccontextmanager
async def connected(spec: SimulatedPlantSpec) -> AsyncIterator[Peer]:
    """Give a client of a served plant on virtual time; scans are done when somebody reads or writes."""
    clock = VirtualClock(seed=5)
    plant = DirectPlant(spec, clock, longest_gap_s=10.0)
    async with (
        OpcUaPlant(plant, clock, "opc.tcp://127.0.0.1:0", NAMESPACE, identifiers_of(plant)) as server,
        Client(server.endpoint) as client,
    ):
        yield Peer(client, await client.get_namespace_index(NAMESPACE), plant, clock)
