"""The plant through time: its state, and the step that moves it.

The classical Runge–Kutta method of fourth order, in sub-steps of equal length with inputs and disturbances held:

    k₁ = F(x),  k₂ = F(x + ½ s k₁),  k₃ = F(x + ½ s k₂),  k₄ = F(x + s k₃),   x ← x + s/6 (k₁ + 2 k₂ + 2 k₃ + k₄)

The stops (a rim, an empty tank) act after every sub-step, so the instant at which one is met is known to one sub-step.
The volumes they cost are counted in the state, and with them the balance closes to rounding:

    stored(t) − stored(0) = brought in − taken out − spilled + missing

    spilled   went over a rim, m³
    missing   was counted as taken out by outlet and consumer, but the tank did not have it, m³

The sub-step must be short against the fastest time constant (a pump's lag, a level in its tank). A step that leaves the
finite numbers is an error, never a state.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil, inf, isfinite
from typing import Self

import numpy as np
import numpy.typing as npt

from sim_plant.network import Network
from sim_plant.physics import Floats

__all__ = ["Network", "PlantState", "advance"]


@dataclass(frozen=True)
class PlantState:
    """A plant at one instant; its arrays are read-only.

    Attributes:
        x: states, (..., n), SI.
        time_s: seconds since the start.
        spilled_m3: lost over each section's rim since the start, (..., sections).
        missing_m3: asked of each section since the start when it was empty, (..., sections).
    """

    x: Floats
    time_s: float
    spilled_m3: Floats
    missing_m3: Floats

    def __post_init__(self) -> None:
        """Make the arrays read-only."""
        for array in (self.x, self.spilled_m3, self.missing_m3):
            array.setflags(write=False)

    @classmethod
    def start(cls, network: Network, x: Floats, time_s: float = 0.0) -> Self:
        """Return a plant in the state x, (..., n), with nothing counted yet.

        Raises:
            ValueError: x has the wrong length, is not finite, or lies outside a section's stops.
        """
        x = np.array(x, dtype=np.float64)
        _require("x", x, network.x_tags)
        inside, _, _ = network.clip(x)
        if names := _named(inside != x, network.x_tags):
            raise ValueError(f"x starts outside the stops at {names}; start between empty and the rim")
        none = np.zeros((*x.shape[:-1], len(network.sections)))
        return cls(x=x, time_s=time_s, spilled_m3=none, missing_m3=none.copy())


def advance(network: Network, state: PlantState, u: Floats, w: Floats, dt_s: float, substep_s: float) -> PlantState:
    """Return the plant `dt_s` seconds later.

    Args:
        network: the plant.
        state: where it is; left as it is.
        u: inputs held over the step, (..., m), SI.
        w: disturbances held over the step, (..., l), SI.
        dt_s: length of the step; 0 gives the state back.
        substep_s: longest sub-step; the step is cut into the fewest equal ones that are no longer.

    Raises:
        ValueError: u or w has the wrong length or is not finite, or a time is out of range.
        FloatingPointError: the integration left the finite numbers, the sub-step is too long.
    """
    _require("u", u, network.u_tags)
    _require("w", w, network.w_tags)
    if not 0 <= dt_s < inf:
        raise ValueError(f"dt_s is {dt_s}; it must be finite and at least 0")
    if not 0 < substep_s < inf:
        raise ValueError(f"substep_s is {substep_s}; it must be finite and above 0")
    if dt_s == 0:
        return state
    count = max(1, ceil(dt_s / substep_s - 1e-9))  # ten times 0.05 s are 0.5 s, whatever rounding says
    x, spilled, missing = state.x, state.spilled_m3, state.missing_m3
    with np.errstate(over="ignore", invalid="ignore"):  # a step that leaves the finite numbers is refused below
        for _ in range(count):
            x, lost, absent = network.clip(_runge_kutta(network, x, u, w, dt_s / count))
            spilled, missing = spilled + lost, missing + absent
    if not isfinite(x.sum()):
        raise FloatingPointError(f"the plant left the finite numbers; substep_s is {substep_s}, take a shorter one")
    return PlantState(x=x, time_s=state.time_s + dt_s, spilled_m3=spilled, missing_m3=missing)


def _runge_kutta(network: Network, x: Floats, u: Floats, w: Floats, step_s: float) -> Floats:
    """One sub-step without stops."""
    half = step_s / 2
    k1 = network.derivative(x, u, w)
    k2 = network.derivative(x + half * k1, u, w)
    k3 = network.derivative(x + half * k2, u, w)
    k4 = network.derivative(x + step_s * k3, u, w)
    moved: Floats = x + (step_s / 6) * (k1 + 2 * (k2 + k3) + k4)
    return moved


def _require(name: str, values: Floats, tags: tuple[str, ...]) -> None:
    if values.shape[-1:] != (len(tags),):
        raise ValueError(f"{name} has the shape {values.shape}; its last axis must count {', '.join(tags)}")
    if not isfinite(values.sum()):
        names = _named(~np.isfinite(values), tags)
        raise ValueError(f"{name} is not finite at {names}; give finite SI values")


def _named(bad: npt.NDArray[np.bool_], tags: tuple[str, ...]) -> str:
    """Names of the columns, (..., tags), that are bad in any case of the batch."""
    columns = np.unique(np.nonzero(bad)[-1])
    return ", ".join(tags[column] for column in columns)
