"""The faults in force: which, until when, and what they do to a reading, an actuator or a consumer."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from math import nan
from typing import NamedTuple

from sim_plant.faults import ALL, Device, Fault, FaultKind
from sim_plant.status import GOOD, NO_COMMUNICATION


class Reading(NamedTuple):
    """A value in the signal's unit, None when there is none, and its status code."""

    value: float | None
    status: int = GOOD


@dataclass(frozen=True)
class Active:
    """One fault in force; `held` is what a frozen transmitter or a stuck actuator stays at."""

    fault: Fault
    until_s: float | None
    held: Reading


@dataclass(frozen=True)
class FaultTable:
    """Faults in force by device and signal, at most one each."""

    active: Mapping[tuple[Device, str], Active] = field(default_factory=dict)

    def impose(self, fault: Fault, time_s: float, held: Reading) -> FaultTable:
        """Return the table after this line, given at this time while the device was at `held`."""
        kept = {
            key: one
            for key, one in self.active.items()
            if key[0] not in fault.kind.devices or fault.signal not in (key[1], ALL)
        }
        if fault.kind in (FaultKind.CLEAR, FaultKind.RELEASE):
            return FaultTable(kept)
        until_s = None if fault.duration_s is None else time_s + fault.duration_s
        (device,) = fault.kind.devices
        return FaultTable({**kept, (device, fault.signal): Active(fault, until_s, held)})

    def at(self, time_s: float) -> tuple[FaultTable, tuple[Fault, ...]]:
        """Return the table at this time, and the faults that have ended by themselves since."""
        over = {key: one for key, one in self.active.items() if one.until_s is not None and one.until_s <= time_s}
        if not over:
            return self, ()
        left = {key: one for key, one in self.active.items() if key not in over}
        return FaultTable(left), tuple(one.fault for one in over.values())

    def reading(self, tag: str, true: Reading) -> Reading:
        """What a transmitter shows that would read this without fault."""
        one = self.active.get((Device.TRANSMITTER, tag))
        if one is None:
            return true
        match one.fault:
            case Fault(kind=FaultKind.BIAS, value=float(bias)) if true.value is not None:
                return Reading(true.value + bias, true.status)
            case Fault(kind=FaultKind.FREEZE):
                return one.held
            case Fault(kind=FaultKind.NAN):
                return Reading(nan)
            case _:
                return Reading(None, NO_COMMUNICATION)

    def actuator(self, tag: str, command: float) -> float:
        """Where an actuator really is that is told this."""
        one = self.active.get((Device.ACTUATOR, tag))
        return command if one is None or one.held.value is None else one.held.value

    def consumer(self, tag: str, profile: float) -> float:
        """What a consumer takes whose profile says this."""
        one = self.active.get((Device.CONSUMER, tag))
        return profile if one is None or one.fault.value is None else one.fault.value
