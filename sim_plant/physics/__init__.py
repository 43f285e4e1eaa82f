"""One file per kind of section and coupling, SI units throughout.

A kind of section is a frozen dataclass of parameters with names and units of its states, inputs, disturbances and
outputs. All methods broadcast over leading axes, take complex numbers inside the stops (for complex-step derivatives),
and work on one section or on many stacked ones. A kind of coupling gives a flow between two heads.
"""

from __future__ import annotations

from typing import Any, ClassVar, Protocol

from sim_plant.physics.parameters import Parameter, parameters_of
from sim_plant.physics.tank import Array, Tank
from sim_plant.physics.tube import Tube


class SectionPhysics(Protocol):
    """What `sim_plant.plant` asks of a kind of section; shapes as in `Tank`."""

    state_names: ClassVar[tuple[str, ...]]
    state_units: ClassVar[tuple[str, ...]]
    input_names: ClassVar[tuple[str, ...]]
    input_units: ClassVar[tuple[str, ...]]
    disturbance_names: ClassVar[tuple[str, ...]]
    disturbance_units: ClassVar[tuple[str, ...]]
    output_names: ClassVar[tuple[str, ...]]
    output_units: ClassVar[tuple[str, ...]]

    def derivative(self, x: Array, u: Array, w: Array, inflow: Array) -> Array:
        """Rates of change, (..., states)."""

    def head(self, x: Array) -> Array:
        """What couplings see, (...)."""

    def outputs(self, x: Array) -> Array:
        """Outputs, (..., outputs)."""

    def clip(self, x: Array) -> tuple[Array, Array, Array]:
        """Apply physical stops: states, volume lost, volume missing."""

    def guess(self, y: Array, u: Array) -> Array:
        """Rough states near these outputs and inputs."""


class CouplingLaw(Protocol):
    """What `sim_plant.plant` asks of a kind of coupling."""

    def flow(self, head_one: Array, head_other: Array) -> Array:
        """Flow from one end to the other, m3/s."""


PHYSICS: dict[str, type[Any]] = {"tank": Tank}
"""Kinds of section by their name in a plant file."""

COUPLINGS: dict[str, type[Any]] = {"tube": Tube}
"""Kinds of coupling by their name in a plant file."""

__all__ = [
    "COUPLINGS",
    "PHYSICS",
    "Array",
    "CouplingLaw",
    "Parameter",
    "SectionPhysics",
    "Tank",
    "Tube",
    "parameters_of",
]
