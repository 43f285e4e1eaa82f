"""The OPC UA link against a real server: what is read, what is written, what is refused."""

from __future__ import annotations

import asyncio
from collections.abc import AsyncIterator, Callable, Sequence
from typing import Any

import pytest
import pytest_asyncio
from asyncua import ua
from asyncua.ua.status_codes import StatusCodes

from gateway.clock import RealClock, VirtualClock
from gateway.links.events import LinkEventKind
from gateway.links.opcua import OpcUaLink, OpcUaSettings
from gateway.links.opcua_values import unix_ns
from gateway.links.protocol import LinkState, WriteOutcome
from gateway.plantfile.plant import SiteKind, SiteSpec
from gateway.signals import MISSING, DataType, Tag
from tests.gateway.links.peers import Bench, Events, ahead, answer, in_time, soon

pytestmark = [pytest.mark.wire, pytest.mark.asyncio(loop_scope="module")]

OpenLink = Callable[..., Any]

LEVEL = Tag("tank-1.level", "tank-1/level")
PUMP = Tag("tank-1.pump", "tank-1/pump", writable=True)
BEAT = Tag("panel.heartbeat", "panel/heartbeat", DataType.COUNTER, writable=True)
CHARGE = Tag("tank-1.in_charge", "tank-1/in_charge", DataType.BOOLEAN, writable=True)


@pytest.fixture
def events() -> Events:
    """Give a collector of link events."""
    return Events()


@pytest_asyncio.fixture(loop_scope="module")
async def open_link(bench: Bench, clock: VirtualClock, events: Events) -> AsyncIterator[OpenLink]:
    """Give a function that opens a link for some tags; links are closed afterwards."""
    links: list[OpcUaLink] = []

    async def connect(tags: Sequence[Tag], settings: OpcUaSettings | None = None) -> OpcUaLink:
        link = OpcUaLink(bench.endpoint, bench.uri, tags, clock, settings=settings, on_event=events)
        await soon(link.open(5.0))
        links.append(link)
        return link

    yield connect
    for link in links:
        await soon(link.close())


async def test_a_gather_is_one_read_of_all_tags_with_both_timestamps(
    bench: Bench, clock: VirtualClock, open_link: OpenLink
) -> None:
    """Every tag and the server's state travel in one request."""
    tags = [Tag(f"tank-{i}.level", f"tank-{i}/level") for i in range(5)]
    for i, tag in enumerate(tags):
        await bench.add(tag.address, float(i))
    link = await open_link(tags)
    bench.reads.clear()

    gathered = await soon(link.gather(ahead(clock, 0.1)))

    assert gathered.complete
    assert [gathered.readings[tag.name].value for tag in tags] == [0.0, 1.0, 2.0, 3.0, 4.0]
    assert len(bench.reads) == 1
    assert len(bench.reads[0].NodesToRead) == len(tags) + 1
    assert bench.reads[0].TimestampsToReturn == ua.TimestampsToReturn.Both
    assert bench.reads[0].MaxAge == 0.0


async def test_status_and_timestamps_come_through(bench: Bench, clock: VirtualClock, open_link: OpenLink) -> None:
    """An uncertain value keeps value, status and source timestamp; a bad one neither raises nor hides the others."""
    from datetime import UTC, datetime

    level = await bench.add("tank-1/level", 12.5)
    other = await bench.add("tank-2/level", 7.0)
    stamp = datetime(2026, 3, 4, 5, 6, 7, 890123, tzinfo=UTC)
    await level.write_value(answer(12.5, StatusCodes.UncertainLastUsableValue, stamp=stamp))
    await other.write_value(answer(None, StatusCodes.BadSensorFailure))
    link = await open_link([LEVEL, Tag("tank-2.level", "tank-2/level")])

    gathered = await soon(link.gather(ahead(clock, 0.1)))

    reading = gathered.readings["tank-1.level"]
    assert (reading.value, reading.status) == (12.5, 0x40900000)
    assert reading.source_ns == 1_772_600_767_890_123_000
    assert reading.server_ns == unix_ns((await level.read_data_value(raise_on_bad_status=False)).ServerTimestamp)
    assert gathered.readings["tank-2.level"].status == 0x808C0000
    assert gathered.readings["tank-2.level"].value is None
    assert gathered.complete


