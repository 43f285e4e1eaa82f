"""The nodes of a simulated plant.

Objects
  NAME                     folder, the plant
    SECTION ...            object
      SIGNAL ...           variable, AnalogItemType with EURange and EngineeringUnits
      in_charge            variable
    panel                  object
      heartbeat ...        variables
  Rehearsal                object
    provoke(line) → text   method
"""

from __future__ import annotations

import logging
from collections.abc import Callable, Mapping, Sequence

from asyncua import ua
from asyncua.common.node import Node
from asyncua.server.server import Server
from asyncua.ua.object_ids import ObjectIds
from asyncua.ua.status_codes import StatusCodes

from sim_plant.faults import FaultError
from sim_plant.servers.library import new_node_id, node_id, status_code
from sim_plant.servers.units import engineering_units
from sim_plant.tags import Tag, TagType

_log = logging.getLogger(__name__)

REHEARSAL = "Rehearsal"
PROVOKE = "Rehearsal/provoke"

VARIANTS = {
    TagType.DOUBLE: ua.VariantType.Double,
    TagType.BOOLEAN: ua.VariantType.Boolean,
    TagType.UINT32: ua.VariantType.UInt32,
    TagType.UINT64: ua.VariantType.UInt64,
    TagType.STRING: ua.VariantType.String,
}


async def lay_out(
    server: Server,
    index: int,
    name: str,
    tags: Sequence[Tag],
    identifiers: Mapping[str, str],
    provoke: Callable[[str], str],
) -> Mapping[ua.NodeId, Tag]:
    """Add all nodes to an initialised server; returns the tag of each variable."""
    plant = await server.nodes.objects.add_folder(index, name)
    sections: dict[str, Node] = {}
    nodes: dict[ua.NodeId, Tag] = {}
    for tag in tags:
        if tag.section not in sections:
            sections[tag.section] = await plant.add_object(index, tag.section)
        address = node_id(identifiers[tag.tag], index)
        await _add_variable(server, sections[tag.section], address, tag)
        nodes[address] = tag
    await _add_rehearsal(server, index, provoke)
    return nodes


async def _add_variable(server: Server, parent: Node, address: ua.NodeId, tag: Tag) -> None:
    analog = tag.span is not None
    access = ua.AccessLevel.CurrentRead.mask | (ua.AccessLevel.CurrentWrite.mask if tag.writable else 0)
    text = ua.LocalizedText(tag.name)
    item = ua.AddNodesItem(
        ParentNodeId=parent.nodeid,
        ReferenceTypeId=node_id(ObjectIds.HasComponent),
        RequestedNewNodeId=address,
        BrowseName=ua.QualifiedName(tag.name, address.NamespaceIndex),
        NodeClass=ua.NodeClass.Variable,
        NodeAttributes=ua.VariableAttributes(
            DisplayName=text,
            Description=text,
            Value=ua.Variant(None, ua.VariantType.Null),
            DataType=node_id(VARIANTS[tag.type].value),
            ValueRank=ua.ValueRank.Scalar,
            AccessLevel=access,
            UserAccessLevel=access,
            Historizing=False,
        ),
        TypeDefinition=node_id(ObjectIds.AnalogItemType if analog else ObjectIds.BaseDataVariableType),
    )
    (result,) = await server.iserver.isession.add_nodes([item])
    result.StatusCode.check()
    if tag.span is None:
        return
    node, index = server.get_node(address), address.NamespaceIndex
    low, high = tag.span
    await node.add_property(new_node_id(index), ua.QualifiedName("EURange", 0), ua.Range(Low=low, High=high))
    await node.add_property(new_node_id(index), ua.QualifiedName("EngineeringUnits", 0), engineering_units(tag.unit))


async def _add_rehearsal(server: Server, index: int, provoke: Callable[[str], str]) -> None:
    async def call(_: ua.NodeId, line: ua.Variant) -> list[ua.Variant] | ua.StatusCode:
        if line.VariantType is not ua.VariantType.String or not isinstance(line.Value, str):
            return status_code(StatusCodes.BadInvalidArgument)
        try:
            text = provoke(line.Value)
        except FaultError as error:
            # A bad status would lose the sentence that says what is wrong with the line (OPC 10000-4, 5.12.2.2: no
            # output arguments then), so a refusal is an answer like any other.
            text = f"refused: {error}"
            _log.warning("line refused: %s", error)
        return [ua.Variant(text, ua.VariantType.String)]

    rehearsal = await server.nodes.objects.add_object(node_id(REHEARSAL, index), ua.QualifiedName(REHEARSAL, index))
    await rehearsal.add_method(
        node_id(PROVOKE, index),
        ua.QualifiedName("provoke", index),
        call,
        [_argument("line", "One line of fault, like 'freeze tank-4.level for 20 s'")],
        [_argument("answer", "What it did, or 'refused: ' and why")],
    )


def _argument(name: str, description: str) -> ua.Argument:
    return ua.Argument(
        Name=name,
        DataType=node_id(ObjectIds.String),
        ValueRank=ua.ValueRank.Scalar,
        Description=ua.LocalizedText(description),
    )
