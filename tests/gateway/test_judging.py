"""Tests of `gateway.judging`: one verdict per section, its earliest cause, before anything is written."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from controllers import Outcome, Plan
from gateway.design import PlantDesign
from gateway.judging import foresee, judge, not_told, set_not_taken
from gateway.panel_view import PanelView
from gateway.standing import SentSet, Standing
from gateway.verdict import Verdict
from tests.gateway.virtual import Rig

ON_TIME = [Verdict.ON_TIME] * 8
NOBODY = np.zeros(8, dtype=bool)
EVERYBODY = np.ones(8, dtype=bool)


@pytest.fixture
async def good(rig: Rig) -> Rig:
    """A run after a good period."""
    await rig.run(2)
    return rig


def one(verdict: Verdict, place: int = 3) -> list[Verdict]:
    """Everybody on time but one."""
    return [verdict if i == place else Verdict.ON_TIME for i in range(8)]


def certain(rig: Rig, **changed: object) -> list[Verdict]:
    """What is certain of the last period, had it been different."""
    happened = rig.history[-1]
    facts: dict[str, object] = {
        "gathered": happened.gathered,
        "view": happened.view,
        "charge_expected": EVERYBODY,
        "blind": frozenset(),
        "not_taken": NOBODY,
    } | changed
    return foresee(rig.design, **facts)  # type: ignore[arg-type]


def plan_of(rig: Rig) -> Plan:
    """The plan of the last period."""
    plan = rig.history[-1].plan
    assert plan is not None
    return plan


def sent(rig: Rig, *, refused: bool = False) -> Standing:
    """The standing after a set of everybody's inputs went out."""
    return replace(rig.standing, sent=SentSet(rig.k, EVERYBODY, EVERYBODY if refused else NOBODY))


def showing(rig: Rig, accepted: int | None) -> PanelView:
    """The panel showing this counter."""
    return replace(rig.history[-1].view, accepted=accepted)


def test_nothing_speaks_against_a_good_period(good: Rig) -> None:
    """Everybody is on time, before and after the synthesis."""
    assert certain(good) == ON_TIME
    assert judge(good.design, ON_TIME, plan_of(good), "") == ON_TIME


def test_a_section_whose_levels_did_not_arrive_is_severed(good: Rig) -> None:
    """Only that one."""
    readings = {tag: value for tag, value in good.history[-1].gathered.readings.items() if tag != "tank-4.level"}
    gathered = replace(good.history[-1].gathered, readings=readings)
    assert certain(good, gathered=gathered) == one(Verdict.SEVERED)


def test_a_blind_section_is_blind(good: Rig) -> None:
    """By name."""
    assert certain(good, blind=frozenset({"tank-4"})) == one(Verdict.BLIND)


def test_without_permit_everybody_is_barred(good: Rig) -> None:
    """And without a clock nobody can say how long inputs would be valid, which is the same."""
    view = good.history[-1].view
    assert certain(good, view=replace(view, permit=False)) == [Verdict.BARRED] * 8
    assert certain(good, view=replace(view, clock_ms=None)) == [Verdict.BARRED] * 8


def test_a_section_the_panel_took_away_is_barred(good: Rig) -> None:
    """Expected in our charge and not there; one that was not expected to be is not missed."""
    view = replace(good.history[-1].view, in_charge=tuple(i != 3 for i in range(8)))
    assert certain(good, view=view) == one(Verdict.BARRED)
    expected = np.array([i != 3 for i in range(8)])
    assert certain(good, view=view, charge_expected=expected) == ON_TIME


def test_a_set_the_panel_did_not_take_is_unwritten(good: Rig) -> None:
    """For those who had values in it."""
    assert certain(good, not_taken=np.array([i == 3 for i in range(8)])) == one(Verdict.UNWRITTEN)


def test_a_late_synthesis_is_late_for_everybody(good: Rig) -> None:
    """There is no plan."""
    assert judge(good.design, ON_TIME, None, "") == [Verdict.LATE] * 8


