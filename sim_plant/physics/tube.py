"""A narrow tube between two tanks: laminar, so its flow is proportional to the difference of heads.

Hagen-Poiseuille:  q = pi d^4 rho g / (128 mu L) · (h_one − h_other),   Re = 4 rho q / (pi d mu).
Water at 20 C: 998.2 kg/m3, 1.002 mPa s. Beyond Re = 2300 (practice, no source) the real flow falls below this law.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from sim_plant.physics.parameters import parameter, require_positive

Array = npt.NDArray[Any]

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

    @property
    def conductance(self) -> float:
        """Flow per metre of head difference, m3/s per m."""
        return np.pi * self.bore**4 * self.density * self.gravity / (128 * self.viscosity * self.length)

    def flow(self, head_one: Array, head_other: Array) -> Array:
        """Flow from one end to the other, m3/s."""
        return self.conductance * (head_one - head_other)

    def reynolds(self, flow: Array) -> Array:
        """Reynolds number of a flow, m3/s."""
        return 4 * self.density * np.abs(flow) / (np.pi * self.bore * self.viscosity)

    @property
    def laminar_limit_m(self) -> float:
        """Head difference at which the flow leaves the law's range, m."""
        return LAMINAR_REYNOLDS * np.pi * self.bore * self.viscosity / (4 * self.density) / self.conductance