@pytest.mark.parametrize(
    ("sent", "kind", "expected"),
    [
        (True, ua.VariantType.Boolean, True),
        (-5, ua.VariantType.SByte, -5),
        (2**64 - 1, ua.VariantType.UInt64, 2**64 - 1),
        (float("nan"), ua.VariantType.Double, "nan"),
        (float("inf"), ua.VariantType.Float, float("inf")),
        ("void", ua.VariantType.String, "void"),
        (None, ua.VariantType.String, None),
        (b"\x00\xff", ua.VariantType.ByteString, b"\x00\xff"),
        ([1.0, 2.0], ua.VariantType.Double, [1.0, 2.0]),
        ([], ua.VariantType.Double, []),
        (ua.LocalizedText("niveau", "fr"), ua.VariantType.LocalizedText, "niveau"),
        (ua.NodeId("x", 3), ua.VariantType.NodeId, "NodeId"),  # type: ignore[arg-type]
        (answer(None, 0x80000000).StatusCode, ua.VariantType.StatusCode, 0x80000000),
        (ua.EUInformation(UnitId=4408652), ua.VariantType.ExtensionObject, "EUInformation"),
    ],
)
async def test_values_of_every_type_arrive_as_plain_python(
    bench: Bench, clock: VirtualClock, open_link: OpenLink, sent: object, kind: ua.VariantType, expected: object
) -> None:
    """Numbers, truth values, text, bytes, nothing, arrays and structures arrive; none of them raises."""
    await bench.add("tank-1/level", ua.Variant(sent, kind, is_array=isinstance(sent, list)))
    link = await open_link([LEVEL])

    value = (await soon(link.gather(ahead(clock, 0.1)))).readings["tank-1.level"].value

    if isinstance(expected, str) and isinstance(value, str | float):
        assert str(value).startswith(expected)
    else:
        assert value == expected
        assert type(value) is type(expected)


@pytest.mark.parametrize(
    ("kind", "tag_type", "value", "stored"),
    [
        (ua.VariantType.Double, DataType.FLOAT, 42.25, 42.25),
        (ua.VariantType.Float, DataType.FLOAT, 0.5, 0.5),
        (ua.VariantType.Int16, DataType.FLOAT, 41.6, 42),
        (ua.VariantType.Double, DataType.FLOAT, 3, 3.0),
        (ua.VariantType.UInt32, DataType.COUNTER, 2**32 - 1, 2**32 - 1),
        (ua.VariantType.UInt64, DataType.COUNTER, 2**63, 2**63),
        (ua.VariantType.Byte, DataType.COUNTER, 7, 7),
        (ua.VariantType.Boolean, DataType.BOOLEAN, True, True),
    ],
)
async def test_a_value_is_written_as_its_nodes_type(
    bench: Bench,
    clock: VirtualClock,
    open_link: OpenLink,
    kind: ua.VariantType,
    tag_type: DataType,
    value: float | bool,
    stored: object,
) -> None:
    """The wire type is the node's own, learned at connect, whatever Python calls the number."""
    node = await bench.add("out", False if kind is ua.VariantType.Boolean else 0, kind, writable=True)
    tag = Tag("tank-1.out", "out", tag_type, writable=True)
    link = await open_link([tag])

    outcome = await soon(link.write([(tag, value)], ahead(clock, 0.1)))

    assert outcome == {"tank-1.out": WriteOutcome.WRITTEN}
    taken = (await node.read_data_value()).Value
    assert taken is not None
    assert (taken.Value, taken.VariantType) == (stored, kind)


async def test_a_set_is_one_write_in_order_of_values_only(
    bench: Bench, clock: VirtualClock, open_link: OpenLink
) -> None:
    """One request carries the set in the order given, without timestamps (many servers refuse those)."""
    for tag, kind in ((PUMP, ua.VariantType.Double), (BEAT, ua.VariantType.UInt32)):
        await bench.add(tag.address, 0, kind, writable=True)
    await bench.add(CHARGE.address, False, ua.VariantType.Boolean, writable=True)
    link = await open_link([PUMP, BEAT, CHARGE])

    outcome = await soon(link.write([(CHARGE, True), (PUMP, 35.0), (BEAT, 9)], ahead(clock, 0.1)))

    assert set(outcome.values()) == {WriteOutcome.WRITTEN}
    (request,) = bench.writes
    assert [item.NodeId.Identifier for item in request.NodesToWrite] == [CHARGE.address, PUMP.address, BEAT.address]
    for item in request.NodesToWrite:
        assert item.Value.SourceTimestamp is None
        assert item.Value.ServerTimestamp is None


