"""Tests of `gateway.panel_view`: what cannot be read counts as the careful answer."""

from __future__ import annotations

from dataclasses import replace
from math import isnan, nan

import pytest
from hypothesis import given
from hypothesis import strategies as st

from gateway.design import PlantDesign
from gateway.panel_view import view_panel
from gateway.signals import Reading
from tests.gateway.virtual import Rig

BAD = 0x80310000
UNCERTAIN = 0x40940000
ANYTHING = st.one_of(
    st.none(),
    st.booleans(),
    st.integers(-(2**70), 2**70),
    st.floats(),
    st.text(max_size=5),
    st.binary(max_size=3),
    st.lists(st.integers(), max_size=2),
)


@pytest.fixture
async def readings(rig: Rig) -> dict[str, Reading]:
    """What a healthy panel shows while everything is driven."""
    await rig.run(3)
    return dict((await rig.link.gather(rig.clock.monotonic_ns())).readings)


def test_a_healthy_panel_is_seen_as_it_is(tarn_row: PlantDesign, rig: Rig, readings: dict[str, Reading]) -> None:
    """Permit, charge, clock, counter and commands, in the design's order."""
    view = view_panel(tarn_row, readings)
    assert view.permit
    assert not view.tripped
    assert view.refusal == ""
    assert all(view.in_charge)
    assert view.clock_ms == readings["panel.clock"].value
    assert view.accepted == rig.k - 1
    assert view.commands == tuple(rig.told(name) for name in rig.names)


def test_nothing_to_read_means_hands_off(tarn_row: PlantDesign) -> None:
    """No permit, no clock, nobody in charge, no known command."""
    view = view_panel(tarn_row, {})
    assert not view.permit
    assert view.clock_ms is None
    assert view.accepted is None
    assert not any(view.in_charge)
    assert all(isnan(command) for command in view.commands)


@pytest.mark.parametrize("status", [BAD, UNCERTAIN, 0xC0000000])
def test_only_a_good_status_is_believed(tarn_row: PlantDesign, readings: dict[str, Reading], status: int) -> None:
    """A permit that is uncertain is no permit; the same holds for all the panel says."""
    view = view_panel(tarn_row, {tag: replace(one, status=status) for tag, one in readings.items()})
    assert (view.permit, view.clock_ms, view.accepted) == (False, None, None)
    assert not any(view.in_charge)
    assert all(isnan(command) for command in view.commands)


@pytest.mark.parametrize("value", [1, 1.0, "true", None, nan, b"1", [True]])
def test_a_permit_is_a_truth_value_or_none_at_all(
    tarn_row: PlantDesign, readings: dict[str, Reading], value: object
) -> None:
    """What merely looks like yes is no; the same for the in-charge bits."""
    spoiled = {**readings, "panel.permit": Reading(value), "tank-2.in_charge": Reading(value)}
    view = view_panel(tarn_row, spoiled)
    assert not view.permit
    assert view.in_charge == (True, False, True, True, True, True, True, True)


@pytest.mark.parametrize("value", [True, -1, 1.0, "7", None, nan])
def test_a_counter_is_a_whole_number_from_zero(
    tarn_row: PlantDesign, readings: dict[str, Reading], value: object
) -> None:
    """Anything else leaves the clock and the counter unread."""
    view = view_panel(tarn_row, {**readings, "panel.clock": Reading(value), "panel.accepted": Reading(value)})
    assert view.clock_ms is None
    assert view.accepted is None


@pytest.mark.parametrize("value", [True, nan, float("inf"), "48", None])
def test_a_command_is_a_finite_number(tarn_row: PlantDesign, readings: dict[str, Reading], value: object) -> None:
    """Anything else is unknown, and only for that input."""
    view = view_panel(tarn_row, {**readings, "tank-4.pump": Reading(value)})
    assert [isnan(command) for command in view.commands] == [place == 3 for place in range(8)]


@given(data=st.data())
def test_no_reading_whatever_breaks_the_view(tarn_row: PlantDesign, data: st.DataObject) -> None:
    """A hostile panel yields careful answers, never an exception."""
    tags = ["panel.permit", "panel.clock", "panel.accepted", "panel.refusal", "panel.tripped", "tank-1.in_charge"]
    readings = {tag: Reading(data.draw(ANYTHING, label=tag)) for tag in [*tags, "tank-1.pump"]}
    view = view_panel(tarn_row, readings)
    assert view.permit is (readings["panel.permit"].value is True)
    assert view.in_charge[0] is (readings["tank-1.in_charge"].value is True)
    assert isinstance(view.refusal, str)


def test_a_plant_without_a_panel_is_always_ours(tarn_row: PlantDesign, readings: dict[str, Reading]) -> None:
    """Nobody is there to refuse anything, whatever tags say."""
    alone = replace(tarn_row, plant=replace(tarn_row.plant, panel=None))
    view = view_panel(alone, {"panel.permit": Reading(False), "tank-4.pump": readings["tank-4.pump"]})
    assert view.permit
    assert all(view.in_charge)
    assert view.clock_ms == 0
    assert view.accepted is None
    assert view.commands[3] == readings["tank-4.pump"].value
