"""Check 13: the plant's integration against scipy's `solve_ivp` at tight tolerance, whole Tarn Row, inputs moving.

The other side shares nothing with the plant: equations written out tank by tank from Torricelli's law and the
Hagen–Poiseuille law, integrated by an eighth-order method (DOP853) with relative tolerance 1e-12.
"""

from __future__ import annotations

from math import pi, sqrt

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from sim_plant.physics import Floats
from sim_plant.plant import PlantState, advance
from tests.sim_plant.rigs import row

TANKS = 8
PERIOD_S, PERIODS = 0.5, 80
SPAN_M, CAPACITY = 0.4, 70e-6


def right_hand_side(_t: float, x: Floats, u: Floats, w: Floats) -> list[float]:
    """Tarn Row's equations, one tank at a time: sizes in SI from the scenario, not from the plant's objects."""
    area, hole = 40e-4, pi * 0.006**2 / 4
    conductance = pi * 0.003**4 * 998.2 * 9.81 / (128 * 1.002e-3 * 0.3)
    rates = []
    for i in range(TANKS):
        level, flow = x[2 * i], x[2 * i + 1]
        came = flow - 0.61 * hole * sqrt(2 * 9.81 * level) - w[i]
        if i > 0:
            came += conductance * (x[2 * i - 2] - level)
        if i < TANKS - 1:
            came += conductance * (x[2 * i + 2] - level)
        told = u[i] if u[i] >= 0.1 else 0.0
        rates += [came / area, (CAPACITY * told - flow) / 2.0]
    return rates


def moving(seed: int) -> tuple[Floats, Floats]:
    """Pumps that wander, one of them below its minimum at times, and consumers that open and close."""
    rng = np.random.default_rng(seed)
    u = np.clip(0.5 + np.cumsum(rng.normal(0.0, 0.06, (PERIODS, TANKS)), axis=0), 0.12, 0.95)
    u[20:50, 6] = 0.05
    w = np.zeros((PERIODS, TANKS))
    w[10:40, 2], w[30:, 5], w[:60, 4] = 8e-6, 10e-6, 6e-6
    return u, w


@pytest.mark.parametrize("substep_s", [0.05, 0.25])
def test_tarn_row_with_moving_inputs(substep_s: float) -> None:
    """Every level stays within 1e-6 of its span and every pump flow within 1e-6 of capacity, at all 80 periods."""
    network = row(TANKS)
    u, w = moving(seed=11)
    start = network.guess(np.linspace(0.12, 0.28, TANKS), u[0])
    state, exact = PlantState.start(network, start), start
    scale = np.tile([SPAN_M, CAPACITY], TANKS)
    for k in range(PERIODS):
        state = advance(network, state, u[k], w[k], PERIOD_S, substep_s)
        solved = solve_ivp(
            right_hand_side, (0.0, PERIOD_S), exact, method="DOP853", rtol=1e-12, atol=1e-16, args=(u[k], w[k])
        )
        exact = solved.y[:, -1]
        assert np.abs((state.x - exact) / scale).max() < 1e-6
    assert np.abs(state.x - start)[::2].min() > 1e-3, "every level must have moved, or nothing was compared"
    assert state.spilled_m3.sum() == state.missing_m3.sum() == 0.0, "the comparison is meant inside the stops"
