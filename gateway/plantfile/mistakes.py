"""What is wrong with a plant file: one `Mistake` each, gathered in a `Ledger`, raised together as `PlantFileError`.

A `Place` is the key path as a tuple, ("sections", 1, "names"). Written for people it is `sections[2].names`: tables of
an array are counted from one, as a person counts them.
"""

from __future__ import annotations

import json
import re
from collections.abc import Iterable
from dataclasses import dataclass
from difflib import get_close_matches
from itertools import islice

from gateway.plantfile.lines import Lines, Place

LONGEST_READ = 60
"""Characters of a wrong value that are worth repeating."""

LONGEST_LINE = 110
"""A mistake longer than this is printed on two lines."""

_LONGEST_INTEGER_BITS = 128

_BARE_KEY = re.compile(r"[A-Za-z0-9_-]+")


def written(place: Place) -> str:
    """Return a key path as its reader would write it: `kinds.tank.signals.level.span`, `sections[2].names`."""
    text = ""
    for step in place:
        if isinstance(step, int):
            text += f"[{step + 1}]"
        else:
            text += ("." if text else "") + (step if _BARE_KEY.fullmatch(step) else json.dumps(step))
    return text


def shown(value: object) -> str:
    """Return a value as it stands in the file, shortened."""
    text = json.dumps(_short(value), ensure_ascii=False, default=str)
    return text if len(text) <= LONGEST_READ else text[: LONGEST_READ - 3] + "..."


def _short(value: object) -> object:
    """40.0 as 40, the way it was most likely written; and no integer so long that Python would refuse to print it."""
    if isinstance(value, list | tuple):
        return [_short(item) for item in value]
    if isinstance(value, dict):
        return {key: _short(item) for key, item in value.items()}
    if isinstance(value, int) and value.bit_length() > _LONGEST_INTEGER_BITS:
        return "a whole number beyond all use"
    return int(value) if isinstance(value, float) and value.is_integer() and abs(value) < 1e15 else value


def nearest(word: str, right: Iterable[str]) -> str | None:
    """Return the right spelling closest to the word, None when nothing comes close; looks at the first thousand."""
    by_lower = {name.lower(): name for name in islice(right, 1000)}
    found = get_close_matches(word.lower(), by_lower, n=1)
    return by_lower[found[0]] if found else None


@dataclass(frozen=True)
class Mistake:
    """One thing wrong with a plant file.

    Attributes:
        place: key path, `kinds.tank.signals.level.span`; empty for the file itself.
        line: line of the file, counted from one; None when the place has no line.
        read: the value as it was read, "nothing" when a key is missing.
        allowed: what may stand there.
        suggestion: the nearest right spelling, None when there is none.
    """

    place: str
    line: int | None
    read: str
    allowed: str
    suggestion: str | None = None

    def __str__(self) -> str:
        where = " ".join(part for part in (f"line {self.line}" if self.line else "", self.place) if part) or "the file"
        head = f"{where}: read {self.read}"
        tail = f"allowed: {self.allowed}" + (f"; nearest: {self.suggestion}" if self.suggestion else "")
        joint = "; " if len(head) + len(tail) < LONGEST_LINE else "\n    "
        return head + joint + tail


class Ledger:
    """Collects mistakes while a file is read, each once, and knows which places are already spoiled."""

    def __init__(self, lines: Lines) -> None:
        self._lines = lines
        self._wrong: dict[Mistake, None] = {}
        self._missing: dict[Place, Mistake] = {}
        self._spoiled: list[Place] = []

    def add(self, place: Place, read: object, allowed: str, suggestion: str | None = None) -> None:
        """Note that the value at this place is not one of those allowed."""
        self._wrong[self._mistake(place, shown(read), allowed, suggestion)] = None
        self._spoiled.append(place)

    def add_unknown(self, place: Place, right: Iterable[str]) -> None:
        """Note a key nobody knows; the right key it resembles counts as spoiled, not as missing too."""
        key, right = str(place[-1]), sorted(right)
        close = nearest(key, right)
        self._wrong[self._mistake(place, f"the unknown key {shown(key)}", ", ".join(right) or "no key", close)] = None
        self._spoiled.append(place)
        if close is not None:
            self._spoiled.append((*place[:-1], close))

    def add_missing(self, place: Place, allowed: str) -> None:
        """Note that a key is missing; forgotten when another mistake, before or after, says why."""
        self._missing.setdefault(place, self._mistake(place, "nothing", allowed, None))

    def spoiled(self, place: Place) -> bool:
        """Whether a mistake was noted at this place, around it or inside it."""
        return any(place[: len(other)] == other[: len(place)] for other in (*self._spoiled, *self._missing))

    def mistakes(self) -> tuple[Mistake, ...]:
        """All mistakes so far, in the order of their lines."""
        explained = {other[:depth] for other in self._spoiled for depth in range(1, len(other) + 1)}
        missing = [mistake for place, mistake in self._missing.items() if place not in explained]
        return tuple(sorted([*self._wrong, *missing], key=lambda mistake: mistake.line or 0))

    def _mistake(self, place: Place, read: str, allowed: str, suggestion: str | None) -> Mistake:
        return Mistake(written(place), self._lines.line_of(place), read, allowed, suggestion)


class PlantFileError(Exception):
    """A plant file is wrong; carries every mistake in it, prints as one block.

    Attributes:
        source: name of the file.
        mistakes: all of them, in the order of their lines; never empty.
    """

    def __init__(self, source: str, mistakes: tuple[Mistake, ...]) -> None:
        self.source = source
        self.mistakes = mistakes
        count = "1 mistake" if len(mistakes) == 1 else f"{len(mistakes)} mistakes"
        super().__init__("\n".join([f"{source}: {count}", *(f"  {mistake}" for mistake in mistakes)]))
