"""Write requests: the part that belongs to the panel reaches it in one piece.

The library's own service writes one value after the other into the address space, where a client could see half a set,
and none of its hooks can refuse a single value. So the service itself is replaced: everything a request wants of the
plant's nodes goes to the panel in one call, in the order of the request and without an await in between, and the
panel's outcomes are the answer.
"""

from __future__ import annotations

from asyncua import ua
from asyncua.crypto.permission_rules import User, UserRole
from asyncua.server.address_space import AddressSpace, AttributeService
from asyncua.ua.attribute_ids import AttributeIds

from sim_plant.direct import DirectPlant
from sim_plant.servers.address_space import VARIANTS
from sim_plant.servers.library import status_code
from sim_plant.servers.values import PlantValues
from sim_plant.status import WRITE_NOT_SUPPORTED
from sim_plant.tags import Tag

_NOBODY = User(role=UserRole.Anonymous)


class PlantAttributeService(AttributeService):
    """Read and Write of a server whose plant is simulated."""

    def __init__(self, space: AddressSpace, plant: DirectPlant, values: PlantValues) -> None:
        super().__init__(space)
        self._plant = plant
        self._values = values

    def read(self, params: ua.ReadParameters) -> list[ua.DataValue]:
        """Answer a Read request from a snapshot of this instant."""
        self._values.refresh()
        return super().read(params)

    async def write(self, params: ua.WriteParameters, user: User = _NOBODY) -> list[ua.StatusCode]:
        """Answer a Write request: the plant's values through the panel, all else as the library does it."""
        answers: dict[int, ua.StatusCode] = {}
        ours: list[tuple[int, str, object]] = []
        others: list[int] = []
        for position, item in enumerate(params.NodesToWrite):
            tag = self._values.tag_of(item.NodeId) if item.AttributeId == AttributeIds.Value else None
            if tag is None:
                others.append(position)
                continue
            bare = _is_bare(item)
            # What can't be taken is handed over all the same, as nothing: the panel must know that a set is not whole.
            ours.append((position, tag.tag, _plain(item.Value, tag) if bare else None))
            if not bare:
                answers[position] = status_code(WRITE_NOT_SUPPORTED)
        if ours:
            statuses = self._plant.write([(tag, value) for _, tag, value in ours])
            for (position, _, _), status in zip(ours, statuses, strict=True):
                answers.setdefault(position, status_code(status))
            self._values.refresh()
        if others:
            rest = ua.WriteParameters(NodesToWrite=[params.NodesToWrite[position] for position in others])
            answers.update(zip(others, await super().write(rest, user), strict=True))
        return [answers[position] for position in range(len(params.NodesToWrite))]


def _is_bare(item: ua.WriteValue) -> bool:
    """Whether it is a whole value and nothing else: many a PLC takes no status or time (OPC 10000-4, 5.11.4)."""
    value = item.Value
    return (
        not item.IndexRange
        and (value.StatusCode is None or value.StatusCode.value == 0)
        and value.SourceTimestamp is None
        and value.ServerTimestamp is None
    )


def _plain(value: ua.DataValue, tag: Tag) -> object:
    """Return the scalar of exactly the node's type, None when it is anything else."""
    variant = value.Value
    fits = variant is not None and variant.VariantType is VARIANTS[tag.type] and not variant.is_array
    return variant.Value if fits and variant is not None else None
