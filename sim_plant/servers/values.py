"""Values of the nodes: one snapshot of the plant, looked at by whoever reads.

A snapshot is taken at every scan, before every Read request and after every Write, so that all values of one answer
belong together, and what a client wrote is there when it reads back.
"""

from __future__ import annotations

from collections.abc import Mapping
from copy import copy
from typing import Any

from asyncua import ua
from asyncua.server.address_space import AddressSpace
from asyncua.ua.attribute_ids import AttributeIds
from asyncua.ua.object_ids import ObjectIds

from sim_plant.direct import Clock, DirectPlant, TagValue
from sim_plant.servers.address_space import VARIANTS
from sim_plant.servers.library import node_id, stamp, status_code
from sim_plant.tags import Tag

_SERVER_TIME = node_id(ObjectIds.Server_ServerStatus_CurrentTime)
_SERVER_STATUS = node_id(ObjectIds.Server_ServerStatus)


class PlantValues:
    """Answers reads of the plant's nodes in an address space, and tells subscribers."""

    def __init__(self, plant: DirectPlant, space: AddressSpace, clock: Clock) -> None:
        self._plant = plant
        self._space = space
        self._clock = clock
        self._nodes: Mapping[ua.NodeId, Tag] = {}
        self._snapshot: Mapping[str, TagValue] = {}
        self._server_time: Any = stamp(0)

    def fill(self, nodes: Mapping[ua.NodeId, Tag]) -> None:
        """Answer for these nodes from now on."""
        self._nodes = nodes
        self.refresh()
        for address in nodes:
            self._space.set_attribute_value_callback(address, AttributeIds.Value, self._read)

    def tag_of(self, address: ua.NodeId) -> Tag | None:
        """Return the tag of a node, None when the node isn't the plant's."""
        return self._nodes.get(address)

    def refresh(self) -> None:
        """Take a new snapshot."""
        self._snapshot = self._plant.read_all()
        self._server_time = stamp(self._clock.wall_ns())

    async def publish(self) -> None:
        """Take a new snapshot, tell subscribers and move the server's own time."""
        self.refresh()
        for address in self._nodes:
            callbacks = self._space[address].attributes[AttributeIds.Value].datachange_callbacks
            for handle, callback in tuple(callbacks.items()):
                await callback(handle, self._read(address, AttributeIds.Value))
        await self._tell_time()

    def _read(self, address: ua.NodeId, _: AttributeIds) -> ua.DataValue:
        tag = self._nodes[address]
        value, status, source_ns = self._snapshot[tag.tag]
        return ua.DataValue(
            Value=ua.Variant(None, ua.VariantType.Null) if value is None else ua.Variant(value, VARIANTS[tag.type]),
            StatusCode=status_code(status),
            SourceTimestamp=stamp(source_ns),
            ServerTimestamp=self._server_time,
        )

    async def _tell_time(self) -> None:
        now = self._server_time
        told = ua.DataValue(ua.Variant(now, ua.VariantType.DateTime), SourceTimestamp=now, ServerTimestamp=now)
        await self._space.write_attribute_value(_SERVER_TIME, AttributeIds.Value, told)
        old = self._space.read_attribute_value(_SERVER_STATUS, AttributeIds.Value).Value
        if old is None or not isinstance(old.Value, ua.ServerStatusDataType):
            return
        status = copy(old.Value)
        status.CurrentTime = now
        told = ua.DataValue(ua.Variant(status, old.VariantType), SourceTimestamp=now, ServerTimestamp=now)
        await self._space.write_attribute_value(_SERVER_STATUS, AttributeIds.Value, told)
