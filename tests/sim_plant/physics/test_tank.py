"""What a tank does: outlet, pump, consumer, stops, and the shapes and types it computes in."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_plant.network import Network
from sim_plant.physics import Floats
from tests.sim_plant.rigs import TANK

LEVEL, PUMP_FLOW = 0, 1
NONE = np.zeros(1)


def rates(level: float, flow: float, pump: float = 0.0, consumer: float = 0.0, inflow: float = 0.0) -> Floats:
    """Rates of change of the demo tank."""
    return TANK.derivative(np.array([level, flow]), np.array([pump]), np.array([consumer]), np.array(inflow))


def test_a_litre_a_second_raises_the_level_by_its_share_of_the_area() -> None:
    """What the pump and couplings bring in, less what the consumer draws, moves the level; nothing else when empty."""
    assert rates(0.0, 50e-6, consumer=20e-6, inflow=10e-6)[LEVEL] == pytest.approx(40e-6 / 40e-4)


def test_outlet_flow_grows_with_the_root_of_the_level() -> None:
    """Four times the level, twice the flow."""
    low, high = TANK.outlet_flow(np.array([0.05, 0.2]))
    assert high == pytest.approx(2 * low, rel=1e-14)


def test_nothing_leaves_below_the_outlet() -> None:
    """Inside a sub-step a level may dip below zero; the outlet then neither delivers nor draws air."""
    assert TANK.outlet_flow(np.array([0.0, -1e-3])).tolist() == [0.0, 0.0]


def test_tank_time_constant_is_the_one_the_demo_promises() -> None:
    """At 20 cm about 34 cm³/s leave, and the tank's time constant is about 47 s (our own scenario)."""
    step = 1e-30
    slope = np.imag(TANK.outlet_flow(np.array(0.2 + step * 1j))) / step
    assert TANK.outlet_flow(np.array(0.2)) * 1e6 == pytest.approx(34, abs=0.5)
    assert TANK.area / slope == pytest.approx(47, abs=0.5)


def test_pump_moves_toward_its_command_by_its_lag() -> None:
    """At rest and told half, the pump gains half its capacity in one lag's worth of its first rate."""
    assert rates(0.1, 0.0, pump=0.5)[PUMP_FLOW] == pytest.approx(0.5 * 70e-6 / 2.0)


@pytest.mark.parametrize(
    ("command", "fraction"),
    [(-1.0, 0.0), (0.0, 0.0), (0.0999, 0.0), (0.1, 0.1), (0.7, 0.7), (1.0, 1.0), (1.5, 1.0)],
)
def test_pump_delivers_from_its_minimum_to_its_full_speed(command: float, fraction: float) -> None:
    """Below the minimum nothing, above full speed no more than that."""
    assert TANK.pump_target(np.array(command)) == pytest.approx(fraction * 70e-6)


def test_a_pump_without_minimum_never_runs_backwards() -> None:
    """A command below zero is no command."""
    assert replace(TANK, pump_minimum=0.0).pump_target(np.array(-0.5)) == 0.0


def test_rim_overflow_is_lost_and_counted() -> None:
    """One centimetre above the rim is 40 cm³ lost."""
    inside, lost, missing = TANK.clip(np.array([0.39, 3e-5]))
    assert inside.tolist() == [0.38, 3e-5]
    assert lost == pytest.approx(40e-6)
    assert missing == 0.0


def test_what_an_empty_tank_did_not_have_is_counted() -> None:
    """One centimetre below empty is 40 cm³ that nobody got."""
    inside, lost, missing = TANK.clip(np.array([-0.01, 0.0]))
    assert inside.tolist() == [0.0, 0.0]
    assert lost == 0.0
    assert missing == pytest.approx(40e-6)


@given(level=st.floats(0.0, 0.38), flow=st.floats(0.0, 70e-6))
def test_clip_leaves_what_is_inside_alone(level: float, flow: float) -> None:
    """Between the stops nothing is changed, lost or missing."""
    x = np.array([level, flow])
    inside, lost, missing = TANK.clip(x)
    assert (inside.tolist(), float(lost), float(missing)) == (x.tolist(), 0.0, 0.0)


def test_clip_does_not_write_into_its_argument() -> None:
    """State goes in and new state comes out."""
    x = np.array([0.5, 0.0])
    TANK.clip(x)
    assert x.tolist() == [0.5, 0.0]


@given(level=st.floats(0.01, 0.37), pump=st.floats(0.11, 0.99))
def test_complex_steps_give_the_slopes_by_hand(level: float, pump: float) -> None:
    """Inside the stops the Jacobian by complex steps is the one that (1) to (3) give on paper."""
    step = 1e-30
    x, u, w = np.array([level, 30e-6]), np.array([pump]), np.array([5e-6])
    over = np.eye(4) * step * 1j
    slopes = np.imag(TANK.derivative(x + over[:, :2], u + over[:, 2:3], w + over[:, 3:], np.zeros(4))) / step
    by_hand: list[list[float]] = [
        [-float(TANK.outlet_flow(np.array(level))) / (2 * level) / TANK.area, 0.0],
        [1 / TANK.area, -1 / TANK.pump_lag_s],
        [0.0, TANK.pump_capacity / TANK.pump_lag_s],
        [-1 / TANK.area, 0.0],
    ]
    np.testing.assert_allclose(slopes, np.array(by_hand), rtol=1e-12, atol=0)


def test_a_complex_input_alone_makes_complex_rates() -> None:
    """Type and shape follow from all arguments together, not from the state's."""
    got = TANK.derivative(np.array([0.2, 0.0]), np.array([[0.5 + 1e-30j]] * 3), NONE, np.zeros(()))
    assert got.shape == (3, 2)
    assert got.dtype == np.complex128


def test_stacked_tanks_compute_as_each_alone() -> None:
    """A tank whose parameters are arrays is as many tanks."""
    wide = replace(TANK, area=80e-4, outlet_bore=4e-3)
    network = Network([("one", TANK), ("wide", wide)])
    x, u, w = np.array([0.1, 1e-5, 0.3, 2e-5]), np.array([0.3, 0.6]), np.array([0.0, 2e-6])
    alone = [
        TANK.derivative(x[:2], u[:1], w[:1], np.zeros(())),
        wide.derivative(x[2:], u[1:], w[1:], np.zeros(())),
    ]
    np.testing.assert_allclose(network.derivative(x, u, w), np.concatenate(alone), rtol=1e-15)


def test_guess_is_settled_at_the_outputs() -> None:
    """The level as wished and the pump at what it is told; half full where nobody wishes."""
    np.testing.assert_allclose(
        TANK.guess(np.array([[0.2], [np.nan]]), np.array([[0.5], [1.0]])), [[0.2, 35e-6], [0.19, 70e-6]]
    )


def test_output_and_head_are_the_level() -> None:
    """The transmitter and the tubes see the same level."""
    x = np.array([0.2, 1e-5])
    assert TANK.outputs(x).tolist() == [0.2]
    assert TANK.head(x) == 0.2
