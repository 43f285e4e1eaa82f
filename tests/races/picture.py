"""The picture: time of one period over the number of sections, all racers, one panel per plant."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from statistics import median, quantiles

import matplotlib as mpl
from matplotlib.figure import Figure

from tests.races.meeting import Result
from tests.races.race import by_racer
from tests.races.racers import ENTRIES, OURS

COLOURS = dict(zip(ENTRIES, ("#1b3a4b", "#c8553d", "#e09f3e", "#5b8e7d", "#7a6c9d", "#9a9a9a"), strict=True))


def draw(results: Sequence[Result], path: Path, *, horizon: int, accuracy: float) -> None:
    """Draw the results of one horizon and accuracy into a PNG or SVG file."""
    chosen = [each for each in results if (each.case.horizon, each.case.accuracy) == (horizon, accuracy)]
    kinds = list(dict.fromkeys(each.case.kind for each in chosen))
    with mpl.rc_context({"font.size": 9, "axes.spines.top": False, "axes.spines.right": False}):
        figure = Figure(figsize=(4.6 * len(kinds), 3.8), layout="constrained")
        panels = figure.subplots(1, len(kinds), sharey=True, squeeze=False)[0]
        for panel, kind in zip(panels, kinds, strict=True):
            for racer, colour in COLOURS.items():
                points = [
                    (each.case.size, quantiles([1e3 * lap.duration_s for lap in by_racer(each.laps)[racer]], n=4))
                    for each in chosen
                    if each.case.kind == kind and racer in by_racer(each.laps)
                ]
                if points:
                    sizes, times = [size for size, _ in points], [quarter for _, quarter in points]
                    thick = 2.4 if racer == OURS.name else 1.2
                    panel.plot(sizes, [t[1] for t in times], "o-", color=colour, lw=thick, ms=4, label=racer)
                    panel.fill_between(sizes, [t[0] for t in times], [t[2] for t in times], color=colour, alpha=0.15)
            panel.set(xscale="log", yscale="log", xlabel="sections", title=f"{kind}, T = {horizon}")
            panel.grid(alpha=0.25, which="both", lw=0.4)
        panels[0].set_ylabel(f"ms per period, first inputs to {accuracy:g} of span")
        panels[0].legend(frameon=False)
        figure.savefig(path, dpi=160)


def gist(results: Sequence[Result]) -> str:
    """One line per case: how many times faster than the best other racer, in the median."""
    lines = []
    for result in results:
        laps = by_racer(result.laps)
        ours = laps.pop(OURS.name, [])
        if ours and laps:
            times = {racer: median(each.duration_s for each in theirs) for racer, theirs in laps.items()}
            best = min(times, key=lambda racer: times[racer])
            mine, case = median(each.duration_s for each in ours), result.case
            lines.append(
                f"{case.kind:7s} N {case.size:5d} T {case.horizon:2d} to {case.accuracy:g}: {1e3 * mine:8.2f} ms, "
                f"best other {best} {1e3 * times[best]:8.2f} ms, {times[best] / mine:5.2f} times"
            )
    return "\n".join(lines)
