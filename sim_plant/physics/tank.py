"""A tank with its own pump, an outlet in its floor, a consumer and a rim.

    A dh/dt = q − Cd a sqrt(2 g h) − c + inflow          level h (m)
    lag dq/dt = capacity u − q                           pump flow q (m3/s), u its command; u below the minimum gives 0

A area of the tank, a area of the outlet, Cd its discharge coefficient (sharp-edged orifice: about 0.61, practice, no
source), c what the consumer draws, inflow what couplings bring in. Water above the rim is lost; an empty tank delivers
nothing. Outlet law: Torricelli.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np
import numpy.typing as npt

from sim_plant.physics.parameters import parameter, require_positive

Array = npt.NDArray[Any]


@dataclass(frozen=True)
class Tank:
    """Parameters of one tank, or of many when every field is an array of them; SI units."""

    state_names: ClassVar = ("level", "pump_flow")
    state_units: ClassVar = ("m", "m^3/s")
    input_names: ClassVar = ("pump",)
    input_units: ClassVar = ("",)
    disturbance_names: ClassVar = ("consumer",)
    disturbance_units: ClassVar = ("m^3/s",)
    output_names: ClassVar = ("level",)
    output_units: ClassVar = ("m",)

    area: float = parameter("m^2", "horizontal area of the tank")
    rim: float = parameter("m", "height of the rim, where it overflows")
    outlet_bore: float = parameter("m", "diameter of the outlet hole")
    pump_capacity: float = parameter("m^3/s", "pump flow at full command")
    discharge: float = parameter("", "discharge coefficient of the outlet", 0.61)
    pump_lag_s: float = parameter("s", "time constant of the pump", 2.0)
    pump_minimum: float = parameter("", "command below which the pump delivers nothing, 0..1", 0.0)
    gravity: float = parameter("m/s^2", "acceleration of free fall", 9.81)

    def __post_init__(self) -> None:
        require_positive(self, ("area", "rim", "outlet_bore", "pump_capacity", "discharge", "pump_lag_s", "gravity"))
        minimum = np.asarray(self.pump_minimum)
        if not ((minimum >= 0) & (minimum < 1)).all():
            raise ValueError(f"tank pump_minimum is {minimum}; give a fraction from 0 up to, not including, 1")

    @property
    def outlet_area(self) -> float:
        """Area of the outlet hole, m2."""
        return np.pi / 4 * self.outlet_bore**2

    def outlet_flow(self, level: Array) -> Array:
        """Torricelli: flow through the outlet at a level (m), m3/s."""
        head = np.where(np.real(level) > 0, level, 0.0)
        return self.discharge * self.outlet_area * np.sqrt(2 * self.gravity * head)

    def derivative(self, x: Array, u: Array, w: Array, inflow: Array) -> Array:
        """Rates of change of (level, pump_flow).

        Args:
            x: states, (..., 2).
            u: pump command as a fraction of full, (..., 1).
            w: consumer, m3/s, (..., 1).
            inflow: from couplings, m3/s, (...).
        """
        level, flow = x[..., 0], x[..., 1]
        running = np.where(np.real(u[..., 0]) >= self.pump_minimum, u[..., 0], 0.0)
        rising = (flow - self.outlet_flow(level) - w[..., 0] + inflow) / self.area
        return np.stack([rising, (self.pump_capacity * running - flow) / self.pump_lag_s], axis=-1)

    def head(self, x: Array) -> Array:
        """Pressure head that couplings see, m, (...)."""
        return x[..., 0]

    def outputs(self, x: Array) -> Array:
        """Level, m, (..., 1)."""
        return x[..., :1]

    def clip(self, x: Array) -> tuple[Array, Array, Array]:
        """Apply the stops: returns the states, the water lost over the rim and the water that was not there, m3."""
        level = x[..., 0]
        stopped = np.clip(level, 0.0, self.rim)
        over = self.area * np.maximum(level - self.rim, 0.0)
        missing = self.area * np.maximum(-level, 0.0)
        return np.stack([stopped, x[..., 1]], axis=-1), over, missing

    def guess(self, y: Array, u: Array) -> Array:
        """Rough states near outputs y (..., 1), NaN where free, and inputs u (..., 1): where a search may start."""
        level = np.where(np.isnan(y[..., 0]), 0.5 * self.rim, y[..., 0])
        return np.stack([level, self.pump_capacity * u[..., 0]], axis=-1)
