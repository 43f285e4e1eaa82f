"""The plant through time: accuracy, stops, balances, and what a step refuses."""

from __future__ import annotations

from dataclasses import dataclass, replace
from math import exp, inf, nan

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sim_plant.network import Network
from sim_plant.physics import Floats, Tube
from sim_plant.plant import PlantState, advance
from tests.sim_plant.rigs import TANK, MeteredTank, row

METERED = MeteredTank(area=40e-4, rim=0.38, outlet_bore=6e-3, pump_capacity=70e-6)
THREE = row(3, METERED, Tube(bore=5e-3, length=0.3))
LEVELS, PUMPED, DRAINED, DRAWN = (slice(k, None, 5) for k in (0, 2, 3, 4))
CLOSED = replace(TANK, outlet_bore=0.0)


@dataclass(frozen=True)
class Held:
    """Pumps and consumers of three tanks, held for some seconds."""

    u: tuple[float, ...]
    w: tuple[float, ...]
    seconds: float


def three(values: st.SearchStrategy[float]) -> st.SearchStrategy[tuple[float, ...]]:
    """One value for each of three tanks."""
    return st.tuples(values, values, values)


HELD = st.builds(Held, three(st.floats(0.0, 1.0)), three(st.floats(0.0, 2e-4)), st.floats(0.1, 30.0))
"""Consumers up to twice what a pump brings, so that tanks run dry as well as over."""


@settings(deadline=None, max_examples=60)
@given(start=three(st.floats(0.0, 0.38)), history=st.lists(HELD, min_size=1, max_size=5))
def test_volume_is_neither_made_nor_lost(start: tuple[float, ...], history: list[Held]) -> None:
    """Stored + drained + drawn + spilled = pumped + missing, to rounding, whatever happens."""
    x = np.zeros(15)
    x[LEVELS] = start
    state = PlantState.start(THREE, x)
    for held in history:
        state = advance(THREE, state, np.array(held.u), np.array(held.w), held.seconds, 0.5)
    stored = 40e-4 * (state.x[LEVELS] - x[LEVELS]).sum()
    out = state.x[DRAINED].sum() + state.x[DRAWN].sum() + state.spilled_m3.sum()
    assert stored + out == pytest.approx(state.x[PUMPED].sum() + state.missing_m3.sum(), rel=1e-12, abs=1e-15)


@settings(deadline=None, max_examples=60)
@given(start=three(st.floats(0.0, 0.38)), history=st.lists(HELD, min_size=1, max_size=5))
def test_levels_stay_between_empty_and_rim(start: tuple[float, ...], history: list[Held]) -> None:
    """The rim is never exceeded, no tank holds less than nothing, and the counters never run back."""
    x = np.zeros(15)
    x[LEVELS] = start
    state = PlantState.start(THREE, x)
    for held in history:
        after = advance(THREE, state, np.array(held.u), np.array(held.w), held.seconds, 0.5)
        assert (after.x[LEVELS] >= 0.0).all()
        assert (after.x[LEVELS] <= 0.38).all()
        assert (after.spilled_m3 >= state.spilled_m3).all()
        assert (after.missing_m3 >= state.missing_m3).all()
        state = after


def filled(level: float, flow: float = 0.0) -> PlantState:
    """A lone closed tank."""
    return PlantState.start(Network([("tank", CLOSED)]), np.array([level, flow]))


def test_a_full_tank_spills_what_it_is_given() -> None:
    """Closed and full to the rim, every drop pumped in goes over it."""
    network = Network([("tank", CLOSED)])
    after = advance(network, filled(0.38, 35e-6), np.array([0.5]), np.zeros(1), 60.0, 0.1)
    assert after.x[0] == 0.38
    assert after.spilled_m3[0] == pytest.approx(35e-6 * 60, rel=1e-9)
    assert after.missing_m3[0] == 0.0


