"""Everything `check` finds out about a plant file, as frozen facts, and as the lines that tell them."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from math import isfinite, isnan

from controllers import advise
from controllers.responses import least_locality
from controllers.spectrum import closed_loop_radius
from gateway.cli.dialling import Reached
from gateway.cli.forecast import Forecast, forecast
from gateway.cli.optimum import Distance, distance_from_whole_plant
from gateway.clock import Clock
from gateway.design import PlantDesign
from gateway.plantfile import warnings_of
from gateway.plantfile.plant import Plant, Role, SiteSpec
from gateway.tags import tags_of

MOST_STATES = 400
"""Larger plants are not asked for their closed loop's spectral radius: it is a dense computation of minutes."""


@dataclass(frozen=True)
class Examination:
    """What a plant file amounts to.

    Attributes:
        sections: how many of each kind.
        couplings: how many of each kind.
        signals: how many of each role.
        quantities, rows: of the synthesis.
        locality, least_locality: as asked for, and the least at which every section can be confined.
        distance: from the whole-plant optimum.
        closed_loop_radius: None when it was not computed.
        observer_radius: of the assembled observer.
        coupling_error_spans: one-step error of holding the couplings.
        forecast: of the work per period on this host.
        advice: what the plant lacks or cannot do by itself, one sentence each.
        unsafe: one sentence each.
        fingerprint: of plant file and design.
    """

    sections: Mapping[str, int]
    couplings: Mapping[str, int]
    signals: Mapping[str, int]
    quantities: int
    rows: int
    locality: int
    least_locality: int
    distance: Distance
    closed_loop_radius: float | None
    observer_radius: float
    coupling_error_spans: float
    forecast: Forecast
    advice: tuple[str, ...]
    unsafe: tuple[str, ...]
    fingerprint: str

    @property
    def stable(self) -> bool:
        """Whether no radius that was computed reaches one."""
        return self.observer_radius < 1.0 and (self.closed_loop_radius is None or self.closed_loop_radius < 1.0)

    @property
    def in_time(self) -> bool:
        """Whether the worst period fitted into its budget."""
        return self.forecast.headroom > 0.0


def examine(design: PlantDesign, clock: Clock) -> Examination:
    """Find it all out; takes seconds, more for a large plant."""
    plant, table = design.plant, design.synthesis.table
    states = design.network.a.shape[0]
    return Examination(
        sections=Counter(section.kind for section in plant.sections),
        couplings=Counter(coupling.kind for coupling in plant.couplings),
        signals={str(role): len(plant.signals(role)) for role in Role},
        quantities=len(table.quantities),
        rows=table.count,
        locality=design.synthesis.locality,
        least_locality=least_locality(table, 0, design.synthesis.locality) or 0,
        distance=distance_from_whole_plant(design),
        closed_loop_radius=closed_loop_radius(table, table.data()) if states <= MOST_STATES else None,
        observer_radius=design.observer.radius,
        coupling_error_spans=design.coupling_error,
        forecast=forecast(design, clock),
        advice=tuple(finding.text for finding in advise(design.network, design.synthesis.locality)),
        unsafe=tuple(warnings_of(plant)),
        fingerprint=design.fingerprint,
    )


def lines_of(plant: Plant, found: Examination) -> list[tuple[str, str]]:
    """(what, how it is), in the order of reading; a mark `!` begins what wants attention."""
    return [
        ("sections", _counted(found.sections)),
        ("couplings", _counted(found.couplings) or "none"),
        ("signals", ", ".join(f"{count} {role.replace('_', ' ')}" for role, count in found.signals.items() if count)),
        ("rows", _rows(plant, found)),
        ("localizable", f"yes, at locality {found.locality}; the least that works is {found.least_locality}"),
        ("optimum", _optimum(found.distance)),
        ("closed loop", _closed_loop(found)),
        ("observer", f"spectral radius {found.observer_radius:.4f}"),
        ("held couplings", f"one-step error {found.coupling_error_spans:.1e} of span"),
        ("work per period", _work(found.forecast)),
        *(("site " + site.name, site_line(plant, site)) for site in plant.sites.values()),
        *(("advice", f"! {sentence}") for sentence in found.advice),
        *(("unsafe", f"! {sentence}") for sentence in found.unsafe or ()),
        ("fingerprint", found.fingerprint),
    ]


def site_line(plant: Plant, site: SiteSpec) -> str:
    """Where a site leads."""
    tags = tags_of(plant, site)
    return f"{site.kind}, {site.endpoint}, {len(tags)} addresses such as {tags[0].address}"


def reached_lines(site: SiteSpec, reached: Reached) -> list[tuple[str, str]]:
    """What a dialled site answered."""
    lines = [
        (
            f"dialled {site.name}",
            f"all {reached.tags} addresses are there; {reached.dial_ms:.0f} ms to connect and look at them",
        )
    ]
    if isnan(reached.read_median_ms):
        return [*lines, ("read", f"! none of {reached.unanswered} reads was answered")]
    missed = f"; ! {reached.unanswered} not answered" if reached.unanswered else ""
    lines.append(("read", f"{reached.read_median_ms:.1f} ms median, {reached.read_worst_ms:.1f} ms worst{missed}"))
    if reached.bad:
        lines.append(("bad values", f"! {', '.join(reached.bad)}"))
    return lines


def _counted(counts: Mapping[str, int]) -> str:
    total = sum(counts.values())
    if len(counts) == 1:
        return f"{total} {next(iter(counts))}"
    return f"{total}: {_listed(counts.items())}" if counts else ""


def _listed(pairs: Iterable[tuple[str, int]]) -> str:
    return ", ".join(f"{count} {name}" for name, count in pairs)


def _rows(plant: Plant, found: Examination) -> str:
    horizon = plant.controller.horizon
    return (
        f"{found.rows}: {found.quantities} quantities over {horizon} periods of {plant.period_s * 1e3:g} ms "
        f"({horizon * plant.period_s:g} s ahead)"
    )


def _optimum(distance: Distance) -> str:
    if not isfinite(distance.spans):
        return f"! not known: none of {distance.samples} sampled states could be solved to the end"
    unsettled = f", {distance.unsettled} more not solved to the end" if distance.unsettled else ""
    return (
        f"first inputs within {100 * distance.spans:.2g} % of span of the whole plant's "
        f"({distance.samples - distance.unsettled} sampled states{unsettled})"
    )


def _closed_loop(found: Examination) -> str:
    radius = found.closed_loop_radius
    if radius is None:
        return f"not computed for more than {MOST_STATES} states"
    return f"spectral radius {radius:.4f}" if radius < 1 else f"! unstable: spectral radius {radius:.4f}"


def _work(work: Forecast) -> str:
    text = (
        f"{work.median_ms:.1f} ms median, {work.worst_ms:.1f} ms worst of {work.budget_ms:.0f} ms on this host; "
        f"{work.median_iterations:.0f} iterations, at most {work.most_iterations}"
    )
    return f"{text}; headroom {100 * work.headroom:.0f} %" if work.headroom > 0 else f"! does not fit: {text}"
