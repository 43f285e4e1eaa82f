"""The live view of a bench: a picture of one moment, made from what the journal says and nothing else.

Grey is well. What is out of the ordinary is bright; what waits for a person has a colour, and a mark and a word beside
it, so that nothing rests on colour alone. A plant that does not fit the terminal shows the sections that are not
driving, then those farthest off their targets, and counts the rest.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass

from rich.console import Group, RenderableType
from rich.table import Table
from rich.text import Text

from gateway.bench.figures import aimed_signal
from gateway.bench.following import Followed
from gateway.bench.glyphs import Glyphs, scale, strip
from gateway.bench.lines import Line, Source, clock_text
from gateway.bench.story import Step
from gateway.hold import State
from gateway.journal import PeriodRecord, SectionRow
from gateway.plantfile.plant import Plant, Role, SectionSpec, Signal

WELL, BRIGHT, PERSON = "bright_black", "bold", "bold yellow"
MARKS = {State.DRIVING: " ", State.FROZEN: "~", State.HOLDING: "!", State.WATCHING: "-"}
LATEST = 5
DOING_WIDTH = 14
"""Cells for the state and what was missed, so that the scales stay where they are."""

HEAD_ROWS = 11 + LATEST
"""Rows the view needs besides its sections."""


@dataclass(frozen=True)
class Scene:
    """One moment of a bench.

    Attributes:
        plant: the plant file.
        site: where it is driven.
        authority: how far the gateway may act.
        followed: what the journal says.
        now_s: seconds after the first period.
        length_s: of the whole run.
        steps: of the story, in order.
        lines: what was said last, oldest first.
        where: folder to give to `lengthsman ask --at`, empty when there is nobody to ask.
    """

    plant: Plant
    site: str
    authority: str
    followed: Followed
    now_s: float
    length_s: float
    steps: Sequence[Step]
    lines: Sequence[Line]
    where: str = ""


def picture(scene: Scene, glyphs: Glyphs, width: int, height: int) -> RenderableType:
    """The view of a scene on a terminal of this size, in cells."""
    last = scene.followed.last
    parts: list[RenderableType] = [_head(scene), *_story(scene)]
    if last is not None:
        parts += [Text(), _sections(scene, last, glyphs, width, max(3, height - HEAD_ROWS)), Text()]
        parts.append(_work(scene, glyphs, width))
        parts.append(_misses(scene))
        parts += _waiting(scene, last)
    parts += [Text(), *(_line(line) for line in scene.lines[-LATEST:])]
    return Group(*parts)


def _head(scene: Scene) -> Text:
    last = scene.followed.last
    period = "" if last is None else f"   period {last.k}"
    text = Text(no_wrap=True, overflow="ellipsis")
    text.append(f"{scene.plant.name}", style=BRIGHT)
    text.append(f" on site {scene.site}, authority {scene.authority}{period}", style=WELL)
    text.append(f"   {clock_text(scene.now_s)} of {clock_text(scene.length_s)}")
    return text


def _story(scene: Scene) -> list[RenderableType]:
    begun = [step for step in scene.steps if step.at_s <= scene.now_s]
    ahead = [step for step in scene.steps if step.at_s > scene.now_s]
    rows: list[RenderableType] = []
    if begun:
        rows.append(Text.assemble(("now   ", WELL), (f"{clock_text(begun[-1].at_s)} ", WELL), begun[-1].sentence))
    if ahead:
        wait = ahead[0].at_s - scene.now_s
        rows.append(Text(f"next  {clock_text(ahead[0].at_s)} {ahead[0].name}, in {wait:.0f} s", style=WELL))
    return rows


def _sections(scene: Scene, last: PeriodRecord, glyphs: Glyphs, width: int, rows: int) -> RenderableType:
    table = Table.grid(padding=(0, 2, 0, 0))
    table.add_column()
    table.add_column(min_width=DOING_WIDTH)
    order = list(range(len(scene.plant.sections)))
    if len(order) > rows:
        order = sorted(sorted(order, key=lambda i: _urgency(scene, last, i))[: rows - 1])
    cells = max(13, min(41, width - 69)) | 1  # odd, so that a target in the middle of the span has a cell of its own
    for i in order:
        table.add_row(*_section(scene, scene.plant.sections[i], last.sections[i], glyphs, cells))
    hidden = [last.sections[i].state for i in range(len(last.sections)) if i not in set(order)]
    if not hidden:
        return table
    counted = ", ".join(f"{count} {state}" for state, count in sorted(Counter(hidden).items()))
    return Group(table, Text(f"and {len(hidden)} more: {counted}", style=WELL))


def _urgency(scene: Scene, last: PeriodRecord, i: int) -> tuple[bool, float]:
    row, aimed = last.sections[i], aimed_signal(scene.plant.sections[i])
    if aimed is None:
        return row.state is State.DRIVING, 0.0
    reading = reading_of(row, aimed[0])
    target = scene.followed.targets.get(aimed[1].tag, aimed[1].target)
    off = 0.0 if reading is None or target is None else abs(reading - target) / aimed[1].width
    return row.state is State.DRIVING, -off


def _section(scene: Scene, spec: SectionSpec, row: SectionRow, glyphs: Glyphs, cells: int) -> list[Text]:
    style = {State.DRIVING: WELL, State.HOLDING: PERSON}.get(row.state, BRIGHT)
    doing = row.state.upper() if row.state is State.HOLDING else str(row.state)
    cause = "" if not row.verdict.is_miss else f" {row.verdict}"
    out = [Text(f"{MARKS[row.state]} {spec.name}", style=style), Text(f"{doing}{cause}", style=style)]
    aimed = aimed_signal(spec)
    if aimed is None:
        return [*out, Text(), Text(), Text(), *_inputs(spec, row)]
    place, signal = aimed
    reading = reading_of(row, place)
    target = scene.followed.targets.get(signal.tag, signal.target)
    out.append(Text(scale(signal, reading, target, cells, glyphs), style=style))
    return [*out, *_numbers(signal, row, place, reading, target, style), *_inputs(spec, row)]


def _numbers(
    signal: Signal, row: SectionRow, place: int, reading: float | None, target: float | None, style: str
) -> list[Text]:
    if reading is None:
        return [Text(f"{row.measured[place].quality}", style=BRIGHT), Text()]
    shown = Text(f"{reading:8.2f} {signal.unit}", style=style)
    off = "" if target is None else f"{100 * (reading - target) / signal.width:+z6.1f} %"
    return [shown, Text(off, style=style)]


def _inputs(spec: SectionSpec, row: SectionRow) -> list[Text]:
    texts = []
    for signal, value in zip(spec.signals_of(Role.DRIVEN)[:1], row.written[:1], strict=False):
        number = "nothing written" if value != value else f"{value:6.1f} {signal.unit}"  # noqa: PLR0124 - NaN
        texts.append(Text(f"{signal.name} {number}", style=WELL))
    return texts


def reading_of(row: SectionRow, place: int) -> float | None:
    """A measured signal's reading, None when it may not be believed."""
    found = row.measured[place]
    return float(found.value) if found.quality.usable and isinstance(found.value, int | float) else None


