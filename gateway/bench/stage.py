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


class Stage:
    """Shows scenes and lines, as a context manager: the live view stands while it is entered.

    Args:
        console: where to.
    """

    def __init__(self, console: Console) -> None:
        self._console = console
        self._glyphs = glyphs_for(console.encoding)
        self._lines: deque[Line] = deque(maxlen=LATEST)
        self._live = Live(console=console, auto_refresh=False, transient=True) if console.is_terminal else None
        self._standing = False

    @property
    def lines(self) -> tuple[Line, ...]:
        """What was said last, oldest first."""
        return tuple(self._lines)

    def __enter__(self) -> Self:
        if self._live is not None:
            self._live.__enter__()
            self._standing = True
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        if self._live is not None:
            self._standing = False
            self._live.__exit__(kind, error, trace)

    def say(self, lines: Iterable[Line]) -> None:
        """Take lines in: the view shows the last ones; where none stands, all are printed."""
        for line in lines:
            self._lines.append(line)
            if not self._standing:
                self._console.print(Text(str(line)), soft_wrap=True)

    def show(self, scene: Scene) -> None:
        """Show a moment; without a view nothing happens."""
        if self._live is not None and self._standing:
            width, height = self._console.size
            self._live.update(picture(scene, self._glyphs, width, height), refresh=True)
