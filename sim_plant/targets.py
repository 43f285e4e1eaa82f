"""Which faults a plant's signals can have."""

from __future__ import annotations

import difflib

from sim_plant.faults import ALL, PERMIT, Device, Fault, FaultError
from sim_plant.spec import Role, SimulatedPlantSpec


class Targets:
    """The devices of a plant, by signal."""

    def __init__(self, spec: SimulatedPlantSpec) -> None:
        transmitters = {signal.tag for signal in spec.signals if signal.role.has_transmitter}
        actuators = {signal.tag for signal in spec.signals_of(Role.DRIVEN)}
        consumers = {signal.tag for signal in spec.signals if signal.role.is_disturbance}
        self._has_panel = spec.has_panel
        self._tags = {
            Device.TRANSMITTER: transmitters,
            Device.ACTUATOR: actuators,
            Device.CONSUMER: consumers,
        }

    def check(self, fault: Fault) -> None:
        """Refuse what the plant hasn't got.

        Raises:
            FaultError: names the signal, what the fault acts upon, and the nearest signal that has one.
        """
        if Device.PERMIT in fault.kind.devices and not self._has_panel:
            raise FaultError(f"'{fault}': this plant has no panel, so there is no permit to give or withdraw")
        if fault.signal in (ALL, PERMIT):
            return
        fitting = set().union(*(self._tags[device] for device in fault.kind.devices))
        if fault.signal in fitting:
            return
        known = any(fault.signal in tags for tags in self._tags.values())
        devices = " or ".join(fault.kind.devices)
        what = f"has no {devices}" if known else "is no signal of this plant"
        nearest = difflib.get_close_matches(fault.signal, sorted(fitting), n=1, cutoff=0.3)
        hint = f"nearest: '{nearest[0]}'" if nearest else f"this plant has no {devices} at all"
        raise FaultError(f"'{fault}': '{fault.signal}' {what}, '{fault.kind}' acts upon a {devices} ({hint})")
