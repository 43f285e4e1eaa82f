"""The simulated plant over a real loopback socket, on an injected clock.

One server for the module, because building its address space takes seconds; every test starts from a reset plant.
"""

from __future__ import annotations

from collections.abc import AsyncIterator
from datetime import UTC, datetime, timedelta
from math import isnan
from typing import Any

import pytest
import pytest_asyncio
from asyncua import ua
from asyncua.ua.attribute_ids import AttributeIds
from asyncua.ua.object_ids import ObjectIds
from asyncua.ua.status_codes import StatusCodes
from asyncua.ua.uaerrors import UaStatusCodeError

from sim_plant.servers.library import node_id
from tests.sim_plant.rows import row
from tests.sim_plant.servers.peer import Peer, connected

pytestmark = [pytest.mark.wire, pytest.mark.asyncio(loop_scope="module")]


@pytest_asyncio.fixture(scope="module", loop_scope="module")
async def connection() -> AsyncIterator[Peer]:
    """Give a client of a served row of quiet tanks."""
    async with connected(row()) as peer:
        yield peer


@pytest_asyncio.fixture(loop_scope="module")
async def peer(connection: Peer) -> Peer:
    """Give the client with the plant reset."""
    await connection.reset()
    return connection


async def property_of(peer: Peer, tag: str, name: str) -> Any:
    """Value of a property of the standard."""
    node = await peer.client.get_node(peer.node_of(tag)).get_child(f"0:{name}")
    return await node.read_value()


async def test_process_values_are_analog_items_of_double(peer: Peer) -> None:
    """OPC 10000-8, 5.3.2.3: AnalogItemType, number 2368; Double is data type 11."""
    for tag in ("tank-1.level", "tank-1.pump", "tank-3.consumer"):
        node = peer.client.get_node(peer.node_of(tag))
        assert await node.read_type_definition() == node_id(2368)
        assert await node.read_data_type() == node_id(11)


@pytest.mark.parametrize(
    ("tag", "data_type"),
    [
        ("panel.heartbeat", ObjectIds.UInt32),
        ("panel.permit", ObjectIds.Boolean),
        ("panel.clock", ObjectIds.UInt64),
        ("panel.expires", ObjectIds.UInt64),
        ("panel.period", ObjectIds.UInt64),
        ("panel.accepted", ObjectIds.UInt64),
        ("panel.refusal", ObjectIds.String),
        ("panel.tripped", ObjectIds.Boolean),
        ("panel.clamped", ObjectIds.UInt32),
        ("tank-1.in_charge", ObjectIds.Boolean),
    ],
)
async def test_panel_values_have_their_types(peer: Peer, tag: str, data_type: int) -> None:
    """On the node and on the wire."""
    assert await peer.client.get_node(peer.node_of(tag)).read_data_type() == node_id(data_type)
    answer = await peer.answer(tag)
    assert answer.Value is not None
    assert answer.Value.VariantType.value == data_type


async def test_span_is_the_eu_range(peer: Peer) -> None:
    """Low and High of the signal's span."""
    assert await property_of(peer, "tank-1.level", "EURange") == ua.Range(Low=0.0, High=40.0)
    assert await property_of(peer, "tank-1.pump", "EURange") == ua.Range(Low=0.0, High=100.0)


async def test_units_are_unece_codes(peer: Peer) -> None:
    """Centimetre is CMT, percent is P1."""
    level = await property_of(peer, "tank-1.level", "EngineeringUnits")
    assert (level.UnitId, level.DisplayName.Text) == (int.from_bytes(b"CMT", "big"), "cm")
    pump = await property_of(peer, "tank-1.pump", "EngineeringUnits")
    assert (pump.UnitId, pump.DisplayName.Text) == (int.from_bytes(b"P1", "big"), "%")


