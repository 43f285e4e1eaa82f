"""A tank with its own pump, an outlet in its floor, a consumer and a rim.

    A dh/dt   = q + q_in − q_out(h) − c           balance of volume                                    (1)
    q_out(h)  = C_d (π d²/4) √(2 g h)             Torricelli's law with a discharge coefficient        (2)
    T dq/dt   = Q s(u) − q                        the pump follows its command with a first-order lag  (3)
    s(u)      = u  for u_min ≤ u ≤ 1,   0  for u < u_min,   1  for u > 1                               (4)

    h   level, m                        A  horizontal area of the tank, m²      u  pump command, fraction of full
    q   pump flow, m³/s                 H  height of the rim, m                 Q  pump flow at full command, m³/s
    q_in  brought in by couplings       d  diameter of the outlet, m            T  time constant of the pump, s
    c   drawn by the consumer, m³/s     C_d  discharge coefficient              g  acceleration of free fall, m/s²

A sharp-edged orifice has a discharge coefficient of about 0.61 (practice, no source). Water above the rim is lost; an
empty tank delivers nothing, whatever is asked of it. `clip` applies both after a sub-step and says what each cost.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from math import pi
from typing import ClassVar

import numpy as np

from sim_plant.physics.parameters import Array, Floats, parameter, require_between, require_positive


@dataclass(frozen=True)
class Tank:
    """Parameters of one tank, or of many when every field is an array of them; SI units."""

    state_names: ClassVar[tuple[str, ...]] = ("level", "pump_flow")
    state_units: ClassVar[tuple[str, ...]] = ("m", "m^3/s")
    input_names: ClassVar[tuple[str, ...]] = ("pump",)
    input_units: ClassVar[tuple[str, ...]] = ("",)
    disturbance_names: ClassVar[tuple[str, ...]] = ("consumer",)
    disturbance_units: ClassVar[tuple[str, ...]] = ("m^3/s",)
    output_names: ClassVar[tuple[str, ...]] = ("level",)
    output_units: ClassVar[tuple[str, ...]] = ("m",)

    area: float = parameter("m^2", "horizontal area of the tank")
    rim: float = parameter("m", "height of the rim, where it overflows")
    outlet_bore: float = parameter("m", "diameter of the outlet hole, 0 for none")
    pump_capacity: float = parameter("m^3/s", "pump flow at full command, 0 for no pump")
    discharge: float = parameter("", "discharge coefficient of the outlet", 0.61)
    pump_lag_s: float = parameter("s", "time constant of the pump", 2.0)
    pump_minimum: float = parameter("", "command below which the pump delivers nothing, 0..1", 0.0)
    gravity: float = parameter("m/s^2", "acceleration of free fall", 9.81)

    def __post_init__(self) -> None:
        require_positive(self, ("area", "rim", "discharge", "pump_lag_s", "gravity"))
        require_between(self, "outlet_bore", 0)
        require_between(self, "pump_capacity", 0)
        require_between(self, "discharge", 0, 1)
        require_between(self, "pump_minimum", 0, 1)

    @cached_property
    def outlet_area(self) -> float:
        """Area of the outlet hole, m²."""
        return pi / 4 * self.outlet_bore**2

    @cached_property
    def _jet(self) -> float:
        """Flow through the outlet at a level of 1 m, m³/s: the constant part of (2)."""
        flow: float = self.discharge * self.outlet_area * np.sqrt(2 * self.gravity)
        return flow

    def outlet_flow(self, level: Array) -> Array:
        """Flow through the outlet at a level (m), m³/s, by (2); none when the level is at or below the hole."""
        flow: Array = self._jet * np.sqrt(np.maximum(level, 0.0))
        return flow

    def pump_target(self, pump: Array) -> Array:
        """Flow at which the pump settles for a command, m³/s, Q s(u) of (3)."""
        speed = np.minimum(np.maximum(pump, 0.0), 1.0) * (pump.real >= self.pump_minimum)
        flow: Array = self.pump_capacity * speed
        return flow

    def derivative(self, x: Array, u: Array, w: Array, inflow: Array) -> Array:
        """Rates of change of (level, pump_flow), (..., 2), by (1) and (3); the stops are `clip`'s affair.

        Args:
            x: level (m) and pump flow (m³/s), (..., 2).
            u: pump command as a fraction of full, (..., 1).
            w: drawn by the consumer (m³/s), (..., 1).
            inflow: brought in by couplings (m³/s), (...).
        """
        level, flow = x[..., 0], x[..., 1]
        rising = (flow + inflow - self.outlet_flow(level) - w[..., 0]) / self.area
        speeding = (self.pump_target(u[..., 0]) - flow) / self.pump_lag_s
        both = rising + speeding  # only for its shape and type: either alone may be batched or complex
        rates: Array = np.empty((*both.shape, 2), both.dtype)
        rates[..., 0], rates[..., 1] = rising, speeding
        return rates

    def head(self, x: Array) -> Array:
        """Pressure head that couplings see, m, (...)."""
        level: Array = x[..., 0]
        return level

    def outputs(self, x: Array) -> Array:
        """Level, m, (..., 1)."""
        return x[..., :1]

    def clip(self, x: Floats) -> tuple[Floats, Floats, Floats]:
        """Apply the stops.

        Returns:
            States with the level between empty and the rim, (..., 2); the water lost over the rim, m³, (...); and the
            water that outlet and consumer were counted as taking although it was not there, m³, (...).
        """
        level = x[..., 0]
        stopped = x.copy()
        stopped[..., 0] = kept = np.minimum(np.maximum(level, 0.0), self.rim)
        removed = (level - kept) * self.area
        return stopped, np.maximum(removed, 0.0), np.maximum(-removed, 0.0)

    def guess(self, y: Floats, u: Floats) -> Floats:
        """Rough states near outputs y (..., 1), NaN where free, and inputs u (..., 1): where a search may start."""
        level = np.where(np.isnan(y[..., 0]), 0.5 * self.rim, y[..., 0])
        return np.stack(np.broadcast_arrays(level, self.pump_target(u[..., 0])), axis=-1)
