"""Where the signals of a plant are in the flat vectors of its network, and their units.

u, w, y     inputs, disturbances and outputs of the network, flat, SI
driven      what actuators are at, signal units, in the order of the driven signals
draws       what disturbances are, signal units, in the order of the disturbances
truth       what transmitters look at, signal units, in the order of the signals that have one
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from math import ceil

import numpy as np

from sim_plant.instruments import Floats
from sim_plant.panel import DrivenPoint, PanelSettings
from sim_plant.plant import Network, PlantState
from sim_plant.spec import Role, SimulatedPlantSpec, SimulatedSignal


class Wiring:
    """Built once from a specification; keeps nothing that changes."""

    def __init__(self, spec: SimulatedPlantSpec) -> None:
        self._spec = spec
        self.network = Network(spec.sections, spec.couplings)
        self.driven = spec.signals_of(Role.DRIVEN)
        self.driven_at: Mapping[str, int] = {signal.tag: at for at, signal in enumerate(self.driven)}
        self.disturbances = spec.signals_of(Role.MEASURED_DISTURBANCE, Role.UNMEASURED_DISTURBANCE)
        self.transmitters = spec.signals_of(Role.MEASURED, Role.MEASURED_DISTURBANCE)
        at_u = {tag: at for at, tag in enumerate(self.network.u_tags)}
        at_w = {tag: at for at, tag in enumerate(self.network.w_tags)}
        at_y = {tag: at for at, tag in enumerate(self.network.y_tags)}
        self._u = np.array([at_u[signal.tag] for signal in self.driven], dtype=np.intp)
        self._w = np.array([at_w[signal.tag] for signal in self.disturbances], dtype=np.intp)
        self._many_u, self._many_w = len(at_u), len(at_w)
        # Transmitters look at outputs and disturbances alike: places in (y, w) laid end to end.
        self._seen = np.array(
            [
                at_y[signal.tag] if signal.role is Role.MEASURED else len(at_y) + at_w[signal.tag]
                for signal in self.transmitters
            ],
            dtype=np.intp,
        )
        self._driven_scale = _scales(self.driven)
        self._draw_scale = _scales(self.disturbances)
        self._seen_scale = _scales(self.transmitters)

    def panel_settings(self) -> PanelSettings:
        """Return what the panel of this plant is set up for; without times it only passes values on."""
        points = tuple(
            DrivenPoint(signal.tag, signal.section, *signal.span, signal.rest, signal.local) for signal in self.driven
        )
        sections = tuple(name for name, _ in self._spec.sections)
        if self._spec.watchdog_s is None or self._spec.window_s is None:
            return PanelSettings(points, sections)
        return PanelSettings(points, sections, ceil(self._spec.watchdog_s * 1000), ceil(self._spec.window_s * 1000))

    def start(self) -> PlantState:
        """Return the network at x0."""
        return PlantState.start(self.network, np.array(self._spec.x0, dtype=float))

    def inputs(self, actuators: Floats) -> Floats:
        """Return u for what the actuators are at."""
        u = np.zeros(self._many_u)
        u[self._u] = self._driven_scale[0] * actuators + self._driven_scale[1]
        return u

    def drawn(self, draws: Floats) -> Floats:
        """Return w for what the disturbances are."""
        w = np.zeros(self._many_w)
        w[self._w] = self._draw_scale[0] * draws + self._draw_scale[1]
        return w

    def truth(self, plant: PlantState, draws: Floats) -> Floats:
        """Return what the transmitters look at."""
        seen = np.concatenate([self.network.outputs(plant.x), self.drawn(draws)])[self._seen]
        truth: Floats = (seen - self._seen_scale[1]) / self._seen_scale[0]
        return truth

    def excesses(self, before: PlantState, after: PlantState) -> frozenset[str]:
        """Say in what the plant left the sensible in between: over a rim, or beyond the range of a coupling's law."""
        over = np.flatnonzero(after.spilled_m3 > before.spilled_m3)
        beyond = np.flatnonzero(~self.network.in_range(after.x))
        couplings = self._spec.couplings
        return frozenset(f"{self.network.names[at]} runs over its rim" for at in over) | frozenset(
            f"the flow between {couplings[at][0]} and {couplings[at][1]} left the range of its law" for at in beyond
        )

    def resting_draws(self) -> Floats:
        """Return what the disturbances are without profiles and faults."""
        return np.array([signal.rest for signal in self.disturbances], dtype=float)

    def by_driven(self, value_of: Callable[[str], float]) -> Floats:
        """Return one value for each driven signal."""
        return np.array([value_of(signal.tag) for signal in self.driven], dtype=float)


def _scales(signals: Sequence[SimulatedSignal]) -> tuple[Floats, Floats]:
    """Factors and offsets from signal units to SI."""
    factors = np.array([signal.scale.factor for signal in signals], dtype=float)
    offsets = np.array([signal.scale.offset for signal in signals], dtype=float)
    return factors, offsets
