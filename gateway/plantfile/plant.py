"""The plant a plant file describes, read, checked and resolved: what every other room works from.

Numbers at signals are in the signal's own engineering unit; `to_physics` turns them into the unit the physics
computes in (SI). Physics parameters are in SI already. Absent limits are infinities, absent choices are None.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from enum import StrEnum
from math import inf


class Role(StrEnum):
    """What a signal is to the controller."""

    MEASURED = "measured"
    DRIVEN = "driven"
    MEASURED_DISTURBANCE = "measured_disturbance"
    UNMEASURED_DISTURBANCE = "unmeasured_disturbance"


class HoldAction(StrEnum):
    """What a held section does with an input."""

    KEEP = "keep"
    RAMP = "ramp"
    HAND_BACK = "hand_back"


@dataclass(frozen=True)
class Scale:
    """Affine unit conversion, physics value = factor * engineering value + offset."""

    factor: float = 1.0
    offset: float = 0.0

    def to_physics(self, value: float) -> float:
        """Convert an engineering value to the physics unit."""
        return self.factor * value + self.offset

    def to_engineering(self, value: float) -> float:
        """Convert a physics value to the engineering unit."""
        return (value - self.offset) / self.factor


@dataclass(frozen=True)
class SafeHold:
    """Safe-hold action of one driven signal; `to` and `rate_per_s` are set for a ramp only."""

    action: HoldAction = HoldAction.KEEP
    to: float | None = None
    rate_per_s: float | None = None


@dataclass(frozen=True)
class Instrument:
    """What the simulated transmitter does to a value: noise (standard deviation), resolution, first-order lag."""

    noise: float = 0.0
    resolution: float = 0.0
    lag_s: float = 0.0


@dataclass(frozen=True)
class Profile:
    """Seeded two-level profile of a simulated consumer: random dwell times with these means."""

    low: float
    high: float
    mean_low_s: float
    mean_high_s: float


@dataclass(frozen=True)
class Signal:
    """One signal of one section, numbers in `unit`; `(−inf, inf)` means no limit."""

    section: str
    name: str
    role: Role
    unit: str
    scale: Scale
    span: tuple[float, float]
    hard: tuple[float, float] = (-inf, inf)
    soft: tuple[float, float] = (-inf, inf)
    soft_price: float = 0.0
    target: float | None = None
    price: float = 0.0
    move_price: float = 0.0
    rate_per_s: float = inf
    jump_per_s: float = inf
    noise: float = 0.0
    rest: float = 0.0
    safe_hold: SafeHold | None = None
    instrument: Instrument = field(default_factory=Instrument)
    profile: Profile | None = None

    @property
    def tag(self) -> str:
        """Name of the signal in logs, journal and requests."""
        return f"{self.section}.{self.name}"

    @property
    def width(self) -> float:
        """Width of the span, the unit of residuals."""
        return self.span[1] - self.span[0]


@dataclass(frozen=True)
class SectionSpec:
    """One section: its physics, SI parameters and signals."""

    name: str
    kind: str
    physics: str
    parameters: dict[str, float]
    signals: tuple[Signal, ...]

    def signals_of(self, role: Role) -> tuple[Signal, ...]:
        """Signals with this role, in the order of the physics."""
        return tuple(signal for signal in self.signals if signal.role is role)


@dataclass(frozen=True)
class CouplingSpec:
    """One physical connection between two sections, SI parameters."""

    one: str
    other: str
    kind: str
    parameters: dict[str, float]


@dataclass(frozen=True)
class RowWeights:
    """Weights of the split's norm by class of row (synthesis, section 4)."""

    output: float = 3.0
    input: float = 1.0
    move: float = 3.0


@dataclass(frozen=True)
class ControllerSpec:
    """Settings of the synthesis and of the observer."""

    horizon: int
    locality: int
    rho: float = 0.3
    relax: float = 1.6
    weights: RowWeights = field(default_factory=RowWeights)
    tolerance_spans: float = 2e-3
    max_iterations: int = 400
    wander: float = 0.1
    """Disturbance random walk per period, as a multiple of the measurement noise."""


@dataclass(frozen=True)
class Cutoffs:
    """When each phase must be done, as a fraction of the period counted from its start."""

    gather: float = 0.3
    synthesise: float = 0.6
    write: float = 0.9


@dataclass(frozen=True)
class HoldSpec:
    """Numbers of the hold table, in periods."""

    latch_after: int = 3
    latch_window: int = 20
    clear_for: int = 5
    blind_after: int = 3


@dataclass(frozen=True)
class PanelSpec:
    """What the panel is asked to do: watchdog on the heartbeat, validity window of a set of inputs."""

    watchdog_s: float
    window_s: float


class SiteKind(StrEnum):
    """Where the signals of a site lead."""

    BENCH = "bench"
    LIVE = "live"


@dataclass(frozen=True)
class SiteSpec:
    """One site: where the signals lead and by which link."""

    name: str
    kind: SiteKind
    link: str
    endpoint: str
    namespace: str
    address: str
    panel_address: str
    overrides: dict[str, str] = field(default_factory=dict)
    insecure: bool = False
    call_timeout_s: float = 0.2

    def address_of(self, section: str, signal: str) -> str:
        """Address of a section's signal on this site."""
        override = self.overrides.get(f"{section}.{signal}")
        return override if override is not None else self.address.format(section=section, signal=signal)

    def panel_address_of(self, signal: str) -> str:
        """Address of one of the panel's own signals on this site."""
        override = self.overrides.get(f"panel.{signal}")
        return override if override is not None else self.panel_address.format(signal=signal)


@dataclass(frozen=True)
class BenchSpec:
    """Settings of the simulated plant."""

    seed: int = 1
    substep_s: float = 0.05


@dataclass(frozen=True)
class Plant:
    """A whole plant file, resolved."""

    name: str
    period_s: float
    sections: tuple[SectionSpec, ...]
    couplings: tuple[CouplingSpec, ...]
    controller: ControllerSpec
    cutoffs: Cutoffs
    hold: HoldSpec
    panel: PanelSpec | None
    sites: dict[str, SiteSpec]
    bench: BenchSpec

    def section(self, name: str) -> SectionSpec:
        """Return the section of this name.

        Raises:
            KeyError: no section has this name.
        """
        for section in self.sections:
            if section.name == name:
                return section
        raise KeyError(name)

    def signals(self, role: Role) -> tuple[Signal, ...]:
        """All signals with this role, by section in plant order, within a section in the order of its physics."""
        return tuple(signal for section in self.sections for signal in section.signals_of(role))
