"""The table: results in, Markdown out. Nothing is measured here."""

from __future__ import annotations

import platform
from collections.abc import Iterator, Sequence
from dataclasses import asdict
from importlib.metadata import PackageNotFoundError, version
from statistics import median, quantiles
from typing import Any

from tests.races.meeting import Result
from tests.races.race import Lap, by_racer
from tests.races.racers import OURS
from tests.races.racers.protocol import Entry, installed
from tests.races.truth import solver_in_use


def markdown(results: Sequence[Result], entries: Sequence[Entry]) -> str:
    """Everything as one Markdown document."""
    parts = [
        "# Races",
        f"{platform.machine()}, Python {platform.python_version()}; {', '.join(_versions(entries))}. One thread each, "
        "paired, closed loop, warm. Times are of one period, measurement to first inputs. Ratios are to this "
        "synthesis, pair by pair: median and quartiles; above 1 it is faster than they are. "
        f"Truths by {solver_in_use()}, each proved by its optimality conditions.",
    ]
    for accuracy in sorted({result.case.accuracy for result in results}, reverse=True):
        chosen = [result for result in results if result.case.accuracy == accuracy]
        parts += [f"## First inputs to {accuracy:g} of span", _table(RACE_HEAD, _races(chosen))]
    parts += [
        "## Time per section and period, this synthesis",
        _table(FLAT_HEAD, _flatness(results)),
        "## What explicit rows cost, same number of passes with and without limits",
        _table(LIMITS_HEAD, _limits(results)),
        "## One section alone on one core, per pass",
        "Floors: its bytes at this core's bandwidth from the cache that holds them, or from memory; its operations at "
        "peak.",
        _table(SECTION_HEAD, _sections(results)),
    ]
    if any(result.curves for result in results):
        parts += [
            "## The published unscaled form, per pass",
            _table(CURVE_HEAD, _curves(results)),
        ]
    retired = sorted({(_name(result), each.racer, each.reason) for result in results for each in result.retired})
    if retired:
        parts += ["## Not raced", _table(("case", "racer", "why"), retired)]
    parts += ["## Setups", _table(("case", "racer", "setup"), _setups(results))]
    return "\n\n".join(parts) + "\n"


def raw(results: Sequence[Result]) -> list[dict[str, Any]]:
    """Everything measured, for a JSON file."""
    return [asdict(result) for result in results]


RACE_HEAD = ("plant", "N", "T", "racer", "median ms", "quartiles", "worst", "worst / median", "iterations",
             "memory MB", "error", "ratio to ours", "ratio quartiles")  # fmt: skip
FLAT_HEAD = ("plant", "T", "N", "accuracy", "us per section and period", "us per section and iteration",
             "iterations", "design built in s")  # fmt: skip
LIMITS_HEAD = ("plant", "N", "T", "with ms", "without ms", "ratio", "quartiles")
SECTION_HEAD = ("plant", "T", "rows x freedom", "us per pass", "quartiles", "KB touched", "floor us, cache",
                "floor us, memory", "floor us, operations", "times its floor")  # fmt: skip
CURVE_HEAD = ("plant", "N", "T", "row problem", "ms per pass", "times without limits", "passes", "error")


def _races(results: Sequence[Result]) -> Iterator[tuple[object, ...]]:
    for result in results:
        case, laps = result.case, by_racer(result.laps)
        ours = laps.get(OURS.name, [])
        for racer, theirs in sorted(laps.items(), key=lambda pair: median(each.duration_s for each in pair[1])):
            low, middle, high = _quartiles_ms(theirs)
            worst = 1e3 * max(each.duration_s for each in theirs)
            ratio = ("", "")
            if ours and racer != OURS.name:
                r_low, r_middle, r_high = quantiles(paired(theirs, ours), n=4)
                ratio = (f"**{r_middle:.2f}**", f"{r_low:.2f} .. {r_high:.2f}")
            yield (
                case.kind, case.size, case.horizon, racer, f"{middle:.3g}", f"{low:.3g} .. {high:.3g}",
                f"{worst:.3g}", f"{worst / middle:.1f}", f"{median(each.iterations for each in theirs):.0f}",
                f"{result.memory_bytes[racer] / 1e6:.1f}", _error(theirs, case.accuracy), *ratio,
            )  # fmt: skip


