"""Which line of a TOML text a key stands on; the standard library's reader does not say.

Only for text that reader has accepted: nothing is validated here. A place is a tuple of keys and array indices, as
the value would be reached in the parsed document. Grammar: TOML 1.0.0, https://toml.io/en/v1.0.0.
"""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import TypeAlias

Place: TypeAlias = tuple[str | int, ...]
"""Key path into a plant file, array indices from zero."""

_TOKEN = re.compile(
    r'''
      (?P<blank>[ \t\r]+|\#[^\n]*)
    | (?P<newline>\n)
    | (?P<quoted>"""(?:[^\\]|\\[\s\S])*?"""(?:"{0,2})|\'\'\'[\s\S]*?\'\'\'(?:'{0,2})|"(?:[^"\\\n]|\\.)*"|'[^'\n]*')
    | (?P<mark>[][{}=,.])
    | (?P<bare>[^\s\#"'][^\s\#"'\][{}=,.]*)
    ''',
    re.VERBOSE,
)


@dataclass(frozen=True)
class _Token:
    kind: str
    text: str
    line: int

    @property
    def key(self) -> str:
        """The key this token spells, quotes and escapes resolved."""
        return next(iter(tomllib.loads(f"{self.text} = 0"))) if self.kind == "quoted" else self.text


def _tokens(text: str) -> Iterator[_Token]:
    line = 1
    for match in _TOKEN.finditer(text):
        if match.lastgroup != "blank":
            yield _Token(match.lastgroup or "", match.group(), line)
        line += match.group().count("\n")


@dataclass
class Lines:
    """Line of every key and array element of one TOML text, counted from one."""

    _line: dict[Place, int] = field(default_factory=dict)

    @classmethod
    def of(cls, text: str) -> Lines:
        """Find the lines of a valid TOML text."""
        return cls(_Walk(text).lines)

    def line_of(self, place: Place) -> int | None:
        """Line of the place, or of the nearest table around it; None for the file as a whole."""
        while place and place not in self._line:
            place = place[:-1]
        return self._line.get(place)


class _Walk:
    """One pass over the tokens; `lines` grows as keys are met, the first meeting counts."""

    def __init__(self, text: str) -> None:
        self.lines: dict[Place, int] = {}
        self._last: dict[Place, int] = {}
        self._queue = [*_tokens(text), _Token("newline", "\n", 0)]
        self._at = 0
        self._document()

    @property
    def _next(self) -> _Token:
        return self._queue[self._at]

    def _take(self) -> _Token:
        self._at += 1
        return self._queue[self._at - 1]

    def _document(self) -> None:
        here: Place = ()
        while self._at < len(self._queue):
            if self._next.kind == "newline":
                self._take()
            elif self._next.text == "[":
                here = self._header()
            else:
                self._pair(here)

    def _header(self) -> Place:
        """`[a.b]` or `[[a.b]]`: return the table that the following pairs belong to."""
        self._take()
        is_array = self._next.text == "["
        if is_array:
            self._take()
        line = self._next.line
        keys = self._keys("]")
        if is_array:
            self._take()
        here: Place = ()
        for key in keys[:-1]:
            here = self._newest((*here, key), line)
        here = (*here, keys[-1])
        if is_array:
            self._last[here] = self._last.get(here, -1) + 1
        return self._newest(here, line)

    def _newest(self, place: Place, line: int) -> Place:
        """Note the place; inside an array of tables, step into its newest one."""
        self.lines.setdefault(place, line)
        if place in self._last:
            place = (*place, self._last[place])
            self.lines.setdefault(place, line)
        return place

    def _keys(self, end: str) -> list[str]:
        """Dotted keys up to the mark that ends them."""
        keys = []
        while (token := self._take()).text != end or token.kind != "mark":
            if token.kind != "mark":
                keys.append(token.key)
        return keys

    def _pair(self, here: Place) -> None:
        line = self._next.line
        for key in self._keys("="):
            here = (*here, key)
            self.lines.setdefault(here, line)
        self._value(here)

    def _value(self, here: Place) -> None:
        opening = self._next
        if opening.kind == "mark" and opening.text == "[":
            self._array(here)
        elif opening.kind == "mark" and opening.text == "{":
            self._inline_table(here)
        else:
            while self._next.kind != "newline" and self._next.text not in (",", "]", "}"):
                self._take()

    def _array(self, here: Place) -> None:
        self._take()
        index = 0
        while self._next.text != "]":
            if self._next.kind == "newline" or self._next.text == ",":
                self._take()
                continue
            self.lines.setdefault((*here, index), self._next.line)
            self._value((*here, index))
            index += 1
        self._take()

    def _inline_table(self, here: Place) -> None:
        self._take()
        while self._next.text != "}":
            if self._next.kind == "newline" or self._next.text == ",":
                self._take()
            else:
                self._pair(here)
        self._take()
