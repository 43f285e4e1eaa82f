"""Where a bench shows itself: a live view on a terminal, plain lines off it."""

from __future__ import annotations

from collections import deque
from collections.abc import Iterable
from types import TracebackType
from typing import Self

from rich.console import Console
from rich.live import Live
from rich.text import Text

from gateway.bench.glyphs import glyphs_for
from gateway.bench.lines import Line
from gateway.bench.screen import LATEST, Scene, picture

PER_SECOND = 4.0
KEPT = 60
"""Lines that are printed once the view is gone, so that what happened can be read again."""


class Stage:
    """Shows scenes and lines, as a context manager: the live view stands while it is entered.

    What was said is printed again when the view is taken down: the view itself leaves nothing behind.

    Args:
        console: where to.
    """

    def __init__(self, console: Console) -> None:
        self._console = console
        self._glyphs = glyphs_for(console.encoding)
        self._lines: deque[Line] = deque(maxlen=KEPT)
        self._live = Live(console=console, auto_refresh=False, transient=True) if console.is_terminal else None
        self._standing = False

    @property
    def lines(self) -> tuple[Line, ...]:
        """What was said last, oldest first."""
        return tuple(self._lines)[-LATEST:]

    def __enter__(self) -> Self:
        if self._live is not None:
            self._live.__enter__()
            self._standing = True
            self._lines.clear()  # what was said before stands above the view
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        if self._live is not None:
            self._standing = False
            self._live.__exit__(kind, error, trace)
            for line in self._lines:
                self._print(line)

    def say(self, lines: Iterable[Line]) -> None:
        """Take lines in: the view shows the last ones; where none stands, all are printed."""
        for line in lines:
            self._lines.append(line)
            if not self._standing:
                self._print(line)

    def show(self, scene: Scene) -> None:
        """Show a moment; without a view nothing happens."""
        if self._live is not None and self._standing:
            width, height = self._console.size
            self._live.update(picture(scene, self._glyphs, width, height), refresh=True)

    def _print(self, line: Line) -> None:
        self._console.print(Text(str(line)), soft_wrap=True)