def _error(laps: Sequence[Lap], accuracy: float) -> str:
    """Worst error, and how many laps missed the accuracy though the setup had been verified."""
    missed = sum(each.error_spans > accuracy for each in laps)
    worst = f"{max(each.error_spans for each in laps):.0e}"
    return f"{worst}, **missed {missed} of {len(laps)}**" if missed else worst


def paired(theirs: Sequence[Lap], ours: Sequence[Lap]) -> list[float]:
    """Their time over ours, for every repeat and period that both ran."""
    place = {(each.repeat, each.period): each.duration_s for each in ours}
    return [each.duration_s / place[each.repeat, each.period] for each in theirs]


def _flatness(results: Sequence[Result]) -> Iterator[tuple[object, ...]]:
    for result in results:
        case, ours = result.case, by_racer(result.laps).get(OURS.name, [])
        if ours:
            each_us = median(1e6 * each.duration_s / case.size for each in ours)
            pass_us = median(1e6 * each.duration_s / case.size / each.iterations for each in ours)
            passes = median(each.iterations for each in ours)
            yield (case.kind, case.horizon, case.size, f"{case.accuracy:g}", f"{each_us:.2f}", f"{pass_us:.3f}",
                   f"{passes:.0f}", f"{result.building_s:.1f}")  # fmt: skip


def _limits(results: Sequence[Result]) -> Iterator[tuple[object, ...]]:
    for result in results:
        case, cost = result.case, result.row_cost
        if cost is not None:
            low, middle, high = quantiles(cost.ratios, n=4)
            yield (case.kind, case.size, case.horizon, f"{1e3 * median(cost.limited_s):.3g}",
                   f"{1e3 * median(cost.free_s):.3g}", f"**{middle:.2f}**", f"{low:.2f} .. {high:.2f}")  # fmt: skip


def _sections(results: Sequence[Result]) -> Iterator[tuple[object, ...]]:
    seen = set()
    for result in results:
        case, one = result.case, result.section
        if one is None or (case.kind, case.horizon) in seen:
            continue
        seen.add((case.kind, case.horizon))
        yield (
            case.kind, case.horizon, f"{one.rows} x {one.freedom}", f"{one.median_us:.2f}",
            f"{one.quartiles_us[0]:.2f} .. {one.quartiles_us[1]:.2f}", f"{one.bytes_touched / 1e3:.0f}",
            f"{one.cache_floor_us:.2f}", f"{one.memory_floor_us:.2f}", f"{one.operations_floor_us:.2f}",
            f"**{one.median_us / one.floor_us:.1f}**",
        )  # fmt: skip


def _curves(results: Sequence[Result]) -> Iterator[tuple[object, ...]]:
    for result in results:
        if not result.curves:
            continue
        free = median(next(curve.pass_s for curve in result.curves if curve.name == "without limits"))
        for curve in result.curves:
            pass_s = median(curve.pass_s)
            yield (
                result.case.kind, result.case.size, result.case.horizon, curve.name, f"{1e3 * pass_s:.3g}",
                f"{pass_s / free:.2f}", "" if curve.passes is None else curve.passes,
                "" if curve.error_spans is None else f"{curve.error_spans:.0e}",
            )  # fmt: skip


def _setups(results: Sequence[Result]) -> Iterator[tuple[object, ...]]:
    for result in results:
        for racer, setup in result.setups.items():
            yield _name(result), racer, setup


def _name(result: Result) -> str:
    case = result.case
    return f"{case.kind}, N = {case.size}, T = {case.horizon}, {case.accuracy:g}"


def _quartiles_ms(laps: Sequence[Lap]) -> tuple[float, float, float]:
    low, middle, high = quantiles([1e3 * each.duration_s for each in laps], n=4)
    return low, middle, high


def _table(head: Sequence[str], rows: Iterator[tuple[object, ...]] | Sequence[tuple[object, ...]]) -> str:
    lines = ["| " + " | ".join(head) + " |", "|" + "---|" * len(head)]
    lines += ["| " + " | ".join(str(cell) for cell in row) + " |" for row in rows]
    return "\n".join(lines)


def _versions(entries: Sequence[Entry]) -> Iterator[str]:
    for entry in entries:
        if installed(entry) and entry is not OURS:
            try:
                yield f"{entry.name} {version(entry.package)}"
            except PackageNotFoundError:  # an entry that is not a distribution of that name
                yield entry.name
