"""What a fresh session learns about its server before it carries anything.

The server must be Running (OPC 10000-5, 12.6: in `Test` its outputs may be disconnected); every namespace is looked up
by URI; every tag must be a variable, every writable tag a scalar that this client may write, of a type that can hold
it. All that is wrong is said in one go.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from asyncua import ua
from asyncua.client.client import Client
from asyncua.ua.attribute_ids import AttributeIds
from asyncua.ua.object_ids import ObjectIds

from gateway.links.opcua_addresses import Address, node_id
from gateway.links.opcua_values import FLOATS, INTEGERS, writable_type
from gateway.links.protocol import AddressUnknownError, PeerUnreachableError
from gateway.signals import DataType, Tag
from gateway.status_codes import Severity, name, severity

STATE = node_id(ObjectIds.Server_ServerStatus_State)
NAMESPACES = node_id(ObjectIds.Server_NamespaceArray)
MOST_READ = node_id(ObjectIds.Server_ServerCapabilities_OperationLimits_MaxNodesPerRead)
MOST_WRITTEN = node_id(ObjectIds.Server_ServerCapabilities_OperationLimits_MaxNodesPerWrite)

SCALAR_RANKS = (ua.ValueRank.Scalar, ua.ValueRank.Any, ua.ValueRank.ScalarOrOneDimension)
MAY_WRITE = 1 << ua.AccessLevel.CurrentWrite

TYPES = {
    DataType.FLOAT: (*FLOATS, *INTEGERS),
    DataType.COUNTER: tuple(INTEGERS),
    DataType.BOOLEAN: (ua.VariantType.Boolean,),
    DataType.TEXT: (ua.VariantType.String,),
}
"""Types of node that can hold each type of tag."""


@dataclass(frozen=True)
class OpcUaSite:
    """Where the tags of one site are: `addresses[i]` is that of `tags[i]`."""

    endpoint: str
    tags: tuple[Tag, ...]
    addresses: tuple[Address, ...]


@dataclass(frozen=True)
class Survey:
    """What holds for one session: nodes in order of the tags, types of the writable ones, limits (0: none)."""

    nodes: tuple[ua.NodeId, ...]
    indices: Mapping[str, int]
    wire_types: Mapping[str, ua.VariantType]
    most_read: int


def read_request(nodes: Sequence[ua.NodeId], attribute: AttributeIds = AttributeIds.Value) -> ua.ReadParameters:
    """One Read of one attribute of many nodes, straight from the source, with both timestamps."""
    return ua.ReadParameters(
        MaxAge=0.0,
        TimestampsToReturn=ua.TimestampsToReturn.Both,
        NodesToRead=[ua.ReadValueId(NodeId=node, AttributeId=attribute) for node in nodes],
    )


async def read_in_batches(
    client: Client,
    nodes: Sequence[ua.NodeId],
    most: int,
    attribute: AttributeIds = AttributeIds.Value,
) -> list[ua.DataValue]:
    """Read one attribute of many nodes, in one request unless the server takes at most `most` nodes in one."""
    size = most or max(len(nodes), 1)
    answers: list[ua.DataValue] = []
    for start in range(0, len(nodes), size):
        answers += await client.uaclient.read(read_request(nodes[start : start + size], attribute))
    return answers


def not_running(state: ua.DataValue) -> str:
    """Why a server in this state is of no use, empty when it is Running."""
    value = content(state)
    if value == ua.ServerState.Running:
        return ""
    known = {int(one): one.name for one in ua.ServerState}
    said = known.get(value, repr(value)) if isinstance(value, int) else "not readable"
    return f"server state is {said}, it must be Running"


def indices_of(namespaces: ua.DataValue, addresses: Sequence[Address]) -> dict[str, int]:
    """Index of every namespace in use that the server has, by URI."""
    table = content(namespaces)
    uris = list(table) if isinstance(table, list) else []
    return {address.namespace: uris.index(address.namespace) for address in addresses if address.namespace in uris}


async def survey(client: Client, site: OpcUaSite) -> Survey:
    """Look at the server through an activated session; no deadline of its own, the caller sets one.

    Raises:
        PeerUnreachableError: the server is not Running, or cannot take a whole set of inputs in one request.
        AddressUnknownError: some tags cannot be used as the plant file wants; all of them are listed.
    """
    state, namespaces, *limits = await client.uaclient.read(
        read_request((STATE, NAMESPACES, MOST_READ, MOST_WRITTEN)),
    )
    if reason := not_running(state):
        raise PeerUnreachableError(f"{site.endpoint}: {reason}; put the server into operation, then try again")
    most_read, most_written = (_limit(limit) for limit in limits)
    writable = sum(tag.writable for tag in site.tags)
    if most_written and writable > most_written:
        raise PeerUnreachableError(
            f"{site.endpoint} takes at most {most_written} nodes in one Write but a set of inputs has {writable}: "
            "raise the server's MaxNodesPerWrite, a set must arrive whole"
        )
    table = content(namespaces)
    uris = table if isinstance(table, list) else []
    nodes = [address.node_id(uris) for address in site.addresses]
    faults = {
        tag.name: f"the server has no namespace {address.namespace!r}"
        for tag, address, node in zip(site.tags, site.addresses, nodes, strict=True)
        if node is None
    }
    found = [(tag, node) for tag, node in zip(site.tags, nodes, strict=True) if node is not None]
    wire_types = await _look_at(client, found, most_read, faults)
    if faults:
        raise AddressUnknownError(_listed(site, faults))
    return Survey(
        nodes=tuple(node for _, node in found),
        indices=indices_of(namespaces, site.addresses),
        wire_types=wire_types,
        most_read=most_read,
    )


async def _look_at(
    client: Client, found: list[tuple[Tag, ua.NodeId]], most_read: int, faults: dict[str, str]
) -> dict[str, ua.VariantType]:
    """Types of the writable tags; adds to `faults` what is wrong with any."""
    nodes = [node for _, node in found]
    data_types = await read_in_batches(client, nodes, most_read, AttributeIds.DataType)
    wire_types: dict[str, ua.VariantType] = {}
    wanted: list[tuple[Tag, ua.NodeId, ua.DataValue]] = []
    for (tag, node), data_type in zip(found, data_types, strict=True):
        if severity(_code(data_type)) is Severity.BAD:
            faults[tag.name] = f"no variable there ({name(_code(data_type))})"
        elif tag.writable:
            wanted.append((tag, node, data_type))
    nodes = [node for _, node, _ in wanted]
    levels = await read_in_batches(client, nodes, most_read, AttributeIds.UserAccessLevel)
    ranks = await read_in_batches(client, nodes, most_read, AttributeIds.ValueRank)
    values = await read_in_batches(client, nodes, most_read)
    for (tag, _, data_type), level, rank, value in zip(wanted, levels, ranks, values, strict=True):
        wire_type = writable_type(content(data_type), value.Value)
        if not _bits(content(level)) & MAY_WRITE:
            faults[tag.name] = "the server does not let this client write it (UserAccessLevel)"
        elif content(rank) not in SCALAR_RANKS:
            faults[tag.name] = f"a scalar is written there but the server has an array (ValueRank {content(rank)})"
        elif wire_type is None:
            faults[tag.name] = f"its data type ({content(data_type)}) holds no number and no truth value"
        elif wire_type not in TYPES[tag.data_type]:
            faults[tag.name] = f"a {tag.data_type} cannot be written as {wire_type.name}"
        else:
            wire_types[tag.name] = wire_type
    return wire_types


def content(answer: ua.DataValue) -> object:
    """What an answer carries, None when nothing."""
    return None if answer.Value is None else answer.Value.Value


def _code(answer: ua.DataValue) -> int:
    return 0 if answer.StatusCode is None else int(answer.StatusCode.value)


def _bits(level: object) -> int:
    return level if isinstance(level, int) else 0


def _limit(answer: ua.DataValue) -> int:
    value = content(answer)
    return value if isinstance(value, int) else 0


def _listed(site: OpcUaSite, faults: Mapping[str, str]) -> str:
    addresses = {tag.name: address.text for tag, address in zip(site.tags, site.addresses, strict=True)}
    lines = [f"  {tag.name} at {addresses[tag.name]!r}: {faults[tag.name]}" for tag in site.tags if tag.name in faults]
    head = f"{site.endpoint}: {len(faults)} of {len(site.tags)} addresses cannot be used"
    return "\n".join([f"{head}; correct the site's address patterns or the server:", *lines])