def _work(scene: Scene, glyphs: Glyphs, width: int) -> Text:
    """The last periods' work, each as its share of the budget up to the write cut-off."""
    budget_us = scene.plant.cutoffs.write * scene.plant.period_s * 1e6
    periods = scene.followed.periods[-max(10, min(60, width - 52)) :]
    parts = [None if p.timing.total_us is None else p.timing.total_us / budget_us for p in periods]
    last = periods[-1]
    slack = [period.slack_us for period in scene.followed.periods if period.slack_us is not None]
    text = Text(no_wrap=True, overflow="ellipsis", style=WELL)
    text.append("work  ")
    text.append(strip(parts, glyphs), style="")
    took = "" if last.timing.total_us is None else f"  {last.timing.total_us / 1e3:.0f} ms of {budget_us / 1e3:.0f}"
    text.append(took)
    if slack:
        text.append(f", least slack lately {min(slack) / 1e3:.0f} ms")
    return text


def _misses(scene: Scene) -> Text:
    missed = [
        f"{spec.name} {count}" for spec, count in zip(scene.plant.sections, scene.followed.misses, strict=True) if count
    ]
    text = ", ".join(missed[:8]) + (f" and {len(missed) - 8} more" if len(missed) > 8 else "")
    return Text(f"missed periods: {text or 'none'}", style=WELL, no_wrap=True, overflow="ellipsis")


def _waiting(scene: Scene, last: PeriodRecord) -> list[RenderableType]:
    """Who waits for a rearm, and how it is given."""
    rows = zip(scene.plant.sections, last.sections, strict=True)
    held = [spec.name for spec, row in rows if row.state is State.HOLDING]
    if not held or not scene.where:
        return []
    whom = held[0] if len(held) == 1 else "all"
    text = f"! {', '.join(held[:4])} waits for a person: lengthsman ask --at {scene.where} rearm {whom}"
    return [Text(text, style=PERSON, no_wrap=True, overflow="ellipsis")]


def _line(line: Line) -> Text:
    style = PERSON if line.for_person else WELL if line.source is Source.GATEWAY else ""
    return Text(str(line), style=style, no_wrap=True, overflow="ellipsis")
