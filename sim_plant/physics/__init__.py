"""What a section does by nature, one file per kind of section and coupling, SI units throughout.

Problem: a plant is a network of sections of few kinds, joined by couplings. A section answers with the rates of change
of its own states; whatever reaches it from its neighbours comes as one number, its inflow. A coupling compares the
heads at its two ends and says what flows:

    dx_i/dt = f_i(x_i, u_i, w_i, q_i)        y_i = h_i(x_i)        p_i = head of x_i
    q_i     = Σ φ_ji(p_j, p_i) over couplings that end at i  −  Σ φ_ij(p_i, p_j) over those that start there

    x states      u inputs, driven by a controller      w disturbances      y outputs      q inflow      p head

Shapes: the last axis of x, u, w, y counts the states, inputs, disturbances, outputs of one section in the order of
their names; every axis before it is a batch, of sections or of cases. q and p have the batch axes alone. Everything
broadcasts. `derivative`, `outputs` and `head` take complex numbers inside the stops, for complex-step derivatives.

A kind is a frozen dataclass of its parameters, all numbers, or all arrays when many sections are stacked into one.
A new kind is one more file here and one more line in a registry below.
"""

from __future__ import annotations

from typing import ClassVar, Protocol

from sim_plant.physics.parameters import Array, Floats, Parameter, parameters_of
from sim_plant.physics.tank import Tank
from sim_plant.physics.tube import Tube


class SectionPhysics(Protocol):
    """What a plant asks of a kind of section."""

    state_names: ClassVar[tuple[str, ...]]
    state_units: ClassVar[tuple[str, ...]]
    input_names: ClassVar[tuple[str, ...]]
    input_units: ClassVar[tuple[str, ...]]
    disturbance_names: ClassVar[tuple[str, ...]]
    disturbance_units: ClassVar[tuple[str, ...]]
    output_names: ClassVar[tuple[str, ...]]
    output_units: ClassVar[tuple[str, ...]]

    def __init__(self, **parameters: float) -> None:
        """Build one from SI parameters; raises ValueError for one out of its range."""

    def derivative(self, x: Array, u: Array, w: Array, inflow: Array) -> Array:
        """Rates of change, (..., states)."""

    def head(self, x: Array) -> Array:
        """What couplings see, (...)."""

    def outputs(self, x: Array) -> Array:
        """Outputs, (..., outputs)."""

    def clip(self, x: Floats) -> tuple[Floats, Floats, Floats]:
        """Apply physical stops after a sub-step: states, volume lost, volume taken that was not there; m³, (...)."""

    def guess(self, y: Floats, u: Floats) -> Floats:
        """Rough states near these outputs, NaN where free, and inputs: where a search may start."""


class CouplingLaw(Protocol):
    """What a plant asks of a kind of coupling."""

    def __init__(self, **parameters: float) -> None:
        """Build one from SI parameters; raises ValueError for one out of its range."""

    def flow(self, head_one: Array, head_other: Array, /) -> Array:
        """Flow from one end to the other, m³/s; exchanged ends give the negative."""

    def in_range(self, head_one: Array, head_other: Array, /) -> Array:
        """Whether the law can be trusted between these heads."""


PHYSICS: dict[str, type[SectionPhysics]] = {"tank": Tank}
"""Kinds of section by their name in a plant file."""

COUPLINGS: dict[str, type[CouplingLaw]] = {"tube": Tube}
"""Kinds of coupling by their name in a plant file."""

__all__ = [
    "COUPLINGS",
    "PHYSICS",
    "Array",
    "CouplingLaw",
    "Floats",
    "Parameter",
    "SectionPhysics",
    "Tank",
    "Tube",
    "parameters_of",
]
