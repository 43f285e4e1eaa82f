"""The next inputs of a section on safe hold: keep, ramp to the safe value, or hand back to the panel.

    keep        v(k+1) = v(k)
    ramp        v(k+1) = v(k) + clip(to' − v(k), −r Ts, r Ts),   r = min(ramp rate, the input's own rate limit)
                to' = the safe value, or the edge of authority's band nearest to it
    hand back   nothing is written; the panel's local action drives the whole section

`v` is what was last written, in the signal's engineering unit; `Ts` the period in seconds. Handing back is also the
answer whenever the action cannot be carried out: nobody knows what was written last, or the next value lies outside the
hard limits or the band. A panel takes a section as a whole (one in-charge bit), so one input handed back hands back
all of them.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from math import inf, isfinite
from types import MappingProxyType

from gateway.plantfile.plant import HoldAction, SafeHold, Signal


@dataclass(frozen=True, slots=True)
class HeldInput:
    """What one input on hold does next.

    Attributes:
        value: what to write, None when handed back.
        settled: whether the action has come to rest, so that the same value follows from now on.
    """

    value: float | None
    settled: bool = True

    @property
    def hand_back(self) -> bool:
        """Whether the panel is to drive it."""
        return self.value is None


@dataclass(frozen=True, slots=True)
class HeldSection:
    """What a section on hold writes next, by tag; empty when it is handed back."""

    values: Mapping[str, float] = field(default_factory=dict)
    hand_back: bool = False
    settled: bool = True


HANDED_BACK = HeldInput(None)
NO_BAND = (-inf, inf)
NO_BANDS: Mapping[str, tuple[float, float]] = MappingProxyType({})


def next_input(
    signal: Signal, last_written: float | None, period_s: float, band: tuple[float, float] = NO_BAND
) -> HeldInput:
    """Next value of one driven signal on hold.

    Args:
        signal: the input; without a safe-hold action it keeps its value.
        last_written: what was written last or found at take-over, engineering units; None or not finite when unknown.
        period_s: time until the value after this one, seconds.
        band: authority's band, engineering units.

    Raises:
        ValueError: the period is not a positive number, or a ramp lacks its target or its rate.
    """
    if not (isfinite(period_s) and period_s > 0):
        raise ValueError(f"period_s = {period_s}: a period must be a positive number of seconds")
    hold = signal.safe_hold if signal.safe_hold is not None else SafeHold()
    if hold.action is HoldAction.HAND_BACK or last_written is None or not isfinite(last_written):
        return HANDED_BACK
    value, settled = last_written, True
    if hold.action is HoldAction.RAMP:
        to, rate_per_s = _ramp_of(signal, hold)
        to = min(max(to, band[0]), band[1])
        most = min(rate_per_s, signal.rate_per_s) * period_s
        settled = abs(to - last_written) <= most
        value = to if settled else last_written + (most if to > last_written else -most)
    low, high = max(signal.hard[0], band[0]), min(signal.hard[1], band[1])
    return HeldInput(value, settled) if low <= value <= high else HANDED_BACK


def next_inputs(
    signals: Sequence[Signal],
    last_written: Mapping[str, float],
    period_s: float,
    bands: Mapping[str, tuple[float, float]] = NO_BANDS,
) -> HeldSection:
    """Next values of one section's driven signals on hold, all or none.

    Args:
        signals: the driven signals of one section.
        last_written: last written value by tag, engineering units; a tag is absent when nobody knows.
        period_s: the period, seconds.
        bands: authority's band by tag, absent without one.

    Raises:
        ValueError: as `next_input`.
    """
    held = {
        signal.tag: next_input(signal, last_written.get(signal.tag), period_s, bands.get(signal.tag, NO_BAND))
        for signal in signals
    }
    values = {tag: one.value for tag, one in held.items() if one.value is not None}
    if len(values) < len(held):
        return HeldSection(hand_back=True)
    return HeldSection(values, settled=all(one.settled for one in held.values()))


def path(
    signal: Signal, last_written: float | None, period_s: float, steps: int, band: tuple[float, float] = NO_BAND
) -> tuple[float, ...] | None:
    """The next `steps` values of an input on hold: what its neighbours plan around. None when it is handed back."""
    values: list[float] = []
    for _ in range(steps):
        held = next_input(signal, last_written, period_s, band)
        if held.value is None:
            return None
        last_written = held.value
        values.append(held.value)
    return tuple(values)


def _ramp_of(signal: Signal, hold: SafeHold) -> tuple[float, float]:
    if hold.to is None or not isfinite(hold.to):
        raise ValueError(f"{signal.tag}: safe hold ramps to {hold.to}: give the value to ramp to")
    if hold.rate_per_s is None or not hold.rate_per_s > 0:
        raise ValueError(f"{signal.tag}: safe hold ramps at {hold.rate_per_s} per second: give a rate above zero")
    return hold.to, hold.rate_per_s
