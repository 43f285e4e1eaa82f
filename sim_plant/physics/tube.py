"""A narrow tube between two tanks: laminar, so its flow is proportional to the difference of heads.

    q  = K (h₁ − h₂),    K = π d⁴ ρ g / (128 μ L)        Hagen–Poiseuille                          (1)
    Re = 4 ρ |q| / (π d μ)                               Reynolds number                           (2)

    q  flow from one end to the other, m³/s      d  inner diameter, m      ρ  density of the liquid, kg/m³
    h  head, m                                   L  length, m              μ  dynamic viscosity of the liquid, Pa s

Beyond Re = 2300 (practice, no source) the real flow falls below (1); `in_range` tells. Losses at the ends of the tube
and the length over which the profile of the flow develops are not counted.

Sources: the law, "The history of Poiseuille's law", Annual Review of Fluid Mechanics 25 (1993) 1-19. Water at 20 °C:
998.2 kg/m³, "Recommended table for the density of water between 0 °C and 40 °C", Metrologia 38 (2001) 301-309;
1.002 mPa s, "Absolute viscosity of water at 20 °C", J. Research of the National Bureau of Standards 48 (1952) 1-31.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from math import pi

import numpy as np

from sim_plant.physics.parameters import Array, parameter, require_positive

LAMINAR_REYNOLDS = 2300.0


@dataclass(frozen=True)
class Tube:
    """Parameters of one tube, or of many when every field is an array of them; SI units."""

    bore: float = parameter("m", "inner diameter")
    length: float = parameter("m", "length")
    density: float = parameter("kg/m^3", "density of the liquid", 998.2)
    viscosity: float = parameter("Pa*s", "dynamic viscosity of the liquid", 1.002e-3)
    gravity: float = parameter("m/s^2", "acceleration of free fall", 9.81)

    def __post_init__(self) -> None:
        require_positive(self, ("bore", "length", "density", "viscosity", "gravity"))

    @cached_property
    def conductance(self) -> float:
        """Flow per metre of head difference, m³/s per m, K of (1)."""
        return pi * self.bore**4 * self.density * self.gravity / (128 * self.viscosity * self.length)

    @cached_property
    def laminar_limit_m(self) -> float:
        """Head difference at which the flow leaves the law's range, m."""
        return LAMINAR_REYNOLDS * pi * self.bore * self.viscosity / (4 * self.density) / self.conductance

    def flow(self, head_one: Array, head_other: Array) -> Array:
        """Flow from one end to the other at these heads (m), m³/s, by (1); negative when it runs back."""
        flow: Array = self.conductance * (head_one - head_other)
        return flow

    def reynolds(self, flow: Array) -> Array:
        """Reynolds number of a flow (m³/s), by (2)."""
        number: Array = 4 * self.density * np.abs(flow) / (pi * self.bore * self.viscosity)
        return number

    def in_range(self, head_one: Array, head_other: Array) -> Array:
        """Whether the flow between these heads (m) is laminar, so that (1) holds."""
        laminar: Array = np.abs(head_one - head_other) <= self.laminar_limit_m
        return laminar
