"""What a link demands of a server before it trusts it, against a real server."""

from __future__ import annotations

import pytest
from asyncua import ua
from asyncua.ua.object_ids import ObjectIds

from gateway.clock import VirtualClock
from gateway.links.opcua import OpcUaLink
from gateway.links.opcua_addresses import node_id
from gateway.links.protocol import AddressUnknownError, LinkState, PeerUnreachableError
from gateway.signals import DataType, Tag
from tests.gateway.links.peers import Bench, soon, until

pytestmark = [pytest.mark.wire, pytest.mark.asyncio(loop_scope="module")]


async def refusal(bench: Bench, clock: VirtualClock, *tags: Tag, namespace: str | None = None) -> str:
    """What `open` says about addresses that cannot be used; afterwards the server holds no session."""
    link = OpcUaLink(bench.endpoint, namespace or bench.uri, tags, clock)
    with pytest.raises(AddressUnknownError) as caught:
        await soon(link.open(5.0))
    await until(lambda: not bench.sessions)
    assert link.statistics().state is LinkState.DOWN
    await link.close()
    return str(caught.value)


async def test_all_missing_addresses_are_listed_at_once(bench: Bench, clock: VirtualClock) -> None:
    """The message names the endpoint and every missing tag with its address, not the present ones."""
    await bench.add("tank-1/level")
    tags = [Tag(f"tank-{i}.level", f"tank-{i}/level") for i in (1, 2, 3)]

    said = await refusal(bench, clock, *tags)

    assert f"{bench.endpoint}: 2 of 3 addresses cannot be used" in said
    assert "tank-2.level at 'tank-2/level': no variable there (BadNodeIdUnknown)" in said
    assert "tank-3.level at 'tank-3/level': no variable there (BadNodeIdUnknown)" in said
    assert "tank-1.level" not in said


async def test_a_namespace_the_server_lacks_is_named(bench: Bench, clock: VirtualClock) -> None:
    """A wrong URI is told apart from a wrong identifier."""
    said = await refusal(bench, clock, Tag("tank-1.level", "tank-1/level"), namespace="urn:elsewhere")
    assert "the server has no namespace 'urn:elsewhere'" in said


async def test_an_object_is_no_variable(bench: Bench, clock: VirtualClock) -> None:
    """A node without a value is as good as missing."""
    said = await refusal(bench, clock, Tag("tank-1.level", "i=85"))
    assert "no variable there (BadAttributeIdInvalid)" in said


async def test_a_writable_tag_must_be_writable_there(bench: Bench, clock: VirtualClock) -> None:
    """Found at connect, not at the first write."""
    await bench.add("tank-1/pump")
    said = await refusal(bench, clock, Tag("tank-1.pump", "tank-1/pump", writable=True))
    assert "tank-1.pump at 'tank-1/pump': the server does not let this client write it" in said


@pytest.mark.parametrize(
    ("value", "kind", "tag_type", "complaint"),
    [
        ([1.0, 2.0], ua.VariantType.Double, DataType.FLOAT, "an array (ValueRank 0)"),
        ("text", ua.VariantType.String, DataType.FLOAT, "holds no number and no truth value"),
        (True, ua.VariantType.Boolean, DataType.FLOAT, "a float cannot be written as Boolean"),
        (1.0, ua.VariantType.Double, DataType.COUNTER, "a counter cannot be written as Double"),
        (1, ua.VariantType.Int32, DataType.BOOLEAN, "a boolean cannot be written as Int32"),
    ],
)
async def test_a_writable_tag_must_be_of_a_type_that_can_hold_it(
    bench: Bench, clock: VirtualClock, value: object, kind: ua.VariantType, tag_type: DataType, complaint: str
) -> None:
    """Arrays, text and types of another sort are refused at connect."""
    await bench.add("out", value, kind, writable=True)
    said = await refusal(bench, clock, Tag("tank-1.out", "out", tag_type, writable=True))
    assert complaint in said


async def test_a_subtype_is_written_as_what_its_value_is(bench: Bench, clock: VirtualClock) -> None:
    """A Duration holds a Double (OPC 10000-3, 8.13); the present value tells."""
    await bench.add("hold", 1.0, ua.VariantType.Double, writable=True, data_type=node_id(ObjectIds.Duration))
    link = OpcUaLink(bench.endpoint, bench.uri, [Tag("tank-1.hold", "hold", writable=True)], clock)
    await soon(link.open(5.0))
    assert link.statistics().state is LinkState.UP
    await soon(link.close())


@pytest.mark.parametrize("state", [ua.ServerState.Test, ua.ServerState.Suspended, ua.ServerState.Failed])
async def test_a_server_that_is_not_running_is_refused(
    bench: Bench, clock: VirtualClock, state: ua.ServerState
) -> None:
    """In any other state its outputs may be disconnected (OPC 10000-5, 12.6)."""
    await bench.add("tank-1/level")
    await bench.set_state(state)
    link = OpcUaLink(bench.endpoint, bench.uri, [Tag("tank-1.level", "tank-1/level")], clock)

    with pytest.raises(PeerUnreachableError, match=f"server state is {state.name}, it must be Running"):
        await soon(link.open(5.0))

    await until(lambda: not bench.sessions)


async def test_a_server_that_cannot_take_a_whole_set_is_refused(bench: Bench, clock: VirtualClock) -> None:
    """A set of inputs is one request, so MaxNodesPerWrite must not be smaller."""
    tags = [Tag(f"tank-{i}.pump", f"tank-{i}/pump", writable=True) for i in range(3)]
    for tag in tags:
        await bench.add(tag.address, writable=True)
    limit = bench.server.get_node(node_id(ObjectIds.Server_ServerCapabilities_OperationLimits_MaxNodesPerWrite))
    unlimited = await limit.read_data_value()
    await limit.write_value(2, ua.VariantType.UInt32)
    link = OpcUaLink(bench.endpoint, bench.uri, tags, clock)
    try:
        with pytest.raises(PeerUnreachableError, match="at most 2 nodes in one Write but a set of inputs has 3"):
            await soon(link.open(5.0))
    finally:
        await limit.write_value(unlimited)
