"""What each signal is judged by, built once from the plant file.

Numbers in the signal's engineering unit: σ noise (standard deviation), r resolution (smallest difference between two
readings), w width of the span, J the fastest a true value can move per second, Ts the period.

**Range.** A reading may leave the span by 1.25 % below and 3.125 % above: a 4..20 mA transmitter carries measurements
from 3.8 to 20.5 mA (NAMUR NE 43; the percentages follow from the currents). Beyond that it reports a failure.

**Jump.** The difference of two readings m periods apart has noise √2 σ. It is a jump when it exceeds

    J m Ts + 7.6 σ + r,     7.6 = √2 · 5.37,  P(|ξ| > 5.37) = 8e-8 for a standard normal ξ.

`m` counts from the last admitted reading over periods without any; a jumped reading restarts it. A new level is
believed after it has persisted for `readmit_after` readings, each within one period's allowance of the one before.

**Frozen.** A living transmitter repeats a reading exactly only when its noise falls into the same step of its
resolution. Whatever the truth does, the next reading repeats the present one with probability at most

    q = erf(r / (2 √2 σ))         (the noise within half a step of the middle of a step)

so n equal readings in a row have at most the probability q^(n−1). A signal is frozen after

    n = 1 + ⌈ln α / ln q⌉,  at least 3,   α = 1e-7 per period                                  (F)

equal readings: a false alarm less often than once in ten million periods of one signal. So a freeze goes unnoticed for
n − 1 periods, during which the repeated value is believed; (F) is at most two readings above the exact probability's n.
Once proven, the value is worth nothing, and the repeats that were believed count as unusable in arrears.

The resolution is declared or learned, whichever is coarser: the smallest step seen so far is never finer than the true
one, so an undeclared coarse converter costs time to notice a freeze, not false alarms. Nothing is taken to resolve
better than 16 bits of its span (practice, no source). White noise is assumed; a transmitter that filters its noise
repeats more often, and its declared σ must be that of one reading against the next, divided by √2.

When the noise says little (σ = 0, or n above 50), a measured signal is frozen once it stood exactly still for 10
readings while a neighbour moved by 5 % of its span (practice, no source). A measured disturbance without noise cannot
be judged at all: nothing says that it must move.

**Stale.** The source timestamp marks the last change (OPC 10000-4, 7.11), so an old one proves nothing. A value is
stale when the peer's server timestamp, where there is one, or the panel's clock stood still for `stale_after` readings,
or the server timestamp went back. A link that hands over remembered values must leave the server timestamp out.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil, erf, isfinite, log, sqrt

from gateway.plantfile.plant import Plant, Role, Signal

JUMP_SIGMAS = 7.6
LEAST_READINGS = 3
MOST_READINGS = 50


@dataclass(frozen=True)
class AdmitSettings:
    """Numbers of the admission; counts in periods.

    Attributes:
        false_alarm: α of (F), per period and signal.
        below_span: how far a reading may lie below the span, fraction of its width.
        above_span: the same above.
        stale_after: readings without a sign of life from the peer.
        readmit_after: consecutive readings at a new level until a jump is believed. More than `blind_after`, so that a
            person sees the section freeze before it is driven by the new level.
        still_readings: readings a signal without noise stands still for, while a neighbour moves.
        neighbour_spans: how far that neighbour moves, fraction of its span.
        converter_bits: the best resolution anything is believed to have.
    """

    false_alarm: float = 1e-7
    below_span: float = 0.0125
    above_span: float = 0.03125
    stale_after: int = 3
    readmit_after: int = 5
    still_readings: int = 10
    neighbour_spans: float = 0.05
    converter_bits: int = 16


DEFAULTS = AdmitSettings()


def readings_until_frozen(noise: float, resolution: float, false_alarm: float = DEFAULTS.false_alarm) -> int | None:
    """How many equal readings prove a freeze, (F); None when the noise says too little.

    Args:
        noise: σ, zero or above, in the unit of `resolution`.
        resolution: r, zero or above.
        false_alarm: α, probability per period of calling a living signal frozen.

    Raises:
        ValueError: an argument outside its range.
    """
    if not (isfinite(noise) and noise >= 0):
        raise ValueError(f"noise = {noise}: must be a finite number, zero or above")
    if not (isfinite(resolution) and resolution >= 0):
        raise ValueError(f"resolution = {resolution}: must be a finite number, zero or above")
    if not 0 < false_alarm < 1:
        raise ValueError(f"false_alarm = {false_alarm}: must be a probability between 0 and 1, both excluded")
    if noise == 0:
        return None
    repeats = erf(resolution / noise / (2 * sqrt(2)))
    if repeats <= 0:
        return LEAST_READINGS
    if repeats >= 1:
        return None
    readings = max(LEAST_READINGS, 1 + ceil(log(false_alarm) / log(repeats)))
    return readings if readings <= MOST_READINGS else None


@dataclass(frozen=True, slots=True)
class SignalRule:
    """What one signal is judged by, engineering units.

    Attributes:
        low, high: readings outside are out of range.
        jump_per_period: J Ts, infinite when the plant file names none.
        jump_margin: noise allowed on top of it.
        noise: σ.
        resolution: r as declared, no finer than the converter's.
        neighbours: positions in the plan of the measured signals that should move along with it.
        moved: how far the signal must move to count as a neighbour that moved.
        sees: whether its section is blind without it.
    """

    tag: str
    section: str
    low: float
    high: float
    jump_per_period: float
    jump_margin: float
    noise: float
    resolution: float
    neighbours: tuple[int, ...]
    moved: float
    sees: bool


@dataclass(frozen=True)
class AdmitPlan:
    """Everything the admission of a plant's readings needs to know beforehand.

    Attributes:
        rules: one per signal that is read, measured ones first.
        blind_after: consecutive unusable periods of a measured signal until its section is blind.
        watches_panel: whether there is a panel whose clock must run.
    """

    rules: tuple[SignalRule, ...]
    blind_after: int
    watches_panel: bool
    settings: AdmitSettings


def plan_admission(plant: Plant, settings: AdmitSettings = DEFAULTS) -> AdmitPlan:
    """Build the rules for the measured signals and measured disturbances of a plant, in this order."""
    measured = plant.signals(Role.MEASURED)
    near: dict[str, set[str]] = {section.name: {section.name} for section in plant.sections}
    for coupling in plant.couplings:
        near[coupling.one].add(coupling.other)
        near[coupling.other].add(coupling.one)
    rules = []
    for signal in (*measured, *plant.signals(Role.MEASURED_DISTURBANCE)):
        sees = signal.role is Role.MEASURED
        neighbours = tuple(
            position
            for position, other in enumerate(measured)
            if sees and other.section in near[signal.section] and other.tag != signal.tag
        )
        rules.append(_rule(signal, neighbours, sees, plant.period_s, settings))
    return AdmitPlan(tuple(rules), plant.hold.blind_after, plant.panel is not None, settings)


def _rule(
    signal: Signal, neighbours: tuple[int, ...], sees: bool, period_s: float, settings: AdmitSettings
) -> SignalRule:
    resolution = max(signal.instrument.resolution, signal.width / 2**settings.converter_bits)
    return SignalRule(
        tag=signal.tag,
        section=signal.section,
        low=signal.span[0] - settings.below_span * signal.width,
        high=signal.span[1] + settings.above_span * signal.width,
        jump_per_period=signal.jump_per_s * period_s,
        jump_margin=JUMP_SIGMAS * signal.noise + resolution,
        noise=signal.noise,
        resolution=resolution,
        neighbours=neighbours,
        moved=max(settings.neighbour_spans * signal.width, JUMP_SIGMAS * signal.noise),
        sees=sees,
    )
