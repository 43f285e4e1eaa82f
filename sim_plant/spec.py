"""What a simulated plant is built from: the gateway makes one of these out of a plant file.

Numbers at signals are in the signal's engineering unit; `Scale` turns them into the unit the physics computes in (SI).
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable
from dataclasses import dataclass, field
from enum import StrEnum
from math import isfinite
from typing import Final

from sim_plant.consumers import Profile
from sim_plant.instruments import Instrument
from sim_plant.panel import KEEP, LocalAction
from sim_plant.physics import CouplingLaw, SectionPhysics

PANEL: Final = "panel"
"""Section part of the panel's own tags, so no section may be named like it."""

IN_CHARGE: Final = "in_charge"
"""Name of a section's in-charge bit, so no signal may be named like it."""


class SpecError(ValueError):
    """A specification that can't be simulated; names the field, the value and the fix."""


class Role(StrEnum):
    """What a signal is to the controller."""

    MEASURED = "measured"
    DRIVEN = "driven"
    MEASURED_DISTURBANCE = "measured_disturbance"
    UNMEASURED_DISTURBANCE = "unmeasured_disturbance"

    @property
    def has_transmitter(self) -> bool:
        """Whether somebody can read it."""
        return self in (Role.MEASURED, Role.MEASURED_DISTURBANCE)

    @property
    def is_disturbance(self) -> bool:
        """Whether a consumer makes it."""
        return self in (Role.MEASURED_DISTURBANCE, Role.UNMEASURED_DISTURBANCE)


@dataclass(frozen=True)
class Scale:
    """Affine unit conversion, physics value = factor * engineering value + offset.

    Raises:
        SpecError: a factor that is zero or a number that isn't finite.
    """

    factor: float = 1.0
    offset: float = 0.0

    def __post_init__(self) -> None:
        if not (isfinite(self.factor) and self.factor != 0.0 and isfinite(self.offset)):
            raise SpecError(f"scale factor={self.factor}, offset={self.offset}: finite, and the factor not zero")


@dataclass(frozen=True)
class SimulatedSignal:
    """One signal of one section.

    Attributes:
        section: name of its section.
        name: that of an output (measured), an input (driven) or a disturbance of the section's physics.
        role: a `Role` or its text.
        unit: engineering unit, as written in the plant file.
        span: engineering range.
        scale: conversion to the physics unit.
        rest: where it stands at the operating point: a driven signal starts there, a consumer without a profile stays
            there.
        instrument: its transmitter; only where the role has one.
        profile: its switching; disturbances only.
        local: the panel's local action; driven signals only.

    Raises:
        SpecError: the field, its value and what is allowed.
    """

    section: str
    name: str
    role: Role
    unit: str
    span: tuple[float, float]
    scale: Scale = field(default_factory=Scale)
    rest: float = 0.0
    instrument: Instrument = field(default_factory=Instrument)
    profile: Profile | None = None
    local: LocalAction = KEEP

    def __post_init__(self) -> None:
        object.__setattr__(self, "role", Role(self.role))
        low, high = self.span
        if not (isfinite(low) and isfinite(high) and low < high):
            raise SpecError(f"{self.tag} span={self.span}: must be two finite numbers, low below high")
        if not isfinite(self.rest):
            raise SpecError(f"{self.tag} rest={self.rest}: must be a finite number")
        if self.profile is not None and not self.role.is_disturbance:
            raise SpecError(f"{self.tag} profile: only a disturbance can have one, this is {self.role}")
        if self.local != KEEP and self.role is not Role.DRIVEN:
            raise SpecError(f"{self.tag} local: only a driven signal has a local action, this is {self.role}")

    @property
    def tag(self) -> str:
        """Name of the signal in logs and lines of faults."""
        return f"{self.section}.{self.name}"


@dataclass(frozen=True)
class SimulatedPlantSpec:
    """A whole simulated plant.

    Attributes:
        name: of the plant.
        sections: (name, physics), in the order of the network's state.
        couplings: (one, other, law).
        signals: every input needs a driven signal; a disturbance without a signal is zero.
        x0: state at the start, flat, SI, in the order of the network.
        watchdog_s, window_s: the panel's watchdog and longest validity of a set of inputs; both None: no panel, what is
            written reaches the actuators at once.
        seed: of noise and consumers.
        step_s: time between two scans of the plant: sampling, panel, actuators.
        substep_s: longest integration step.

    Raises:
        SpecError: the field, its value and what is allowed.
    """

    name: str
    sections: tuple[tuple[str, SectionPhysics], ...]
    couplings: tuple[tuple[str, str, CouplingLaw], ...]
    signals: tuple[SimulatedSignal, ...]
    x0: tuple[float, ...]
    watchdog_s: float | None
    window_s: float | None
    seed: int = 1
    step_s: float = 0.05
    substep_s: float = 0.05

    def __post_init__(self) -> None:
        if (self.watchdog_s is None) != (self.window_s is None):
            raise SpecError(f"watchdog_s={self.watchdog_s}, window_s={self.window_s}: give both or none")
        for name in ("watchdog_s", "window_s", "step_s", "substep_s"):
            value = getattr(self, name)
            if value is not None and not (isfinite(value) and value >= 1e-3):
                raise SpecError(f"{name}={value}: must be finite and at least a millisecond")
        if spent := sorted(signal.tag for signal in self.signals if signal.name == IN_CHARGE):
            raise SpecError(f"signals {spent}: the name {IN_CHARGE!r} belongs to the panel, choose another one")
        if PANEL in dict(self.sections):
            raise SpecError(f"sections: the name {PANEL!r} belongs to the panel, choose another one")
        _refuse_twins("sections", (name for name, _ in self.sections))
        _refuse_twins("signals", (signal.tag for signal in self.signals))
        states = sum(len(physics.state_names) for _, physics in self.sections)
        if len(self.x0) != states or not all(isfinite(value) for value in self.x0):
            raise SpecError(f"x0 has {len(self.x0)} numbers: must be {states} finite ones, one for each state")
        physics_of = dict(self.sections)
        for signal in self.signals:
            if signal.section not in physics_of:
                raise SpecError(f"{signal.tag}: there is no section {signal.section!r}; known: {list(physics_of)}")
            known = names_of(physics_of[signal.section], signal.role)
            if signal.name not in known:
                raise SpecError(f"{signal.tag}: the section has no {signal.role} {signal.name!r}; known: {list(known)}")
        driven = {signal.tag for signal in self.signals if signal.role is Role.DRIVEN}
        wanted = {f"{name}.{one}" for name, physics in self.sections for one in physics.input_names}
        if missing := sorted(wanted - driven):
            raise SpecError(f"signals lack {missing}: every input needs a driven signal, or nobody moves it")

    @property
    def has_panel(self) -> bool:
        """Whether a panel stands between control and the actuators."""
        return self.watchdog_s is not None

    def signals_of(self, *roles: Role) -> tuple[SimulatedSignal, ...]:
        """Signals with one of these roles, in order."""
        return tuple(signal for signal in self.signals if signal.role in roles)


def names_of(physics: SectionPhysics, role: Role) -> tuple[str, ...]:
    """Names that signals of this role can have in a section."""
    match role:
        case Role.MEASURED:
            return physics.output_names
        case Role.DRIVEN:
            return physics.input_names
        case _:
            return physics.disturbance_names


def _refuse_twins(field_name: str, names: Iterable[str]) -> None:
    if twins := sorted(name for name, count in Counter(names).items() if count > 1):
        raise SpecError(f"{field_name} has {twins} more than once: names must be unique")
