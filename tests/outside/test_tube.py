"""Check 8: the connecting tube against the Hagen–Poiseuille law by two other routes.

Law: "The history of Poiseuille's law", Annual Review of Fluid Mechanics 25 (1993) 1-19. Other routes: the parabolic
profile u(r) = Δp (R² − r²) / (4 μ L) integrated over the cross-section, and the friction factor 64/Re of laminar flow
in a round pipe put into the Darcy–Weisbach head loss. Water at 20 °C: density by the formula of "Recommended table for
the density of water between 0 °C and 40 °C based on recent experimental reports", Metrologia 38 (2001) 301-309;
viscosity 1.002 mPa s by "Absolute viscosity of water at 20 °C", J. Research of the National Bureau of Standards 48
(1952) 1-31.
"""

from __future__ import annotations

from math import pi

import numpy as np
import pytest
from scipy.integrate import quad

from sim_plant.physics import Tube

TUBES = [Tube(bore=3e-3, length=0.3), Tube(bore=8e-4, length=1.2, density=871.0, viscosity=0.02, gravity=9.78)]
HEAD = 0.05


@pytest.mark.parametrize("tube", TUBES)
def test_flow_is_the_integral_of_the_parabolic_profile(tube: Tube) -> None:
    """To 1e-9, for water and for oil."""
    pressure, radius = tube.density * tube.gravity * HEAD, tube.bore / 2

    def ring(r: float) -> float:
        return 2 * pi * r * pressure * (radius**2 - r**2) / (4 * tube.viscosity * tube.length)

    integral, _ = quad(ring, 0.0, radius, epsabs=0.0, epsrel=1e-12)
    assert float(tube.flow(np.array(HEAD), np.array(0.0))) == pytest.approx(integral, rel=1e-9)


@pytest.mark.parametrize("tube", TUBES)
def test_head_is_lost_by_the_laminar_friction_factor(tube: Tube) -> None:
    """Δh = (64/Re) (L/d) v²/(2 g) at the tube's own flow and Reynolds number, to 1e-9."""
    flow = tube.flow(np.array(HEAD), np.array(0.0))
    velocity = float(flow) / (pi / 4 * tube.bore**2)
    lost = 64 / float(tube.reynolds(flow)) * tube.length / tube.bore * velocity**2 / (2 * tube.gravity)
    assert lost == pytest.approx(HEAD, rel=1e-9)


@pytest.mark.parametrize("tube", TUBES)
def test_reynolds_number_is_that_of_the_mean_velocity(tube: Tube) -> None:
    """Re = ρ v d / μ with the mean velocity, to 1e-9."""
    flow = np.array(2e-6)
    velocity = 2e-6 / (pi / 4 * tube.bore**2)
    assert float(tube.reynolds(flow)) == pytest.approx(tube.density * velocity * tube.bore / tube.viscosity, rel=1e-9)


def test_default_liquid_has_the_density_of_water() -> None:
    """The published formula at 20 °C gives the default, to its digits."""
    t = 20.0
    density = 999.974950 * (1 - (t - 3.983035) ** 2 * (t + 301.797) / (522528.9 * (t + 69.34881)))
    assert TUBES[0].density == pytest.approx(density, abs=0.05)


def test_default_liquid_has_the_viscosity_of_water() -> None:
    """1.002 mPa s as measured; the value standardised later, 1.0016 mPa s (ISO/TR 3666:1998), is within its digits."""
    assert TUBES[0].viscosity == 1.002e-3
    assert TUBES[0].viscosity == pytest.approx(1.0016e-3, abs=0.5e-6)