def test_an_empty_tank_delivers_nothing() -> None:
    """What its consumer asked for in vain is counted, and no more."""
    network = Network([("tank", CLOSED)])
    after = advance(network, filled(0.0), np.zeros(1), np.array([8e-6]), 60.0, 0.1)
    assert after.x[0] == 0.0
    assert after.missing_m3[0] == pytest.approx(8e-6 * 60, rel=1e-9)
    assert after.spilled_m3[0] == 0.0


def test_an_empty_tank_passes_on_what_comes_in() -> None:
    """A consumer that asks for more than the pump brings gets what the pump brings."""
    network = Network([("tank", CLOSED)])
    after = advance(network, filled(0.0, 35e-6), np.array([0.5]), np.array([50e-6]), 60.0, 0.1)
    assert after.x[0] == 0.0
    assert after.missing_m3[0] == pytest.approx((50e-6 - 35e-6) * 60, rel=1e-9)


def pump_error(substep_s: float) -> float:
    """How far the pump of a tank is from its closed form, 4 s after a step to full."""
    after = advance(Network([("tank", CLOSED)]), filled(0.1), np.ones(1), np.zeros(1), 4.0, substep_s)
    return abs(float(after.x[1]) - 70e-6 * (1 - exp(-4.0 / 2.0)))


def test_error_falls_with_the_fourth_power_of_the_substep() -> None:
    """Half the sub-step, a sixteenth of the error: the method's order, on the pump's closed-form response."""
    assert pump_error(0.5) / pump_error(0.25) == pytest.approx(16, rel=0.15)


def test_one_step_of_many_substeps_is_many_steps() -> None:
    """Cutting time differently changes nothing, to the last bit."""
    network = row(8)
    start = PlantState.start(network, network.guess(np.linspace(0.1, 0.3, 8), np.full(8, 0.5)))
    u, w = np.linspace(0.2, 0.9, 8), np.zeros(8)
    at_once, in_parts = advance(network, start, u, w, 0.5, 0.05), start
    for _ in range(10):
        in_parts = advance(network, in_parts, u, w, 0.05, 0.05)
    np.testing.assert_array_equal(at_once.x, in_parts.x)


@pytest.mark.parametrize(("dt_s", "substep_s", "steps"), [(0.5, 0.05, 10), (0.5, 0.2, 3), (0.1, 0.5, 1), (2.1, 0.3, 7)])
def test_substeps_are_equal_and_no_longer_than_asked(dt_s: float, substep_s: float, steps: int) -> None:
    """A step is cut into the fewest equal parts, and rounding adds none."""
    network, start = Network([("tank", TANK)]), PlantState.start(Network([("tank", TANK)]), np.array([0.2, 0.0]))
    by_hand = start
    for _ in range(steps):
        by_hand = advance(network, by_hand, np.ones(1), np.zeros(1), dt_s / steps, 2 * dt_s)
    np.testing.assert_array_equal(advance(network, start, np.ones(1), np.zeros(1), dt_s, substep_s).x, by_hand.x)


def test_a_batch_of_plants_runs_as_each_alone() -> None:
    """A leading axis runs through time too, counters included."""
    network = row(3)
    rng = np.random.default_rng(1)
    x = np.stack([network.guess(rng.uniform(0.0, 0.38, 3), np.full(3, 0.9)) for _ in range(4)])
    u, w = rng.uniform(0, 1, (4, 3)), rng.uniform(0, 1e-4, (4, 3))
    together = advance(network, PlantState.start(network, x), u, w, 120.0, 0.5)
    for i in range(4):
        alone = advance(network, PlantState.start(network, x[i]), u[i], w[i], 120.0, 0.5)
        np.testing.assert_allclose(together.x[i], alone.x, rtol=1e-12, atol=1e-15)
        np.testing.assert_allclose(together.missing_m3[i], alone.missing_m3, rtol=1e-9, atol=1e-15)
        np.testing.assert_allclose(together.spilled_m3[i], alone.spilled_m3, rtol=1e-9, atol=1e-15)


