"""What a plant file may legally say and its writer may regret: shown by `check`, never in the way."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator
from math import isinf

from gateway.plantfile.plant import HoldAction, Plant, Role, Signal, SiteKind


def warnings_of(plant: Plant) -> list[str]:
    """Return one sentence for everything that is legal and unsafe; equal ones of several sections are joined."""
    by_remark: dict[str, list[str]] = {}
    for signal in plant.signals(Role.DRIVEN):
        for remark in _of_driven(signal, plant):
            by_remark.setdefault(remark, []).append(signal.tag)
    joined = [f"{', '.join(tags)}: {remark}" for remark, tags in by_remark.items()]
    return [*joined, *_of_panel(plant), *_of_sites(plant), *_of_couplings(plant)]


def _of_driven(signal: Signal, plant: Plant) -> Iterator[str]:
    if signal.safe_hold is None:
        yield "no safe_hold, so a held section keeps its last input for ever"
    elif signal.safe_hold.action is HoldAction.HAND_BACK and plant.panel is None:
        yield "handed back when held, but there is no [panel] to take it"
    if isinf(signal.rate_per_s):
        yield "no rate, so it may jump from one limit to the other in one period"
    elif signal.safe_hold is not None and (signal.safe_hold.rate_per_s or 0.0) > signal.rate_per_s:
        yield "its safe hold ramps faster than its rate allows; the rate wins"


def _of_panel(plant: Plant) -> Iterator[str]:
    if plant.panel is None:
        for site in plant.sites.values():
            yield f"site {site.name}: no [panel], so nothing acts on the plant's side when this process dies"
    elif plant.panel.window_s < plant.cutoffs.write * plant.period_s:
        yield (
            f"panel: inputs expire after {plant.panel.window_s:g} s, but may be written as late as "
            f"{plant.cutoffs.write * plant.period_s:g} s into the period; late ones will be refused"
        )


def _of_sites(plant: Plant) -> Iterator[str]:
    for site in plant.sites.values():
        if site.kind is SiteKind.LIVE and site.insecure:
            yield f"site {site.name}: insecure, so anybody on its network can write to the plant"


def _of_couplings(plant: Plant) -> Iterator[str]:
    for pair, count in Counter(frozenset((coupling.one, coupling.other)) for coupling in plant.couplings).items():
        if count > 1:
            yield f"{' and '.join(sorted(pair))}: coupled {count} times"
