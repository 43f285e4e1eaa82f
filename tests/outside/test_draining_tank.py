"""Check 7: a draining tank against Torricelli's law in closed form.

With nothing coming in, A dh/dt = −C_d a √(2 g h) has the solution √h(t) = √h₀ (1 − t/t_e), and the tank is empty at
t_e = (A / (C_d a)) √(2 h₀ / g): any textbook of fluid mechanics. C_d of about 0.61 for a sharp-edged orifice is
practice, no source; the contraction of a free plane jet from a wide vessel is π/(π + 2) = 0.611.
"""

from __future__ import annotations

from dataclasses import replace
from math import pi, sqrt

import numpy as np
import pytest

from sim_plant.network import Network
from sim_plant.physics import Tank
from sim_plant.plant import PlantState, advance

TANK = Tank(area=40e-4, rim=0.38, outlet_bore=6e-3, pump_capacity=0.0)
START = 0.36
HOLE = pi / 4 * 6e-3**2
IDLE = np.zeros(1)


def empty_at_s(discharge: float, gravity: float) -> float:
    """When the tank is empty, closed form."""
    return 40e-4 / (discharge * HOLE) * sqrt(2 * START / gravity)


def drained(tank: Tank, seconds: float) -> float:
    """Level after so many seconds, by the plant."""
    network = Network([("tank", tank)])
    after = advance(network, PlantState.start(network, np.array([START, 0.0])), IDLE, IDLE, seconds, 0.05)
    return float(after.x[0])


@pytest.mark.parametrize("fraction", [0.1, 0.5, 0.9, 0.97])
@pytest.mark.parametrize(("discharge", "gravity"), [(0.61, 9.81), (1.0, 9.81), (0.61, 1.62)])
def test_level_follows_the_closed_form(fraction: float, discharge: float, gravity: float) -> None:
    """To 1e-6 of the level itself, down to a thousandth of the start, for another hole and on the Moon as well."""
    level = drained(replace(TANK, discharge=discharge, gravity=gravity), fraction * empty_at_s(discharge, gravity))
    assert level == pytest.approx(START * (1 - fraction) ** 2, rel=1e-6)


def test_emptying_time_is_the_closed_form() -> None:
    """√h falls on a straight line; drawn through the plant's own levels it meets zero at t_e, to 1e-6."""
    early, late = 20.0, 50.0
    high, low = sqrt(drained(TANK, early)), sqrt(drained(TANK, late))
    assert early + high * (late - early) / (high - low) == pytest.approx(empty_at_s(0.61, 9.81), rel=1e-6)


def test_tank_is_empty_after_its_emptying_time() -> None:
    """Not a drop left one second later, one millimetre still there a little before."""
    time_s = empty_at_s(0.61, 9.81)
    assert drained(TANK, time_s + 1.0) == 0.0
    assert drained(TANK, time_s * (1 - sqrt(1e-3 / START))) == pytest.approx(1e-3, rel=1e-5)


def test_default_coefficient_is_that_of_a_sharp_edge() -> None:
    """The default agrees with the plane jet's contraction, π/(π + 2), to the digits practice gives."""
    assert TANK.discharge == pytest.approx(pi / (pi + 2), abs=0.005)
