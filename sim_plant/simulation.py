"""The simulated plant as one: physics, consumers, instruments, actuators, faults and panel, moved step by step.

Time is plant time, nanoseconds since the start. The plant is scanned every Δt (`step_s`), as a PLC scans its inputs and
outputs:

    at t_n          actuators take the panel's commands (unless stuck), consumers draw what they draw
    t_n .. t_n+1    the network is integrated with both held
    at t_n+1        watchdog and local action run, faults end, transmitters are sampled

A request is handled by the panel at its own instant, between two scans; what it accepts reaches the actuators at the
next scan. The whole is deterministic: same specification, same requests at the same instants, same numbers.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import NamedTuple

from sim_plant import panel
from sim_plant.consumers import Consumer, ConsumerState
from sim_plant.fault_table import FaultTable, Reading
from sim_plant.faults import Device, Fault, FaultKind
from sim_plant.instruments import Floats, Instruments, InstrumentsState
from sim_plant.notes import Note, of_fault, of_panel, of_plant
from sim_plant.panel import Outcome, PanelState
from sim_plant.plant import PlantState, advance
from sim_plant.spec import SimulatedPlantSpec
from sim_plant.status import GOOD
from sim_plant.targets import Targets
from sim_plant.wiring import Wiring

NS = 1_000_000_000
MS = 1_000_000


class Sample(NamedTuple):
    """What a reader of a tag gets: value, None when there is none, its status code, and when it was sampled."""

    value: float | int | bool | str | None
    status: int
    time_ns: int


@dataclass(frozen=True)
class SimulationState:
    """Everything that changes.

    Attributes:
        scan: n, number of the last scan.
        plant: the network's state, SI.
        consumers: one for each disturbance that has a profile, in order.
        instruments: one state for all transmitters.
        faults: in force.
        panel: the panel's state.
        actuators: where every actuator is since the last scan, in the order of the driven signals, signal units.
        draws: what every disturbance is since the last scan, in the order of the disturbances, signal units.
        shown: last readings by tag, with whatever faults made of them.
        excesses: in what the plant left the sensible before the last scan, one sentence each.
    """

    scan: int
    plant: PlantState
    consumers: tuple[ConsumerState, ...]
    instruments: InstrumentsState
    faults: FaultTable
    panel: PanelState
    actuators: Floats
    draws: Floats
    shown: Mapping[str, Reading]
    excesses: frozenset[str] = frozenset()


class Simulation:
    """A plant that can be started, scanned, read, written and spoiled; keeps nothing that changes.

    Raises:
        SpecError: see `SimulatedPlantSpec`.
        ValueError: a driven signal's local action or rest value lies outside its span.
    """

    def __init__(self, spec: SimulatedPlantSpec) -> None:
        self.spec = spec
        self.step_ns = round(spec.step_s * NS)
        self._wiring = Wiring(spec)
        self._targets = Targets(spec)
        self._settings = self._wiring.panel_settings()
        self._profiles = tuple(
            (position, Consumer(signal.profile, spec.seed, position))
            for position, signal in enumerate(self._wiring.disturbances)
            if signal.profile is not None
        )
        self._instruments = Instruments(
            [signal.instrument for signal in self._wiring.transmitters],
            [signal.span for signal in self._wiring.transmitters],
            spec.seed,
            self.step_ns / NS,
        )

    def start(self) -> SimulationState:
        """Return the plant at time zero, sampled once: x0, actuators at rest, panel at power-up."""
        plant = self._wiring.start()
        consumers = tuple(consumer.start() for _, consumer in self._profiles)
        faults = FaultTable()
        draws = self._draws(consumers, faults)
        truth = self._wiring.truth(plant, draws)
        instruments, shown = self._sample(self._instruments.start(truth), faults, truth)
        at_power_up = panel.power_up(self._settings)
        actuators = self._actuators(at_power_up, faults)
        return SimulationState(0, plant, consumers, instruments, faults, at_power_up, actuators, draws, shown)

    def time_ns(self, state: SimulationState) -> int:
        """Plant time of the last scan."""
        return state.scan * self.step_ns

    def step(self, state: SimulationState) -> tuple[SimulationState, tuple[Note, ...]]:
        """Go on to the next scan."""
        before, scan = state, state.scan + 1
        time_ns = scan * self.step_ns
        u, w = self._wiring.inputs(before.actuators), self._wiring.drawn(before.draws)
        plant = advance(self._wiring.network, before.plant, u, w, self.step_ns / NS, self.spec.substep_s)
        faults, ended = before.faults.at(time_ns / NS)
        panel_state, events = panel.tick(self._settings, before.panel, time_ns // MS)
        for fault in ended:
            if fault.kind is FaultKind.PERMIT:
                panel_state, more = panel.set_permit(self._settings, panel_state, not fault.on, time_ns // MS)
                events = (*events, *more)
        consumers = tuple(
            consumer.after(one, time_ns / NS)
            for (_, consumer), one in zip(self._profiles, before.consumers, strict=True)
        )
        draws = self._draws(consumers, faults)
        instruments, shown = self._sample(before.instruments, faults, self._wiring.truth(plant, draws))
        actuators = self._actuators(panel_state, faults)
        excesses = self._wiring.excesses(before.plant, plant)
        after = SimulationState(
            scan, plant, consumers, instruments, faults, panel_state, actuators, draws, shown, excesses
        )
        over = (of_fault(f"'{fault}' is over") for fault in ended)
        return after, (*map(of_panel, events), *over, *map(of_plant, sorted(excesses - before.excesses)))

    def skip(self, state: SimulationState, scans: int) -> SimulationState:
        """Let plant time go on while the physics stand still, as after a stop of the process; the panel notices."""
        return replace(state, scan=state.scan + scans)

    def write(
        self, state: SimulationState, values: Sequence[tuple[str, object]], at_ns: int
    ) -> tuple[SimulationState, tuple[Outcome, ...], tuple[Note, ...]]:
        """Hand one request of (tag, value) pairs to the panel, at this plant time.

        Raises:
            ValueError: the time lies before the last request or scan.
        """
        written = panel.write(self._settings, state.panel, values, at_ns // MS)
        outcomes = tuple(
            Outcome.READ_ONLY if outcome is Outcome.UNKNOWN and tag in state.shown else outcome
            for (tag, _), outcome in zip(values, written.outcomes, strict=True)
        )
        return replace(state, panel=written.state), outcomes, tuple(map(of_panel, written.events))

    def provoke(self, state: SimulationState, fault: Fault, at_ns: int) -> tuple[SimulationState, tuple[Note, ...]]:
        """Impose or end a fault, at this plant time; readings and actuators feel it from the next scan.

        Raises:
            FaultError: the plant has no such signal, or it isn't one this fault can act upon.
        """
        self._targets.check(fault)
        faults = state.faults.impose(fault, at_ns / NS, self._held(state, fault))
        notes = (of_fault(f"provoked: '{fault}'"),)
        if fault.on is None:
            return replace(state, faults=faults), notes
        panel_state, events = panel.set_permit(self._settings, state.panel, fault.on, at_ns // MS)
        return replace(state, faults=faults, panel=panel_state), (*notes, *map(of_panel, events))

    def read(self, state: SimulationState, at_ns: int) -> Mapping[str, Sample]:
        """Every tag as a reader at this plant time sees it: readings of the last scan, the panel as it is now."""
        now, _ = panel.tick(self._settings, state.panel, at_ns // MS)
        time_ns = self.time_ns(state)
        shown = {tag: Sample(reading.value, reading.status, time_ns) for tag, reading in state.shown.items()}
        own = {tag: Sample(value, GOOD, at_ns) for tag, value in panel.readings(self._settings, now).items()}
        return {**shown, **own}

    def truth(self, state: SimulationState) -> Mapping[str, float]:
        """What nobody can read: true values of measured signals and disturbances, real positions of actuators."""
        measured = zip(self._wiring.transmitters, self._wiring.truth(state.plant, state.draws), strict=True)
        drawn = zip(self._wiring.disturbances, state.draws, strict=True)
        moved = zip(self._wiring.driven, state.actuators, strict=True)
        return {signal.tag: float(value) for pairs in (measured, drawn, moved) for signal, value in pairs}

    def _held(self, state: SimulationState, fault: Fault) -> Reading:
        """What the device this fault acts upon is at."""
        match fault.kind.devices:
            case (Device.TRANSMITTER,):
                return state.shown[fault.signal]
            case (Device.ACTUATOR,):
                return Reading(float(state.actuators[self._wiring.driven_at[fault.signal]]))
            case _:
                return Reading(None)

    def _draws(self, consumers: tuple[ConsumerState, ...], faults: FaultTable) -> Floats:
        draws = self._wiring.resting_draws()
        for (position, consumer), one in zip(self._profiles, consumers, strict=True):
            draws[position] = consumer.value(one)
        for position, signal in enumerate(self._wiring.disturbances):
            draws[position] = faults.consumer(signal.tag, draws[position])
        return draws

    def _actuators(self, state: PanelState, faults: FaultTable) -> Floats:
        return self._wiring.by_driven(lambda tag: faults.actuator(tag, state.commands[tag]))

    def _sample(
        self, state: InstrumentsState, faults: FaultTable, truth: Floats
    ) -> tuple[InstrumentsState, Mapping[str, Reading]]:
        instruments, values, codes = self._instruments.sample(state, truth)
        rows = zip(self._wiring.transmitters, values.tolist(), codes.tolist(), strict=True)
        return instruments, {
            signal.tag: faults.reading(signal.tag, Reading(value, code)) for signal, value, code in rows
        }
