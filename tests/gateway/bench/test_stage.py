"""Where a bench shows itself: a view that leaves nothing behind but what was said, plain lines off a terminal."""

from __future__ import annotations

import io

from rich.console import Console

from gateway.bench.following import Followed
from gateway.bench.lines import Line, Source
from gateway.bench.screen import LATEST, Scene
from gateway.bench.stage import Stage
from gateway.bench.story import story_of
from tests.gateway.bench.rig import row_plant


def console(*, terminal: bool) -> tuple[Console, io.StringIO]:
    """A console that writes into memory."""
    page = io.StringIO()
    return Console(file=page, force_terminal=terminal, width=60, color_system=None, _environ={}), page


def said(number: int) -> Line:
    """A line of the gateway."""
    return Line(
        float(number), Source.GATEWAY, f"Thing {number} happened, and this takes more than sixty cells to tell."
    )


def test_off_a_terminal_every_line_is_printed_whole_as_it_is_said() -> None:
    """Nothing is wrapped, cut, coloured or drawn."""
    shown, page = console(terminal=False)
    with Stage(shown) as stage:
        stage.say([said(1), said(2)])
        stage.show(Scene(row_plant(), "bench", "full", Followed(), 0.0, 60.0, (), ()))
    assert page.getvalue() == f"{said(1)}\n{said(2)}\n"


def test_before_the_view_lines_are_printed_on_a_terminal_too() -> None:
    """Starting takes seconds in which somebody watches."""
    shown, page = console(terminal=True)
    Stage(shown).say([said(1)])
    assert str(said(1)) in page.getvalue()


def test_what_was_said_under_the_view_is_printed_once_it_is_gone() -> None:
    """After the view, and not again what was printed before it."""
    shown, page = console(terminal=True)
    stage = Stage(shown)
    stage.say([said(1)])
    with stage:
        stage.say([said(2)])
        before = page.getvalue()
        stage.show(Scene(row_plant(), "bench", "full", Followed(), 0.0, 60.0, story_of(row_plant()), stage.lines))
        drawn = page.getvalue().removeprefix(before)
    after = page.getvalue().removeprefix(before + drawn)
    assert "authority full" in drawn
    assert str(said(2)) not in before
    assert str(said(2)) in after
    assert page.getvalue().count(str(said(1))) == 1


def test_the_view_shows_the_last_lines() -> None:
    """As many as it has room for."""
    shown, _ = console(terminal=True)
    with Stage(shown) as stage:
        stage.say([said(number) for number in range(20)])
        assert stage.lines == tuple(said(number) for number in range(20 - LATEST, 20))
