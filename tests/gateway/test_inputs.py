"""Tests of `gateway.inputs`: what each hold state makes of an input, before the synthesis and after it."""

from __future__ import annotations

from dataclasses import replace
from math import nan

import numpy as np
import pytest

from gateway.design import PlantDesign
from gateway.hold import Writes
from gateway.inputs import ABANDONED, HANDED_BACK, LEFT_ALONE, Outgoing, intended_paths, outgoing_of
from gateway.panel_view import PanelView
from gateway.plantfile.plant import HoldAction, SafeHold
from tests.gateway.virtual import with_safe_hold

LAST = np.full(8, 48.0)
WANTED = np.full(8, 50.0)
SYNTHESIS, FROZEN, HOLD, WATCH = Writes.SYNTHESIS, Writes.LAST_WRITTEN, Writes.SAFE_HOLD, Writes.NOTHING


def panel(*, permit: bool = True, ours: bool = True) -> PanelView:
    """A panel that has everything, or nothing, in our charge."""
    return PanelView(permit, 1000, 1, "", False, (ours,) * 8, tuple(LAST))


def told(
    design: PlantDesign,
    action: Writes,
    view: PanelView,
    *,
    last: float = 48.0,
    clean: bool = True,
    ours: bool = True,
    not_told: bool = False,
    bands: dict[str, tuple[float, float]] | None = None,
) -> Outgoing:
    """What tank 4 is told."""
    lasts = np.where(np.arange(8) == 3, last, LAST)
    return outgoing_of(design, 3, action, WANTED, lasts, view, bands or {}, clean=clean, ours=ours, not_told=not_told)


# After the synthesis --------------------------------------------------------------------------------------------------


def test_a_driving_section_is_told_what_the_synthesis_wants(tarn_row: PlantDesign) -> None:
    """Its own inputs, by tag."""
    assert told(tarn_row, SYNTHESIS, panel()) == Outgoing({"tank-4.pump": 50.0})


def test_a_section_the_panel_has_is_taken_with_the_first_inputs(tarn_row: PlantDesign) -> None:
    """Charge and inputs go together."""
    assert told(tarn_row, SYNTHESIS, panel(ours=False)) == Outgoing({"tank-4.pump": 50.0}, take=True)


def test_a_frozen_section_is_told_its_last_inputs_again(tarn_row: PlantDesign) -> None:
    """So that they stay valid and are seen to be ours."""
    assert told(tarn_row, FROZEN, panel(), clean=False) == Outgoing({"tank-4.pump": 48.0})


def test_a_rearmed_section_is_taken_where_it_is(tarn_row: PlantDesign) -> None:
    """Frozen in a clean period: it comes back with what the panel shows."""
    assert told(tarn_row, FROZEN, panel(ours=False)) == Outgoing({"tank-4.pump": 48.0}, take=True)


def test_nothing_is_taken_in_a_period_that_is_a_miss(tarn_row: PlantDesign) -> None:
    """What the panel drives it goes on driving."""
    assert told(tarn_row, FROZEN, panel(ours=False), clean=False) == LEFT_ALONE


def test_a_frozen_section_nobody_knows_the_input_of_is_left_alone(tarn_row: PlantDesign) -> None:
    """There is no last value to repeat."""
    assert told(tarn_row, FROZEN, panel(), last=nan) == LEFT_ALONE


def test_a_hold_ramps(tarn_row: PlantDesign) -> None:
    """To 30 % at 10 %/s."""
    assert told(tarn_row, HOLD, panel()).values == pytest.approx({"tank-4.pump": 43.0})


def test_a_hold_keeps(tarn_row: PlantDesign) -> None:
    """Where it is, when the plant file says so."""
    keeping = with_safe_hold(tarn_row, SafeHold(HoldAction.KEEP))
    assert told(keeping, HOLD, panel()) == Outgoing({"tank-4.pump": 48.0})


def test_a_hold_hands_back(tarn_row: PlantDesign) -> None:
    """When the plant file says so."""
    assert told(with_safe_hold(tarn_row, SafeHold(HoldAction.HAND_BACK)), HOLD, panel()) == HANDED_BACK


def test_a_hold_keeps_to_authoritys_band(tarn_row: PlantDesign) -> None:
    """The ramp ends at its edge."""
    assert told(tarn_row, HOLD, panel(), bands={"tank-4.pump": (46.0, 55.0)}) == Outgoing({"tank-4.pump": 46.0})


