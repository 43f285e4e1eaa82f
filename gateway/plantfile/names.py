"""Ranges and lists in names: `tank-{1..8}`, `tank-{3,6}`, `zone-{1..3,7}`, and the order names stand in.

A name is letters, digits, `-` and `_`. Braces hold whole numbers, ranges of them (both ends belong) and words. A
number written with leading zeros keeps its width: `{08..11}` gives 08, 09, 10, 11. Several pairs of braces give every
combination, the last one running fastest.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from itertools import product
from math import prod

MOST_NAMES = 10_000
"""Names one pattern may give; more is a slip of the finger."""

RESERVED = frozenset({"panel"})
"""Names a section can't have, because tags use them."""

_PART = re.compile(r"\{([^{}]*)\}|([A-Za-z0-9_-]+)")
_NAME = re.compile(r"[A-Za-z0-9_-]+")
_RANGE = re.compile(r"([0-9]{1,9})\.\.([0-9]{1,9})")


class NamePatternError(ValueError):
    """A name pattern is wrong; the message says what is allowed."""


def expand(pattern: str) -> tuple[str, ...]:
    """Return every name of a pattern, in order.

    Raises:
        NamePatternError: stray braces or characters, a range that runs down, more than `MOST_NAMES` names.
    """
    choices: list[Sequence[str]] = []
    end = 0
    for match in _PART.finditer(pattern):
        if match.start() != end:
            break
        end = match.end()
        choices.append([match[2]] if match[2] else _items(match[1]))
    if end != len(pattern) or not choices:
        raise NamePatternError('letters, digits, - and _, with ranges as in "tank-{1..8}" or lists as in "tank-{3,6}"')
    if prod(len(items) for items in choices) > MOST_NAMES:
        raise NamePatternError(f"at most {MOST_NAMES} names from one pattern")
    return tuple("".join(parts) for parts in product(*choices))


def _items(inside: str) -> Sequence[str]:
    items: list[str] = []
    for item in inside.split(","):
        text = item.strip()
        if match := _RANGE.fullmatch(text):
            items.extend(_numbers(match[1], match[2]))
        elif _NAME.fullmatch(text):
            items.append(text)
        else:
            raise NamePatternError("numbers, ranges and words between the braces, as in {1..8}, {3,6} or {north,south}")
        if len(items) > MOST_NAMES:
            raise NamePatternError(f"at most {MOST_NAMES} names from one pattern")
    return items


def _numbers(first: str, last: str) -> Sequence[str]:
    low, high = int(first), int(last)
    if low > high:
        raise NamePatternError(f"a range that runs up, {{{last}..{first}}}")
    if high - low >= MOST_NAMES:
        raise NamePatternError(f"at most {MOST_NAMES} names from one pattern")
    padded = any(len(text) > 1 and text.startswith("0") for text in (first, last))
    width = len(first) if padded else 1
    if padded and len(first) != len(last):
        raise NamePatternError("both ends of a padded range with the same number of digits, as in {08..11}")
    return [f"{number:0{width}d}" for number in range(low, high + 1)]


def row_order(names: Sequence[str]) -> list[int]:
    """Return the indices that put names in the order people expect of them.

    Names that differ only in their numbers stand in the order of these numbers, at the place of the first of them;
    otherwise the order stays. So a row split over several tables, since tanks 3 and 6 have a consumer, is a row again.
    """
    first_with_stem: dict[str, int] = {}
    for index, name in enumerate(names):
        first_with_stem.setdefault(_stem(name), index)
    return sorted(
        range(len(names)), key=lambda index: (first_with_stem[_stem(names[index])], _numbers_in(names[index]))
    )


def _stem(name: str) -> str:
    return re.sub(r"[0-9]+", "#", name)


def _numbers_in(name: str) -> tuple[int, ...]:
    return tuple(int(number) for number in re.findall(r"[0-9]+", name))
