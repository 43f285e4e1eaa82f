"""The marks of the view: a scale for a reading, a strip for work; in letters any terminal has where it must be."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import isfinite

from gateway.plantfile.plant import Signal


@dataclass(frozen=True)
class Glyphs:
    """One character each; `heights` from nothing to full."""

    reading: str
    target: str
    both: str
    soft: str
    outside: str
    heights: str
    ellipsis: str


UNICODE = Glyphs("●", "╷", "◉", "·", " ", " ▁▂▃▄▅▆▇█", "…")
ASCII = Glyphs("o", "|", "O", ".", " ", " .:-=+*%#", "~")


def glyphs_for(encoding: str) -> Glyphs:
    """The marks this encoding can carry."""
    try:
        "".join((UNICODE.reading, UNICODE.target, UNICODE.both, UNICODE.heights)).encode(encoding)
    except (UnicodeEncodeError, LookupError):
        return ASCII
    return UNICODE


def scale(signal: Signal, reading: float | None, target: float | None, width: int, glyphs: Glyphs) -> str:
    """A signal's span as a row of cells: its soft band dotted, the target's cell and the reading's cell marked.

    Args:
        signal: whose span it is.
        reading: None when there is none that may be believed.
        target: None without one.
        width: cells.
    """
    cells = []
    for cell in range(width):
        middle = signal.span[0] + (cell + 0.5) / width * signal.width
        cells.append(glyphs.soft if signal.soft[0] <= middle <= signal.soft[1] else glyphs.outside)
    at_target, at_reading = _cell(signal, target, width), _cell(signal, reading, width)
    if at_target is not None:
        cells[at_target] = glyphs.target
    if at_reading is not None:
        cells[at_reading] = glyphs.both if at_reading == at_target else glyphs.reading
    return "".join(cells)


def strip(parts: Sequence[float | None], glyphs: Glyphs) -> str:
    """Shares of a budget as a row of heights, full at 1; what is missing is a question mark."""
    steps = len(glyphs.heights) - 1
    return "".join(
        "?" if part is None else glyphs.heights[min(steps, max(1, round(part * steps)))] if part > 0 else "?"
        for part in parts
    )


def _cell(signal: Signal, value: float | None, width: int) -> int | None:
    if value is None or not isfinite(value):
        return None
    return min(width - 1, max(0, int((value - signal.span[0]) / signal.width * width)))
