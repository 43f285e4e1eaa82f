"""What the panel is set up for, and everything it remembers. Values are in the signal's engineering unit."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace
from enum import StrEnum
from functools import cached_property
from math import isfinite

from sim_plant.panel.charge import TRANSITIONS, Cause, Charge


@dataclass(frozen=True)
class LocalAction:
    """What the panel does with an actuator when control is gone: keep it, or ramp `to` a value at `rate_per_s`.

    Raises:
        ValueError: half a ramp, or a rate that leads nowhere.
    """

    to: float | None = None
    rate_per_s: float | None = None

    def __post_init__(self) -> None:
        if (self.to is None) != (self.rate_per_s is None):
            raise ValueError(
                f"local action to={self.to}, rate_per_s={self.rate_per_s}: give both (ramp) or none (keep)"
            )
        if self.to is not None and not isfinite(self.to):
            raise ValueError(f"local action to={self.to}: must be a finite number")
        if self.rate_per_s is not None and not self.rate_per_s > 0.0:
            raise ValueError(f"local action rate_per_s={self.rate_per_s}: must be above zero")

    def after(self, value: float, elapsed_s: float) -> float:
        """Value of the actuator this much later."""
        if self.to is None or self.rate_per_s is None:
            return value
        reach = self.rate_per_s * elapsed_s
        return self.to if abs(self.to - value) <= reach else value + (reach if self.to > value else -reach)


KEEP = LocalAction()
"""Leave the actuator where it is."""


@dataclass(frozen=True)
class DrivenPoint:
    """One actuator: the panel never lets its command leave [low, high], whoever asks.

    Raises:
        ValueError: an empty span, or a rest value or ramp end outside it.
    """

    tag: str
    section: str
    low: float
    high: float
    rest: float
    local: LocalAction = KEEP

    def __post_init__(self) -> None:
        if not (isfinite(self.low) and isfinite(self.high) and self.low < self.high):
            raise ValueError(f"{self.tag} span [{self.low}, {self.high}]: must be two finite numbers, low below high")
        for name, value in (("rest", self.rest), ("local action to", self.local.to)):
            if value is not None and not self.low <= value <= self.high:
                raise ValueError(f"{self.tag} {name}={value}: must lie in its span [{self.low}, {self.high}]")


@dataclass(frozen=True)
class PanelSettings:
    """Actuators by section, watchdog W and longest validity V in milliseconds.

    Without times nobody supervises: every section is control's for ever, and each value written to an actuator is
    clamped and taken at once. There are such plants; the bench has to be able to stand in for one.

    Raises:
        ValueError: two actuators with one tag, one time without the other, or a time that isn't positive.
    """

    points: tuple[DrivenPoint, ...]
    sections: tuple[str, ...]
    watchdog_ms: int | None = None
    window_ms: int | None = None

    def __post_init__(self) -> None:
        if (self.watchdog_ms is None) != (self.window_ms is None):
            raise ValueError(f"panel watchdog_ms={self.watchdog_ms}, window_ms={self.window_ms}: give both or none")
        for name, value in (("watchdog_ms", self.watchdog_ms), ("window_ms", self.window_ms)):
            if value is not None and value <= 0:
                raise ValueError(f"panel {name}={value}: must be above zero")
        if len(self.point_of) != len(self.points):
            raise ValueError("two driven signals share one tag: tags must be unique")
        if strangers := {point.section for point in self.points} - set(self.sections):
            raise ValueError(f"driven signals of unknown sections {sorted(strangers)}: known are {list(self.sections)}")

    @cached_property
    def point_of(self) -> Mapping[str, DrivenPoint]:
        """Actuator by tag."""
        return {point.tag: point for point in self.points}

    @property
    def supervised(self) -> bool:
        """Whether there is anybody between control and the actuators."""
        return self.watchdog_ms is not None

    @cached_property
    def section_of_bit(self) -> Mapping[str, str]:
        """Section by the tag of its in-charge bit; none without supervision."""
        if not self.supervised:
            return {}
        return {f"{section}.in_charge": section for section in self.sections}


class EventKind(StrEnum):
    """What happened, for those who log it."""

    TRIPPED = "tripped"
    UNTRIPPED = "untripped"
    PERMIT = "permit"
    TAKEN = "taken"
    HANDED_BACK = "handed_back"
    REFUSED = "refused"
    REFUSED_AGAIN = "refused_again"
    """Another one, with none accepted since."""
    ACCEPTED_AGAIN = "accepted_again"
    """The first after one or more refused."""
    CLAMPED = "clamped"


@dataclass(frozen=True)
class PanelEvent:
    """One thing that happened, and the sentence that says so."""

    kind: EventKind
    text: str


@dataclass(frozen=True)
class PanelState:
    """Everything the panel remembers.

    Attributes:
        clock_ms: t, up to which watchdog and local action have run.
        heartbeat: h as last written.
        still_since_ms: t_h, when h last changed or when control, absent before, took its first section.
        permit: whether control may drive at all.
        tripped: the watchdog ran out, and the heartbeat hasn't moved since.
        charge: by section.
        expires_ms: t_e as last written, for those who read it back.
        accepted: k_a.
        restart: whether the next set may carry any k (power-up, trip).
        refusal: why the last set was refused, "" when it was accepted.
        refused: sets refused since the last one accepted.
        clamped: inputs that had to be clamped to their span, modulo 2³².
        commands: what every actuator is told, by tag.
    """

    charge: Mapping[str, Charge]
    commands: Mapping[str, float]
    clock_ms: int = 0
    heartbeat: int = 0
    still_since_ms: int = 0
    permit: bool = True
    tripped: bool = False
    expires_ms: int = 0
    accepted: int = 0
    restart: bool = True
    refusal: str = ""
    refused: int = 0
    clamped: int = 0

    @property
    def control_present(self) -> bool:
        """Whether any section is in charge of control, so that the watchdog counts."""
        return Charge.CONTROL in self.charge.values()

    def in_charge(self, section: str) -> bool:
        """Whether the section's in-charge bit is on."""
        return self.charge[section] is Charge.CONTROL

    def after(self, cause: Cause, sections: Iterable[str]) -> PanelState:
        """The state after this cause came over these sections."""
        moved = {section: TRANSITIONS[self.charge[section], cause] for section in sections}
        return replace(self, charge={**self.charge, **moved})


def power_up(settings: PanelSettings) -> PanelState:
    """Return the panel at power-up: clock at zero, permit on, every actuator at its rest value."""
    return PanelState(
        charge=dict.fromkeys(settings.sections, Charge.REST if settings.supervised else Charge.CONTROL),
        commands={point.tag: point.rest for point in settings.points},
    )
