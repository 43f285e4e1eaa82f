"""`kill -9` of the gateway: the panel takes over, and the next start does not drive before a person says so."""

from __future__ import annotations

import asyncio
from math import isnan
from pathlib import Path

import pytest
from asyncua.client.client import Client

from gateway.hold import State
from gateway.journal import PeriodRecord
from gateway.requests import RequestState, ask
from tests.wire.processes import control, eventually, periods, plant

pytestmark = [pytest.mark.wire, pytest.mark.real_time]


async def read(endpoint: str, *identifiers: str) -> list[object]:
    """Values of nodes in the plant's namespace, by a client of its own."""
    async with Client(endpoint, timeout=10) as client:
        index = await client.get_namespace_index("urn:lengthsman:tarn-row")
        return [await client.get_node(f"ns={index};s={name}").read_value() for name in identifiers]


def all_in(state: State, records: list[PeriodRecord]) -> list[PeriodRecord]:
    """The records in which every section is in this state."""
    return [record for record in records if all(section.state is state for section in record.sections)]


def test_a_killed_gateway_trips_the_panel_and_comes_back_on_hold(tmp_path: Path) -> None:
    """Driving, killed, panel tripped, started again: on hold and writing nothing, driving only after the rearm."""
    simulated, endpoint = plant(tmp_path)
    with simulated:
        with control(tmp_path, endpoint) as first:
            eventually(lambda: all_in(State.DRIVING, periods(tmp_path)), "all sections driving")
            assert asyncio.run(read(endpoint, "panel/tripped", "tank-1/in_charge")) == [False, True]
            first.kill()
        eventually(lambda: asyncio.run(read(endpoint, "panel/tripped"))[0], "the panel's trip")
        assert asyncio.run(read(endpoint, "tank-1/in_charge", "tank-8/in_charge")) == [False, False]

        with control(tmp_path, endpoint) as second:
            eventually(lambda: all_in(State.HOLDING, periods(tmp_path, 1)), "all sections on hold")
            clean = eventually(lambda: len(all_in(State.HOLDING, periods(tmp_path, 1))) > 8, "clean periods on hold")
            assert clean
            held = periods(tmp_path, 1)
            assert not all_in(State.DRIVING, held)
            assert all(isnan(value) for record in held for section in record.sections for value in section.written)

            answer = ask(tmp_path / "requests.sqlite", "rearm all", who="test")
            assert answer.state is RequestState.APPLIED
            driven = eventually(lambda: all_in(State.DRIVING, periods(tmp_path, 1)), "driving after the rearm")
            assert driven[0].k > held[-1].k
            assert second.stop() == 0