async def test_good_value_with_the_time_of_its_sample(peer: Peer) -> None:
    """The source timestamp is the wall time of the scan, to the microsecond."""
    peer.advance(1.02)
    answer = await peer.answer("tank-1.level")
    scan_ns = peer.clock.wall_ns() - (peer.clock.monotonic_ns() - (peer.plant.next_scan_ns() - 50_000_000))
    assert answer.Value is not None
    assert answer.Value.Value == pytest.approx(20.0, abs=0.5)
    assert answer.StatusCode is not None
    assert answer.StatusCode.value == 0
    assert answer.SourceTimestamp == datetime(1970, 1, 1, tzinfo=UTC) + timedelta(microseconds=scan_ns // 1000)


async def test_one_read_is_one_instant(peer: Peer) -> None:
    """All readings of a request carry the same scan's time."""
    nodes = [peer.client.get_node(peer.node_of(f"tank-{i}.level")) for i in (1, 2, 3)]
    answers = await peer.client.read_attributes(nodes)
    assert len({answer.SourceTimestamp for answer in answers}) == 1


async def test_dropout_is_bad_without_a_value(peer: Peer) -> None:
    """BadNoCommunication and Null; the neighbour stays good."""
    await peer.provoke("dropout tank-1.level")
    peer.advance(0.05)
    assert await peer.status("tank-1.level") == "BadNoCommunication"
    assert await peer.read("tank-1.level") is None
    assert await peer.status("tank-2.level") == "Good"


async def test_nan_is_good_on_the_wire(peer: Peer) -> None:
    """Only the number itself tells."""
    await peer.provoke("nan tank-1.level")
    peer.advance(0.05)
    assert isnan(await peer.read("tank-1.level"))
    assert await peer.status("tank-1.level") == "Good"


async def test_bias_is_good_and_wrong(peer: Peer) -> None:
    """By exactly the bias."""
    await peer.provoke("bias tank-1.level 3.5")
    peer.advance(0.05)
    assert await peer.read("tank-1.level") - peer.plant.truth()["tank-1.level"] == pytest.approx(3.5)
    assert await peer.status("tank-1.level") == "Good"


async def test_freeze_repeats_the_value_with_new_times(peer: Peer) -> None:
    """A frozen transmitter goes on sampling, so its timestamps don't betray it."""
    peer.plant.provoke("set tank-2.consumer 20")
    before = await peer.answer("tank-2.level")
    await peer.provoke("freeze tank-2.level")
    peer.advance(2.0)
    after = await peer.answer("tank-2.level")
    assert after.Value == before.Value
    assert after.StatusCode == before.StatusCode
    assert after.SourceTimestamp is not None
    assert before.SourceTimestamp is not None
    assert after.SourceTimestamp > before.SourceTimestamp
    assert peer.plant.truth()["tank-2.level"] < before.Value.Value - 0.1  # type: ignore[union-attr]


async def test_saturated_transmitter_is_uncertain(peer: Peer) -> None:
    """Beyond its range it shows the end of it: UncertainEngineeringUnitsExceeded."""
    peer.plant.provoke("set tank-3.consumer 25")
    peer.advance(0.05)
    assert await peer.status("tank-3.consumer") == "UncertainEngineeringUnitsExceeded"
    assert await peer.read("tank-3.consumer") == pytest.approx(20.0 * 1.03125)


async def test_set_in_one_request_moves_the_actuator(peer: Peer) -> None:
    """And the client sees it when it reads back, before any scan."""
    await peer.take("tank-1", "tank-2")
    commit = await peer.committed()
    answers = await peer.write(("tank-1.pump", 61.0), ("tank-2.pump", 62.0), *commit)
    assert answers == ["Good"] * 4
    assert (await peer.read("tank-1.pump"), await peer.read("tank-2.pump")) == (61.0, 62.0)
    assert await peer.read("panel.accepted") == peer.period
    assert await peer.read("panel.refusal") == ""


async def test_inputs_without_a_period_change_nothing(peer: Peer) -> None:
    """Neither at once nor with the next set, and they are answered with a bad status."""
    await peer.take("tank-1")
    before = await peer.read("tank-1.pump")
    assert await peer.write(("tank-1.pump", before + 10.0)) == ["BadInvalidState"]
    assert await peer.write(*await peer.committed()) == ["Good", "Good"]
    assert await peer.read("tank-1.pump") == before


async def test_late_set_is_refused(peer: Peer) -> None:
    """The clock has passed the expiry when the request is handled, though no scan has been done since."""
    await peer.take("tank-1")
    before = await peer.read("tank-1.pump")
    commit = await peer.committed(valid_ms=300)
    peer.clock.spend(301_000_000)
    answers = await peer.write(("tank-1.pump", before + 10.0), *commit)
    assert answers == ["BadInvalidTimestamp", "Good", "BadInvalidTimestamp"]
    assert await peer.read("tank-1.pump") == before
    assert (await peer.read("panel.refusal")).startswith(f"set {peer.period} refused: expired at")


async def test_replayed_set_is_refused(peer: Peer) -> None:
    """The same request again."""
    await peer.take("tank-1")
    commit = await peer.committed()
    await peer.write(("tank-1.pump", 50.0), *commit)
    answers = await peer.write(("tank-1.pump", 50.0), *commit)
    assert answers == ["BadSequenceNumberInvalid", "Good", "BadSequenceNumberInvalid"]


async def test_section_not_in_charge_is_answered_so(peer: Peer) -> None:
    """The panel drives it, and says so."""
    await peer.take("tank-1")
    answers = await peer.write(("tank-2.pump", 10.0), ("tank-1.pump", 50.0), *await peer.committed())
    assert answers == ["BadInvalidState", "Good", "Good", "Good"]


async def test_clamped_input_is_counted(peer: Peer) -> None:
    """The panel's own last line."""
    await peer.take("tank-1")
    clamped = await peer.read("panel.clamped")
    await peer.write(("tank-1.pump", 130.0), *await peer.committed())
    assert await peer.read("tank-1.pump") == 100.0
    assert await peer.read("panel.clamped") == clamped + 1


async def test_still_heartbeat_trips(peer: Peer) -> None:
    """Watchdog 1.5 s on the injected clock; bits fall, the local action ramps."""
    await peer.take("tank-1")
    await peer.write(("tank-1.pump", 60.0), *await peer.committed())
    peer.advance(1.49)
    assert await peer.read("panel.tripped") is False
    peer.advance(0.01)
    assert await peer.read("panel.tripped") is True
    assert await peer.read("tank-1.in_charge") is False
    peer.advance(1.0)
    assert await peer.read("tank-1.pump") == pytest.approx(50.0, abs=0.1)
    await peer.take("tank-1")
    assert await peer.read("panel.tripped") is False


async def test_permit_is_the_sites(peer: Peer) -> None:
    """Withdrawn by rehearsal, it can't be given back by writing."""
    await peer.provoke("permit off")
    assert await peer.write(("panel.permit", True)) == ["BadNotWritable"]
    assert await peer.read("panel.permit") is False
    assert await peer.write(("tank-1.in_charge", True)) == ["BadInvalidState"]


@pytest.mark.parametrize("tag", ["tank-1.level", "tank-3.consumer"])
async def test_measured_signal_is_read_only(peer: Peer, tag: str) -> None:
    """By its access level and by the answer to who tries all the same."""
    node = peer.client.get_node(peer.node_of(tag))
    assert await node.get_user_access_level() == {ua.AccessLevel.CurrentRead}
    before = await peer.read(tag)
    assert await peer.write((tag, 5.0)) == ["BadNotWritable"]
    assert await peer.read(tag) == before


async def test_driven_signal_is_writable_by_its_access_level(peer: Peer) -> None:
    """A client that looks before it writes may go on."""
    level = await peer.client.get_node(peer.node_of("tank-1.pump")).get_user_access_level()
    assert level == {ua.AccessLevel.CurrentRead, ua.AccessLevel.CurrentWrite}


async def test_wrong_type_spoils_the_whole_set(peer: Peer) -> None:
    """An Int64 where a Double belongs: half a set is never applied."""
    await peer.take("tank-1", "tank-2")
    before = await peer.read("tank-2.pump")
    (expires_tag, expires), (period_tag, period) = await peer.committed()
    answers = await peer.write_as_is(
        ("tank-2.pump", ua.DataValue(Value=ua.Variant(33.0), StatusCode=None)),
        ("tank-1.pump", ua.DataValue(Value=ua.Variant(50, ua.VariantType.Int64), StatusCode=None)),
        (expires_tag, ua.DataValue(Value=ua.Variant(expires, ua.VariantType.UInt64), StatusCode=None)),
        (period_tag, ua.DataValue(Value=ua.Variant(period, ua.VariantType.UInt64), StatusCode=None)),
    )
    assert answers == ["BadInvalidState", "BadTypeMismatch", "Good", "BadInvalidState"]
    assert await peer.read("tank-2.pump") == before


@pytest.mark.parametrize(
    "value",
    [
        ua.DataValue(ua.Variant(33.0), StatusCode=None, SourceTimestamp=datetime(2024, 1, 1, tzinfo=UTC)),  # type: ignore[arg-type]
        ua.DataValue(ua.Variant(33.0), StatusCode=ua.StatusCode(StatusCodes.UncertainInitialValue)),  # type: ignore[arg-type]
    ],
    ids=["timestamp", "status"],
)
async def test_value_with_status_or_time_is_not_supported(peer: Peer, value: ua.DataValue) -> None:
    """As many a PLC does it: BadWriteNotSupported."""
    await peer.take("tank-1")
    assert await peer.write_as_is(("tank-1.pump", value)) == ["BadWriteNotSupported"]


async def test_array_is_not_a_scalar(peer: Peer) -> None:
    """Even with one element of the right type."""
    value = ua.DataValue(ua.Variant([33.0], ua.VariantType.Double), StatusCode=None)
    assert await peer.write_as_is(("tank-1.pump", value)) == ["BadTypeMismatch"]


async def test_nobody_may_change_the_address_space(peer: Peer) -> None:
    """Display names, say: a client of the bench reads and writes values, no more."""
    item = ua.WriteValue(
        NodeId=peer.node_of("tank-1.pump"),
        AttributeId=AttributeIds.DisplayName,
        Value=ua.DataValue(ua.Variant(ua.LocalizedText("mine"), ua.VariantType.LocalizedText)),
    )
    (answer,) = await peer.client.uaclient.write(ua.WriteParameters(NodesToWrite=[item]))
    assert answer.value == StatusCodes.BadUserAccessDenied


async def test_plants_values_and_others_in_one_request(peer: Peer) -> None:
    """Each answer stands at its own place."""
    await peer.take("tank-1")
    items = [
        ua.WriteValue(NodeId=node, AttributeId=AttributeIds.Value, Value=ua.DataValue(ua.Variant(1.0), StatusCode=None))
        for node in (node_id(ObjectIds.Server_ServerStatus_State), peer.node_of("tank-1.level"), node_id("no/such", 9))
    ]
    answers = await peer.client.uaclient.write(ua.WriteParameters(NodesToWrite=items))
    assert [answer.value for answer in answers] == [
        StatusCodes.BadUserAccessDenied,
        StatusCodes.BadNotWritable,
        StatusCodes.BadUserAccessDenied,
    ]


async def test_provoke_answers_with_what_it_did(peer: Peer) -> None:
    """One line in, one sentence out."""
    assert await peer.provoke("stuck tank-1.pump for 2 s") == "provoked: 'stuck tank-1.pump for 2 s'"


async def test_provoke_refuses_with_a_reason(peer: Peer) -> None:
    """The sentence of the fault error reaches the client."""
    answer = await peer.provoke("freeze tank-1.levl")
    assert answer.startswith("refused: ")
    assert "nearest: 'tank-1.level'" in answer


async def test_provoke_wants_a_string(peer: Peer) -> None:
    """A number is no line."""
    with pytest.raises(UaStatusCodeError) as caught:
        await peer.provoke(5.0)
    assert caught.value.code == StatusCodes.BadInvalidArgument


async def test_provoked_stuck_pump_shows_in_the_plant_only(peer: Peer) -> None:
    """The driven tag goes on showing the command."""
    await peer.take("tank-1")
    stuck_at = peer.plant.truth()["tank-1.pump"]
    assert stuck_at != 5.0
    await peer.provoke("stuck tank-1.pump")
    await peer.write(("tank-1.pump", 5.0), *await peer.committed())
    peer.advance(0.2)
    assert await peer.read("tank-1.pump") == 5.0
    assert peer.plant.truth()["tank-1.pump"] == stuck_at


async def test_server_says_running(peer: Peer) -> None:
    """OPC 10000-5, 12.6: Running is state 0."""
    assert await peer.client.get_node(node_id(ObjectIds.Server_ServerStatus_State)).read_value() == 0


async def test_address_space_can_be_browsed_by_name(peer: Peer) -> None:
    """Objects, the plant, the section, the signal."""
    index = await peer.client.get_namespace_index("urn:lengthsman:test:short-row")
    path = [f"{index}:Short Row", f"{index}:tank-1", f"{index}:level"]
    found = await peer.client.nodes.objects.get_child(path)
    assert found.nodeid == peer.node_of("tank-1.level")
