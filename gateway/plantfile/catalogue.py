"""What the physics offer to a plant file: kinds of sections and couplings, their parameters, their signals.

The plant file knows no tank and no tube; everything about them comes from the registries of `sim_plant.physics`
through here. A parameter that ends in `_s` there is written without it, since a time in a plant file brings its own
unit: `pump_lag = "2 s"`.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from functools import cache
from typing import Any

from gateway.plantfile.plant import Role
from sim_plant.physics import COUPLINGS, PHYSICS, Parameter, SectionPhysics, parameters_of


@dataclass(frozen=True)
class ParameterEntry:
    """One parameter of a physics.

    Attributes:
        name: its name there.
        unit: its SI unit, "" when it has none.
        default: what it is when the file says nothing, None when the file must say it.
        description: for the message that it is missing.
    """

    name: str
    unit: str
    default: float | None
    description: str


@dataclass(frozen=True)
class Slot:
    """A signal that a physics has: its SI unit and the roles it can play."""

    unit: str
    roles: tuple[Role, ...]


@dataclass(frozen=True)
class PhysicsEntry:
    """One kind of section or coupling.

    Attributes:
        name: its name in a plant file.
        parameters: by the key a plant file uses.
        build: makes the physics from SI parameters; raises ValueError when they do not fit together.
        slots: its signals by name, outputs, then inputs, then disturbances; none for a coupling.
    """

    name: str
    parameters: Mapping[str, ParameterEntry]
    build: Callable[..., object]
    slots: Mapping[str, Slot] = field(default_factory=dict)


@dataclass(frozen=True)
class Catalogue:
    """All physics there are, by their name in a plant file."""

    sections: Mapping[str, PhysicsEntry]
    couplings: Mapping[str, PhysicsEntry]


@cache
def built_in() -> Catalogue:
    """The catalogue of `sim_plant.physics`."""
    return Catalogue(
        sections={name: _entry(name, kind, _slots(kind)) for name, kind in PHYSICS.items()},
        couplings={name: _entry(name, kind, {}) for name, kind in COUPLINGS.items()},
    )


def _entry(name: str, kind: type[Any], slots: Mapping[str, Slot]) -> PhysicsEntry:
    parameters = {_key(parameter): _parameter(parameter) for parameter in parameters_of(kind)}
    return PhysicsEntry(name=name, parameters=parameters, build=kind, slots=slots)


def _key(parameter: Parameter) -> str:
    return parameter.name.removesuffix("_s") if parameter.unit == "s" else parameter.name


def _parameter(parameter: Parameter) -> ParameterEntry:
    return ParameterEntry(parameter.name, parameter.unit, parameter.default, parameter.description)


def _slots(kind: type[SectionPhysics]) -> dict[str, Slot]:
    slots: dict[str, Slot] = {}
    for names, units, roles in (
        (kind.output_names, kind.output_units, (Role.MEASURED,)),
        (kind.input_names, kind.input_units, (Role.DRIVEN,)),
        (
            kind.disturbance_names,
            kind.disturbance_units,
            (Role.MEASURED_DISTURBANCE, Role.UNMEASURED_DISTURBANCE),
        ),
    ):
        slots |= {name: Slot(unit, roles) for name, unit in zip(names, units, strict=True)}
    return slots