def test_a_synthesis_that_broke_down_is_no_matter_of_time(good: Rig) -> None:
    """Unconverged, with or without a plan."""
    assert judge(good.design, ON_TIME, None, "a price is not finite") == [Verdict.UNCONVERGED] * 8


def test_a_section_above_the_tolerance_is_unconverged(good: Rig) -> None:
    """The others' inputs are as good as they would be without it."""
    tolerance = good.design.plant.controller.tolerance_spans
    primal = np.array([2 * tolerance if i == 3 else tolerance for i in range(8)])
    plan = replace(plan_of(good), primal=primal, change=np.zeros(8))
    assert judge(good.design, ON_TIME, plan, "") == one(Verdict.UNCONVERGED)


def test_a_residual_that_is_no_number_is_not_below_any_tolerance(good: Rig) -> None:
    """NaN compares as the careful answer."""
    plan = replace(plan_of(good), primal=np.array([np.nan if i == 3 else 0.0 for i in range(8)]), change=np.zeros(8))
    assert judge(good.design, ON_TIME, plan, "") == one(Verdict.UNCONVERGED)


def test_a_plan_that_is_not_finite_is_nobodys(good: Rig) -> None:
    """Whatever its residuals say."""
    plan = replace(plan_of(good), outcome=Outcome.NOT_FINITE)
    assert judge(good.design, ON_TIME, plan, "") == [Verdict.UNCONVERGED] * 8


def test_running_out_of_time_within_tolerance_is_on_time(good: Rig) -> None:
    """Anytime: what counts is the residual, not why the iteration ended."""
    plan = replace(plan_of(good), outcome=Outcome.OUT_OF_TIME)
    assert judge(good.design, ON_TIME, plan, "") == ON_TIME


@pytest.mark.parametrize("cause", [Verdict.SEVERED, Verdict.BARRED, Verdict.BLIND])
def test_what_was_certain_before_explains_what_followed(good: Rig, cause: Verdict) -> None:
    """A blind section is blind, late or not."""
    assert judge(good.design, [cause] * 8, None, "") == [cause] * 8


def test_late_explains_a_set_that_was_not_taken_either(good: Rig) -> None:
    """The order of causes is that of the pipeline, also across the synthesis."""
    assert judge(good.design, [Verdict.UNWRITTEN] * 8, None, "") == [Verdict.LATE] * 8


def test_the_counter_that_was_sent_confirms_the_set(good: Rig) -> None:
    """Shown by the panel, it was taken; any other, or none that can be read, and it was not."""
    standing = sent(good)
    assert not set_not_taken(good.design, standing, showing(good, good.k)).any()
    assert set_not_taken(good.design, standing, showing(good, good.k - 1)).all()
    assert set_not_taken(good.design, standing, showing(good, good.k + 1)).all()
    assert set_not_taken(good.design, standing, showing(good, None)).all()


def test_a_refusal_in_so_many_words_counts_once(good: Rig) -> None:
    """It was the verdict of the period before."""
    assert not set_not_taken(good.design, sent(good, refused=True), showing(good, good.k - 1)).any()


def test_without_a_panel_or_a_set_there_is_nothing_to_confirm(good: Rig, tarn_row: PlantDesign) -> None:
    """Nobody is missed."""
    alone = replace(tarn_row, plant=replace(tarn_row.plant, panel=None))
    assert not set_not_taken(alone, sent(good), showing(good, None)).any()
    assert not set_not_taken(good.design, replace(good.standing, sent=None), showing(good, 1)).any()


def test_what_certainly_did_not_reach_an_actuator(good: Rig) -> None:
    """A set the panel refused, inputs that were rejected; silence proves nothing."""
    assert not_told(sent(good), showing(good, good.k - 1)).all()
    assert not_told(sent(good, refused=True), showing(good, good.k)).all()
    assert not not_told(sent(good), showing(good, good.k)).any()
    assert not not_told(sent(good), showing(good, None)).any()
    assert not not_told(replace(good.standing, sent=None), showing(good, 1)).any()