async def test_a_refused_value_is_rejected_beside_a_written_one(
    bench: Bench, clock: VirtualClock, open_link: OpenLink
) -> None:
    """Each value has its own outcome; the reason names tag and status."""
    await bench.add(PUMP.address, 0.0, writable=True)
    beat = await bench.add(BEAT.address, 0, ua.VariantType.UInt32, writable=True)
    link = await open_link([PUMP, BEAT])
    await beat.set_writable(False)

    outcome = await soon(link.write([(PUMP, 35.0), (BEAT, 9)], ahead(clock, 0.1)))

    assert outcome == {PUMP.name: WriteOutcome.WRITTEN, BEAT.name: WriteOutcome.REJECTED}
    assert link.statistics().write_failures == 1
    assert "panel.heartbeat BadUserAccessDenied" in link.statistics().last_error


async def test_a_set_with_a_value_its_node_cannot_hold_is_not_sent(
    bench: Bench, clock: VirtualClock, open_link: OpenLink
) -> None:
    """Validate everything, then commit: nothing of the set reaches the server."""
    pump = await bench.add(PUMP.address, 1.0, writable=True)
    await bench.add(BEAT.address, 0, ua.VariantType.UInt32, writable=True)
    link = await open_link([PUMP, BEAT])

    outcome = await soon(link.write([(PUMP, 35.0), (BEAT, -1)], ahead(clock, 0.1)))

    assert set(outcome.values()) == {WriteOutcome.NOT_SENT}
    assert bench.writes == []
    assert await pump.read_value() == 1.0


async def test_a_write_after_its_cut_off_is_not_sent(bench: Bench, clock: VirtualClock, open_link: OpenLink) -> None:
    """Late inputs never leave the process."""
    await bench.add(PUMP.address, 0.0, writable=True)
    link = await open_link([PUMP])

    outcome = await soon(link.write([(PUMP, 35.0)], clock.monotonic_ns()))

    assert outcome == {PUMP.name: WriteOutcome.NOT_SENT}
    assert bench.writes == []


@pytest.mark.parametrize(
    ("values", "complaint"),
    [
        ([(LEVEL, 1.0)], "tank-1.level is not writable"),
        ([(Tag("tank-9.pump", "x", writable=True), 1.0)], "tank-9.pump is not a tag of this link"),
        ([(PUMP, 1.0), (PUMP, 2.0)], "tank-1.pump comes twice"),
        ([(PUMP, float("nan"))], "tank-1.pump = nan: only finite"),
        ([(PUMP, float("-inf"))], "tank-1.pump = -inf: only finite"),
    ],
)
async def test_misuse_of_write_raises_before_anything_is_sent(
    bench: Bench,
    clock: VirtualClock,
    open_link: OpenLink,
    values: list[tuple[Tag, float]],
    complaint: str,
) -> None:
    """A write to a read-only or foreign tag, twice to one, or of no finite number is our own mistake."""
    await bench.add(LEVEL.address)
    await bench.add(PUMP.address, writable=True)
    link = await open_link([LEVEL, PUMP])

    with pytest.raises(ValueError, match=complaint):
        await link.write(values, ahead(clock, 0.1))

    assert bench.writes == []


async def test_an_unanswered_write_is_unknown_and_may_be_taken_later(
    bench: Bench, clock: VirtualClock, open_link: OpenLink
) -> None:
    """A server that dawdles past the cut-off gets the outcome unknown, and does apply the value afterwards."""
    pump = await bench.add(PUMP.address, 1.0, writable=True)
    link = await open_link([PUMP])
    bench.hold()

    due_ns = ahead(clock, 0.05)
    outcome = await in_time(clock, link.write([(PUMP, 35.0)], due_ns), bench.held.wait(), due_ns)

    assert outcome == {PUMP.name: WriteOutcome.UNKNOWN}
    assert await pump.read_value() == 1.0
    bench.gate.set()
    gathered = await soon(link.gather(ahead(clock, 0.1)))
    assert gathered.readings[PUMP.name].value == 35.0


