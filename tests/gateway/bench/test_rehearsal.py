"""The simulated plant told to misbehave, over a real connection on loopback."""

from __future__ import annotations

import pytest

from gateway.bench.rehearsal import ProvokeError, Rehearsal
from gateway.clock import VirtualClock
from gateway.simulated import identifiers_of, simulated_plant
from sim_plant.direct import DirectPlant
from sim_plant.servers.opcua import OpcUaPlant
from tests.gateway.test_simulated import PLANT, SITE

pytestmark = pytest.mark.wire

FREE = "opc.tcp://127.0.0.1:0"


async def test_a_line_reaches_the_plant_and_its_answer_comes_back() -> None:
    """The transmitter is frozen by the line, and the plant says so."""
    clock = VirtualClock(seed=1)
    plant = DirectPlant(simulated_plant(PLANT), clock)
    async with (
        OpcUaPlant(plant, clock, FREE, SITE.namespace, identifiers_of(plant.tags, SITE)) as server,
        Rehearsal(server.endpoint, SITE.namespace) as rehearsal,
    ):
        assert await rehearsal.provoke("dropout tank-1.level") == "provoked: 'dropout tank-1.level'"
        clock.advance_to(plant.next_scan_ns())
        assert plant.read_all()["tank-1.level"].value is None


async def test_a_line_the_plant_refuses_is_an_error_with_its_reason() -> None:
    """The nearest right spelling comes along."""
    clock = VirtualClock(seed=1)
    plant = DirectPlant(simulated_plant(PLANT), clock)
    async with (
        OpcUaPlant(plant, clock, FREE, SITE.namespace, identifiers_of(plant.tags, SITE)) as server,
        Rehearsal(server.endpoint, SITE.namespace) as rehearsal,
    ):
        with pytest.raises(ProvokeError, match=r"refused: .*nearest: 'tank-1.level'"):
            await rehearsal.provoke("freeze tank-1.levl")


async def test_nobody_there_is_an_error_that_names_the_endpoint() -> None:
    """Port 1 of loopback has no server."""
    with pytest.raises(ProvokeError, match=r"^opc\.tcp://127\.0\.0\.1:1: "):
        async with Rehearsal("opc.tcp://127.0.0.1:1", SITE.namespace):
            pass
