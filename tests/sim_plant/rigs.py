"""Plants the tests of the physics run on: Tarn Row as it stands, and a tank with meters in its pipes."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import ClassVar

import numpy as np

from sim_plant.network import Network
from sim_plant.physics import Array, Floats, Tank, Tube

TANK = Tank(
    area=40e-4, rim=0.38, outlet_bore=6e-3, pump_capacity=70e-6, discharge=0.61, pump_lag_s=2.0, pump_minimum=0.1
)
TUBE = Tube(bore=3e-3, length=0.3)


def row(tanks: int, tank: Tank = TANK, tube: Tube = TUBE) -> Network:
    """Return this many tanks in a row, each joined to the next."""
    names = [f"tank-{i + 1}" for i in range(tanks)]
    return Network([(name, tank) for name in names], [(one, other, tube) for one, other in pairwise(names)])


@dataclass(frozen=True)
class MeteredTank(Tank):
    """A tank with a meter in each of its pipes: three more states add up what has passed, m³."""

    state_names: ClassVar[tuple[str, ...]] = (*Tank.state_names, "pumped", "drained", "drawn")
    state_units: ClassVar[tuple[str, ...]] = (*Tank.state_units, "m^3", "m^3", "m^3")

    def derivative(self, x: Array, u: Array, w: Array, inflow: Array) -> Array:
        """Rates of the tank, then the flows through its pipes."""
        own = super().derivative(x[..., :2], u, w, inflow)
        rates: Array = np.empty((*own.shape[:-1], 5), own.dtype)
        rates[..., :2] = own
        rates[..., 2], rates[..., 3], rates[..., 4] = x[..., 1], self.outlet_flow(x[..., 0]), w[..., 0]
        return rates

    def clip(self, x: Floats) -> tuple[Floats, Floats, Floats]:
        """Apply the tank's stops; meters have none."""
        inside, lost, missing = super().clip(x[..., :2])
        return np.concatenate([inside, x[..., 2:]], axis=-1), lost, missing
