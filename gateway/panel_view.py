"""What the panel shows in one period, decoded; whatever cannot be read counts as the careful answer."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from math import isfinite, nan

from gateway.design import PlantDesign
from gateway.signals import MISSING, Reading
from gateway.status_codes import Severity, severity
from gateway.tags import in_charge_tag, panel_tag


@dataclass(frozen=True)
class PanelView:
    """One period's panel signals.

    Attributes:
        permit: whether the panel lets us act; unreadable means no.
        clock_ms: the panel's own clock, None when unreadable.
        accepted: counter of the last set it took, None when unreadable.
        refusal: why it refused the last one, empty when it did not.
        tripped: whether it acts by itself since our heartbeat stopped.
        in_charge: per section, whether our inputs reach the actuators; unreadable means no.
        commands: per input, what the actuator is told now, engineering units; NaN when unreadable.
    """

    permit: bool
    clock_ms: int | None
    accepted: int | None
    refusal: str
    tripped: bool
    in_charge: tuple[bool, ...]
    commands: tuple[float, ...]


def view_panel(design: PlantDesign, readings: Mapping[str, Reading]) -> PanelView:
    """Decode the panel's readings. A plant without a panel permits everything and is always in our charge."""

    def good(tag: str) -> object:
        reading = readings.get(tag, MISSING)
        return reading.value if severity(reading.status) is Severity.GOOD else None

    commands = tuple(_number(good(signal.tag)) for signal in design.inputs)
    if design.plant.panel is None:
        everybody = tuple(True for _ in design.plant.sections)
        return PanelView(True, 0, None, "", False, everybody, commands)
    refusal = good(panel_tag("refusal"))
    return PanelView(
        permit=good(panel_tag("permit")) is True,
        clock_ms=_counter(good(panel_tag("clock"))),
        accepted=_counter(good(panel_tag("accepted"))),
        refusal=refusal if isinstance(refusal, str) else "",
        tripped=good(panel_tag("tripped")) is True,
        in_charge=tuple(good(in_charge_tag(section.name)) is True for section in design.plant.sections),
        commands=commands,
    )


def _counter(value: object) -> int | None:
    return value if isinstance(value, int) and not isinstance(value, bool) and value >= 0 else None


def _number(value: object) -> float:
    if isinstance(value, bool) or not isinstance(value, int | float) or not isfinite(value):
        return nan
    return float(value)
