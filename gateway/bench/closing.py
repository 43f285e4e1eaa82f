"""What a bench shows when it is over: a table per section, the deadlines, the criteria; or the same as data."""

from __future__ import annotations

import io
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import asdict
from math import isfinite

from rich.console import Console, Group, RenderableType
from rich.table import Table
from rich.text import Text

from gateway.bench.criteria import Criterion
from gateway.bench.figures import Figures, SectionFigures
from gateway.deadline import Quantiles
from gateway.exit_codes import ExitCode
from gateway.hold import State
from gateway.plantfile.plant import Plant

GOOD, BAD, QUIET = "", "bold yellow", "bright_black"
NOTHING = "–"
PAGE_WIDTH = 200


def exit_code_of(figures: Figures, criteria: Sequence[Criterion]) -> ExitCode:
    """How a bench ends: held sections first, they wait for a person; then its criteria."""
    if figures.held:
        return ExitCode.HELD
    return ExitCode.DONE if all(criterion.passed for criterion in criteria) else ExitCode.CRITERIA_FAILED


def closing_words(plant: Plant, figures: Figures, criteria: Sequence[Criterion]) -> RenderableType:
    """The summary, for a terminal or for plain lines."""
    head = (
        f"{plant.name}: {figures.periods} periods in {figures.seconds:g} s, run {figures.run}. "
        f"Mean errors are over the last {min(figures.window_s, figures.seconds):g} s."
    )
    return Group(Text(), Text(head), _sections(figures), Text(), _deadlines(plant, figures), Text(), _judged(criteria))


def facts_of(
    figures: Figures, criteria: Sequence[Criterion], code: ExitCode, wrote: Mapping[str, str]
) -> dict[str, object]:
    """The same as data, for JSON."""
    return {
        **asdict(figures),
        "unprovoked": figures.unprovoked,
        "held": figures.held,
        "criteria": [asdict(criterion) for criterion in criteria],
        "wrote": dict(wrote),
        "exit": int(code),
    }


def words_in_lines(words: RenderableType) -> str:
    """The summary as plain text whose lines are as long as they need to be."""
    page = Console(file=io.StringIO(), width=PAGE_WIDTH, color_system=None)
    with page.capture() as capture:
        page.print(words)
    return "\n".join(line.rstrip() for line in capture.get().splitlines())


def _sections(figures: Figures) -> Table:
    table = Table(box=None, padding=(0, 2, 0, 0), header_style=QUIET)
    table.add_column("section")
    table.add_column("ends", justify="left")
    for name in ("reads", "target", "mean error"):
        table.add_column(name, justify="right")
    table.add_column("periods by state")
    table.add_column("missed")
    for section in figures.sections:
        table.add_row(*_row(section))
    return table


def _row(section: SectionFigures) -> list[Text]:
    held = section.state is State.HOLDING
    return [
        Text(section.name),
        Text(f"{section.state.upper()} !" if held else str(section.state), style=BAD if held else GOOD),
        Text(_number(section.value, f".2f {section.unit}")),
        Text(_number(section.target, f".2f {section.unit}")),
        Text(_number(section.mean_error_percent, "+z.3f %")),
        Text(_counts(section.states.items())),
        Text(_missed(section), style=BAD if section.unprovoked else GOOD),
    ]


def _missed(section: SectionFigures) -> str:
    """Misses by verdict, and how many of them nothing explains."""
    if not section.misses:
        return "none"
    unprovoked = f"{section.unprovoked} of them unprovoked !" if section.unprovoked else "all provoked"
    return f"{_counts(section.misses.items())}; {unprovoked}"


def _number(value: float, form: str) -> str:
    """A number in a form like ".2f cm"; a dash for none."""
    if not isfinite(value):
        return NOTHING
    digits, unit = form.split(" ", 1)
    return f"{value:{digits}} {unit}"


def _counts(counts: Iterable[tuple[str, int]]) -> str:
    return ", ".join(f"{count} {word}" for word, count in sorted(counts, key=lambda pair: -pair[1]) if count)


def _deadlines(plant: Plant, figures: Figures) -> RenderableType:
    budget_ms = plant.cutoffs.write * plant.period_s * 1e3
    table = Table(box=None, padding=(0, 2, 0, 0), header_style=QUIET)
    table.add_column(f"of {budget_ms:g} ms to the write cut-off")
    for name in ("median", "99 %", "99.9 %", "worst"):
        table.add_column(name, justify="right")
    for name, quantiles in (("work", figures.work_us), ("slack", figures.slack_us)):
        table.add_row(name, *_milliseconds(quantiles))
    return table


def _milliseconds(quantiles: Quantiles | None) -> list[str]:
    if quantiles is None:
        return [NOTHING] * 4
    return [f"{us / 1e3:.1f} ms" for us in (quantiles.median, quantiles.p99, quantiles.p999, quantiles.worst)]


def _judged(criteria: Sequence[Criterion]) -> Table:
    table = Table(box=None, padding=(0, 2, 0, 0), show_header=False)
    for criterion in criteria:
        verdict = Text("yes", style=GOOD) if criterion.passed else Text("NO !", style=BAD)
        table.add_row(verdict, criterion.name, Text(criterion.found, style=QUIET))
    return table
