"""Tests of `gateway.links.direct`: a link as over any wire, to a plant in this process."""

from __future__ import annotations

from collections.abc import Sequence

import pytest

from gateway.clock import VirtualClock
from gateway.design import PlantDesign
from gateway.links.direct import DirectLink
from gateway.links.protocol import LinkState, WriteOutcome
from gateway.signals import Reading
from gateway.tags import tags_of
from sim_plant.direct import DirectPlant
from tests.gateway.virtual import new_plant


class Desk:
    """A link, its plant, and its tags by name."""

    def __init__(self, design: PlantDesign, clock: VirtualClock) -> None:
        self.clock = clock
        self.plant: DirectPlant = new_plant(design, clock)
        self.tags = {tag.name: tag for tag in tags_of(design.plant, design.plant.sites["bench"])}
        self.link = DirectLink(self.plant, list(self.tags.values()))

    async def write(self, *values: tuple[str, float | int | bool]) -> dict[str, WriteOutcome]:
        """Write by name."""
        return dict(await self.link.write([(self.tags[name], value) for name, value in values], 0))

    async def read(self, name: str) -> Reading:
        """Read one tag."""
        return (await self.link.gather(0)).readings[name]

    def set_of(self, *inputs: tuple[str, float], k: int = 1) -> Sequence[tuple[str, float | int | bool]]:
        """A set of inputs as the panel wants it."""
        clock_ms = self.plant.read_all()["panel.clock"].value
        assert isinstance(clock_ms, int)
        return [*inputs, ("panel.expires", clock_ms + 500), ("panel.period", k)]


@pytest.fixture
def desk(tarn_row: PlantDesign, clock: VirtualClock) -> Desk:
    """Tarn Row behind a direct link."""
    return Desk(tarn_row, clock)


async def test_every_tag_of_the_site_is_read_at_once(desk: Desk) -> None:
    """And no other: what the plant file does not name does not exist for control."""
    gathered = await desk.link.gather(0)
    assert gathered.complete
    assert set(gathered.readings) == set(desk.tags)


async def test_readings_are_the_plants_own(desk: Desk) -> None:
    """Value, status and the instant of the sample, on the wall clock."""
    shown = desk.plant.read_all()["tank-4.level"]
    assert await desk.read("tank-4.level") == Reading(
        shown.value, shown.status, shown.source_time_ns, shown.source_time_ns
    )


async def test_a_bad_status_comes_through(desk: Desk) -> None:
    """Judging it is not the link's business."""
    desk.plant.provoke("dropout tank-4.level")
    desk.clock.spend(100_000_000)
    reading = await desk.read("tank-4.level")
    assert reading.value is None
    assert reading.status == 0x80310000


async def test_an_accepted_set_is_written(desk: Desk) -> None:
    """Outcome by tag, and the panel tells the pump."""
    outcomes = await desk.write(("tank-4.in_charge", True), *desk.set_of(("tank-4.pump", 50.0)))
    assert set(outcomes.values()) == {WriteOutcome.WRITTEN}
    assert (await desk.read("tank-4.pump")).value == 50.0
    assert (await desk.read("tank-4.in_charge")).value is True


async def test_the_order_of_a_request_is_kept(desk: Desk) -> None:
    """Charge taken after the set comes too late for it."""
    outcomes = await desk.write(*desk.set_of(("tank-4.pump", 50.0)), ("tank-4.in_charge", True))
    assert outcomes["tank-4.pump"] is WriteOutcome.REJECTED
    assert outcomes["tank-4.in_charge"] is WriteOutcome.WRITTEN


async def test_what_the_panel_refuses_is_rejected(desk: Desk) -> None:
    """Value by value: the counter is old, its inputs go with it, the heartbeat does not."""
    await desk.write(*desk.set_of(k=7))
    outcomes = await desk.write(*desk.set_of(("tank-4.pump", 50.0), k=7), ("panel.heartbeat", 1))
    assert outcomes["panel.period"] is WriteOutcome.REJECTED
    assert outcomes["tank-4.pump"] is WriteOutcome.REJECTED
    assert outcomes["panel.heartbeat"] is WriteOutcome.WRITTEN


@pytest.mark.parametrize("name", ["tank-4.level", "panel.permit", "panel.clock"])
async def test_what_is_not_writable_is_misuse(desk: Desk, name: str) -> None:
    """Nothing of such a request goes out."""
    with pytest.raises(ValueError, match=f"{name} is not writable"):
        await desk.write(("panel.heartbeat", 5), (name, 1.0))
    assert desk.link.statistics().writes == 0
    assert (await desk.read("panel.heartbeat")).value == 0


async def test_a_cut_link_carries_nothing(desk: Desk) -> None:
    """No reading arrives, no write leaves, and the statistics say so."""
    desk.link.cut = True
    gathered = await desk.link.gather(0)
    assert (dict(gathered.readings), gathered.complete) == ({}, False)
    assert await desk.write(("panel.heartbeat", 5)) == {"panel.heartbeat": WriteOutcome.NOT_SENT}
    statistics = desk.link.statistics()
    assert (statistics.state, statistics.read_failures, statistics.write_failures) == (LinkState.DOWN, 1, 1)
    desk.link.cut = False
    assert (await desk.read("panel.heartbeat")).value == 0
    assert desk.link.statistics().state is LinkState.UP


async def test_dropped_answers_leave_the_writes_in_force(desk: Desk) -> None:
    """Unknown to the writer, done at the panel: what makes reading back necessary."""
    desk.link.drop_answers = True
    assert await desk.write(("panel.heartbeat", 5)) == {"panel.heartbeat": WriteOutcome.UNKNOWN}
    assert (await desk.read("panel.heartbeat")).value == 5


async def test_opening_and_closing_are_harmless(desk: Desk) -> None:
    """There is nothing to connect to; closing twice is fine."""
    await desk.link.open(1.0)
    await desk.link.close()
    await desk.link.close()
    assert (await desk.link.gather(0)).complete