def test_a_step_leaves_the_state_it_started_from() -> None:
    """State in, new state out; the old one can't be written to."""
    start = filled(0.2)
    before = start.x.tolist()
    after = advance(Network([("tank", CLOSED)]), start, np.ones(1), np.zeros(1), 1.0, 0.1)
    assert start.x.tolist() == before != after.x.tolist()
    with pytest.raises(ValueError, match="read-only"):
        after.x[0] = 0.0


def test_time_goes_on_by_the_step() -> None:
    """Instants are the start plus what was stepped."""
    assert advance(Network([("tank", CLOSED)]), filled(0.2), np.ones(1), np.zeros(1), 2.5, 0.1).time_s == 2.5


def test_no_time_changes_nothing() -> None:
    """A step of no length gives the state back."""
    start = filled(0.2)
    assert advance(Network([("tank", CLOSED)]), start, np.ones(1), np.zeros(1), 0.0, 0.1) is start


@pytest.mark.parametrize("bad", [nan, inf, -inf])
@pytest.mark.parametrize("which", ["u", "w"])
def test_not_finite_inputs_are_refused_by_name(which: str, bad: float) -> None:
    """NaN would pass for a stopped pump; it is an error instead, with the signal's name."""
    network = row(3)
    state = PlantState.start(network, np.zeros(6))
    values: dict[str, Floats] = {"u": np.zeros(3), "w": np.zeros(3)}
    values[which][1] = bad
    with pytest.raises(
        ValueError, match=rf"{which} is not finite at tank-2\.{'pump' if which == 'u' else 'consumer'};"
    ):
        advance(network, state, values["u"], values["w"], 0.5, 0.05)


@pytest.mark.parametrize(
    ("u", "w", "message"),
    [(np.zeros(2), np.zeros(3), "u has the shape"), (np.zeros(3), np.zeros(4), "w has the shape")],
)
def test_wrong_lengths_are_refused_by_name(u: Floats, w: Floats, message: str) -> None:
    """A vector of the wrong length is never broadcast into the plant."""
    network = row(3)
    with pytest.raises(ValueError, match=message):
        advance(network, PlantState.start(network, np.zeros(6)), u, w, 0.5, 0.05)


@pytest.mark.parametrize(
    ("dt_s", "substep_s", "name"),
    [(-1.0, 0.1, "dt_s"), (nan, 0.1, "dt_s"), (1.0, 0.0, "substep_s"), (1.0, nan, "substep_s")],
)
def test_impossible_times_are_refused_by_name(dt_s: float, substep_s: float, name: str) -> None:
    """Time neither runs back nor stands still in sub-steps."""
    with pytest.raises(ValueError, match=f"^{name} is"):
        advance(Network([("tank", CLOSED)]), filled(0.2), np.ones(1), np.zeros(1), dt_s, substep_s)


def test_a_substep_too_long_for_the_plant_is_an_error() -> None:
    """An integration that diverges ends in an error, never in a state."""
    network = Network([("tank", replace(CLOSED, pump_lag_s=0.01))])
    with pytest.raises(FloatingPointError, match="substep_s is 1"):
        advance(network, PlantState.start(network, np.array([0.2, 0.0])), np.ones(1), np.zeros(1), 100.0, 1.0)


@pytest.mark.parametrize(
    ("level", "message"),
    [
        (0.381, "outside the stops at tank-2.level"),
        (-1e-9, "outside the stops at tank-2.level"),
        (nan, "not finite at tank-2.level"),
    ],
)
def test_a_plant_starts_inside_its_stops(level: float, message: str) -> None:
    """A start that can't be is refused with the name of the state."""
    with pytest.raises(ValueError, match=message):
        PlantState.start(row(3), np.array([0.1, 0.0, level, 0.0, 0.1, 0.0]))


def test_start_does_not_keep_the_callers_array() -> None:
    """Who gave the start may go on writing to it."""
    x = np.array([0.2, 0.0])
    state = PlantState.start(Network([("tank", CLOSED)]), x)
    x[0] = 0.3
    assert state.x[0] == 0.2