def test_a_hold_of_an_input_nobody_knows_is_the_panels(tarn_row: PlantDesign) -> None:
    """It cannot be ramped from nowhere."""
    assert told(tarn_row, HOLD, panel(), last=nan) == HANDED_BACK


def test_a_hold_that_does_not_reach_its_actuators_is_the_panels(tarn_row: PlantDesign) -> None:
    """The last inputs were refused: somebody else must do it."""
    assert told(tarn_row, HOLD, panel(), not_told=True) == HANDED_BACK


def test_a_section_on_hold_that_the_panel_drives_stays_there(tarn_row: PlantDesign) -> None:
    """Only a rearm takes it back."""
    assert told(tarn_row, HOLD, panel(ours=False)) == LEFT_ALONE


@pytest.mark.parametrize("action", [SYNTHESIS, FROZEN, HOLD])
def test_without_permit_nobody_is_told_anything(tarn_row: PlantDesign, action: Writes) -> None:
    """The panel has taken the sections itself."""
    assert told(tarn_row, action, panel(permit=False)) == LEFT_ALONE


def test_a_watched_section_goes_back_if_we_had_it(tarn_row: PlantDesign) -> None:
    """No input, only the charge."""
    assert told(tarn_row, WATCH, panel()) == HANDED_BACK


def test_a_watched_section_somebody_else_left_in_our_charge_is_abandoned(tarn_row: PlantDesign) -> None:
    """It is not touched, and the panel is not told that control lives."""
    assert told(tarn_row, WATCH, panel(), ours=False) == ABANDONED


def test_a_watched_section_the_panel_drives_is_left_alone(tarn_row: PlantDesign) -> None:
    """As nearly always."""
    assert told(tarn_row, WATCH, panel(ours=False)) == LEFT_ALONE


def test_a_watched_plant_without_a_panel_is_left_alone(tarn_row: PlantDesign) -> None:
    """There is nobody to hand it back to."""
    alone = replace(tarn_row, plant=replace(tarn_row.plant, panel=None))
    assert told(alone, WATCH, panel()) == LEFT_ALONE


# Before the synthesis -------------------------------------------------------------------------------------------------


def paths(design: PlantDesign, intention: Writes, *, ours: bool = True, last: float = 48.0) -> tuple[object, ...]:
    """Path of tank 4, the others driving: last, given, band."""
    intentions = [intention if i == 3 else SYNTHESIS for i in range(8)]
    lasts = np.where(np.arange(8) == 3, last, LAST)
    path = intended_paths(design, intentions, [ours] * 8, lasts, {"tank-5.pump": (40.0, 60.0)})[3]
    return path.last, None if path.given is None else path.given.tolist(), path.band


def test_the_synthesis_decides_for_who_drives_or_is_watched(tarn_row: PlantDesign) -> None:
    """What an observed section would do is planned as if it did it."""
    assert paths(tarn_row, SYNTHESIS) == (48.0, None, (0.0, 100.0))
    assert paths(tarn_row, WATCH) == (48.0, None, (0.0, 100.0))


def test_authoritys_band_stands_in_for_the_hard_limits(tarn_row: PlantDesign) -> None:
    """Where there is one."""
    path = intended_paths(tarn_row, [SYNTHESIS] * 8, [True] * 8, LAST, {"tank-5.pump": (40.0, 60.0)})
    assert (path[4].band, path[3].band) == ((40.0, 60.0), (0.0, 100.0))


def test_a_frozen_input_stands_still(tarn_row: PlantDesign) -> None:
    """Over the whole horizon."""
    assert paths(tarn_row, FROZEN) == (48.0, [48.0] * 20, (0.0, 100.0))


def test_a_held_input_follows_its_ramp(tarn_row: PlantDesign) -> None:
    """Step by step, and stays at its end."""
    _, given, _ = paths(tarn_row, HOLD)
    assert given == pytest.approx([43.0, 38.0, 33.0] + [30.0] * 17)


def test_a_held_input_the_panel_drives_is_taken_to_stay_where_it_is(tarn_row: PlantDesign) -> None:
    """It is read anew every period."""
    _, given, _ = paths(tarn_row, HOLD, ours=False)
    assert given == [48.0] * 20
