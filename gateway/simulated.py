"""From a plant file to the specification of its simulated twin, and to the addresses it is served at.

The twin is the plant file's own physics, nonlinear, with everything the file says about instruments, consumers and the
panel. It starts at rest; `away_spans` moves that rest off the targets, so that a controller has something to settle:

    output i of p starts at   target + away · width · sin(2π (i + 1/2) / p)

a wave along the plant, gentle enough that neighbours differ little and couplings stay inside the range of their laws.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from math import pi, sin

from gateway.design import operating_point_of, physics_of
from gateway.links.opcua_addresses import parse
from gateway.plantfile.plant import HoldAction, Plant, Role, Scale, Signal, SiteSpec
from sim_plant import consumers, instruments, spec
from sim_plant.panel import KEEP, LocalAction
from sim_plant.tags import PANEL_TAGS, Tag

LONGEST_STEP_S = 0.05
STEPS_PER_PERIOD = 5


def simulated_plant(plant: Plant, *, away_spans: float = 0.0) -> spec.SimulatedPlantSpec:
    """Build the specification of a plant's simulated twin.

    Args:
        plant: the resolved plant file.
        away_spans: amplitude of the start's distance from the targets, as a fraction of span.

    Raises:
        EquilibriumError: the plant cannot rest where it should start.
        ValueError: what the plant file says cannot be simulated; names the signal, the value and the fix.
    """
    physics = physics_of(plant)
    point = operating_point_of(_moved(plant, away_spans), physics)
    inputs = dict(zip(physics.u_tags, point.u, strict=True))
    return spec.SimulatedPlantSpec(
        name=plant.name,
        sections=tuple(physics.sections),
        couplings=tuple(physics.couplings),
        signals=tuple(_signal(one, inputs.get(one.tag)) for section in plant.sections for one in section.signals),
        x0=tuple(float(value) for value in point.x),
        watchdog_s=None if plant.panel is None else plant.panel.watchdog_s,
        window_s=None if plant.panel is None else plant.panel.window_s,
        seed=plant.bench.seed,
        step_s=min(LONGEST_STEP_S, plant.period_s / STEPS_PER_PERIOD),
        substep_s=plant.bench.substep_s,
    )


def identifiers_of(tags: tuple[Tag, ...], site: SiteSpec) -> Mapping[str, str]:
    """Say where a site expects every tag of its simulated plant: tag -> string identifier.

    Raises:
        ValueError: an address is none of a string in the site's own namespace, which is all a simulated plant serves.
    """
    own = {tag.tag for tag in PANEL_TAGS}
    identifiers = {}
    for tag in tags:
        text = site.panel_address_of(tag.name) if tag.tag in own else site.address_of(tag.section, tag.name)
        address = parse(text, site.namespace)
        if not isinstance(address.identifier, str) or address.namespace != site.namespace:
            raise ValueError(
                f"site {site.name}, {tag.tag}: the address {text!r} cannot be simulated; "
                f"give a string identifier in the site's namespace {site.namespace}"
            )
        identifiers[tag.tag] = address.identifier
    return identifiers


def _moved(plant: Plant, away_spans: float) -> Plant:
    """The plant with the targets it is to start from."""
    measured = plant.signals(Role.MEASURED)
    start = {
        signal.tag: _resting(signal) + away_spans * signal.width * sin(2 * pi * (i + 0.5) / len(measured))
        for i, signal in enumerate(measured)
    }
    return replace(
        plant,
        sections=tuple(
            replace(
                section,
                signals=tuple(
                    replace(signal, target=start[signal.tag]) if signal.tag in start else signal
                    for signal in section.signals
                ),
            )
            for section in plant.sections
        ),
    )


def _resting(signal: Signal) -> float:
    """Where a measured signal rests: at its target, mid-span without one."""
    return (signal.span[0] + signal.span[1]) / 2 if signal.target is None else signal.target


def _signal(signal: Signal, input_si: float | None) -> spec.SimulatedSignal:
    rest = signal.rest if input_si is None else signal.scale.to_engineering(float(input_si))
    if input_si is not None and not signal.hard[0] <= rest <= signal.hard[1]:
        raise ValueError(
            f"{signal.tag} = {rest:.4g} {signal.unit} would hold the plant at its start, outside the hard limits "
            f"[{signal.hard[0]:g}, {signal.hard[1]:g}]; give targets the plant can rest at"
        )
    return spec.SimulatedSignal(
        section=signal.section,
        name=signal.name,
        role=spec.Role(signal.role),
        unit=signal.unit,
        span=signal.span,
        scale=_scale(signal.scale),
        rest=rest,
        instrument=instruments.Instrument(
            signal.instrument.noise, signal.instrument.resolution, signal.instrument.lag_s
        ),
        profile=None
        if signal.profile is None
        else consumers.Profile(
            signal.profile.low, signal.profile.high, signal.profile.mean_low_s, signal.profile.mean_high_s
        ),
        local=_local_action(signal),
    )


def _scale(scale: Scale) -> spec.Scale:
    return spec.Scale(scale.factor, scale.offset)


def _local_action(signal: Signal) -> LocalAction:
    """What the panel does by itself: the signal's own ramp; for anything else it leaves the actuator where it is."""
    hold = signal.safe_hold
    if hold is None or hold.action is not HoldAction.RAMP:
        return KEEP
    return LocalAction(hold.to, hold.rate_per_s)