async def test_an_answer_between_cut_off_and_call_timeout_is_forgiven(
    bench: Bench, clock: VirtualClock, events: Events, open_link: OpenLink
) -> None:
    """A gather that misses its cut-off returns MISSING, but a server that answers in time keeps its session."""
    await bench.add(LEVEL.address, 3.0)
    link = await open_link([LEVEL])
    bench.hold()

    due_ns = ahead(clock, 0.05)
    gathered = await in_time(clock, link.gather(due_ns), bench.held.wait(), due_ns)

    assert gathered.readings == {LEVEL.name: MISSING}
    assert not gathered.complete
    bench.gate.set()
    assert (await soon(link.gather(ahead(clock, 0.05)))).complete
    assert link.statistics().losses == 0
    assert link.statistics().read_failures == 1
    assert [event.kind for event in events.seen] == [LinkEventKind.CONNECTED]


async def test_a_cancelled_gather_leaves_the_link_usable(
    bench: Bench, clock: VirtualClock, open_link: OpenLink
) -> None:
    """Whoever stops waiting for a gather takes nothing down with him."""
    await bench.add(LEVEL.address, 3.0)
    link = await open_link([LEVEL])
    bench.hold()
    gathering = asyncio.ensure_future(link.gather(ahead(clock, 0.05)))
    await soon(bench.held.wait())

    gathering.cancel()
    with pytest.raises(asyncio.CancelledError):
        await gathering

    bench.gate.set()
    assert (await soon(link.gather(ahead(clock, 0.05)))).complete


async def test_large_reads_are_split_where_the_server_limits_them(
    bench: Bench, clock: VirtualClock, open_link: OpenLink
) -> None:
    """MaxNodesPerRead is respected; the readings are complete and in place all the same."""
    from asyncua.ua.object_ids import ObjectIds

    from gateway.links.opcua_addresses import node_id

    limit = bench.server.get_node(node_id(ObjectIds.Server_ServerCapabilities_OperationLimits_MaxNodesPerRead))
    unlimited = await limit.read_data_value()
    tags = [Tag(f"tank-{i}.level", f"tank-{i}/level") for i in range(5)]
    for i, tag in enumerate(tags):
        await bench.add(tag.address, float(i))
    await limit.write_value(2, ua.VariantType.UInt32)
    try:
        link = await open_link(tags)
    finally:
        await limit.write_value(unlimited)
    bench.reads.clear()

    gathered = await soon(link.gather(ahead(clock, 0.1)))

    assert [gathered.readings[tag.name].value for tag in tags] == [0.0, 1.0, 2.0, 3.0, 4.0]
    assert [len(request.NodesToRead) for request in bench.reads] == [2, 2, 2]


async def test_statistics_count_what_happened(bench: Bench, clock: VirtualClock, open_link: OpenLink) -> None:
    """Counters of connects, reads and writes; the state follows the session."""
    await bench.add(PUMP.address, 0.0, writable=True)
    link = await open_link([PUMP])
    await soon(link.gather(ahead(clock, 0.1)))
    await soon(link.write([(PUMP, 1.0)], ahead(clock, 0.1)))

    counted = link.statistics()

    assert (counted.connects, counted.losses) == (1, 0)
    assert (counted.reads, counted.read_failures) == (1, 0)
    assert (counted.writes, counted.write_failures) == (1, 0)
    assert (counted.state, counted.last_error) == (LinkState.UP, "")


async def test_a_site_of_a_plant_file_makes_a_link_on_the_real_clock(bench: Bench) -> None:
    """End to end as the service uses it: from the site's description, with the host's own clock."""
    await bench.add(LEVEL.address, 20.5)
    site = SiteSpec("bench", SiteKind.BENCH, "opcua", bench.endpoint, bench.uri, "{section}/{signal}", "panel/{signal}")
    real = RealClock()
    link = OpcUaLink.for_site(site, [Tag(LEVEL.name, site.address_of("tank-1", "level"))], real)
    await link.open(20.0)
    try:
        gathered = await link.gather(real.monotonic_ns() + 20 * 10**9)
        assert gathered.readings[LEVEL.name].value == 20.5
    finally:
        await link.close()
