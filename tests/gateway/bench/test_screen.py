"""The live view rendered to text from prepared records: what stands in it, and that nothing rests on colour alone."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

import pytest
from rich.console import Console

from gateway.bench.following import Followed, follow
from gateway.bench.glyphs import ASCII
from gateway.bench.lines import Line, Source
from gateway.bench.screen import HEAD_ROWS, Scene, picture
from gateway.bench.story import story_of
from gateway.hold import State
from gateway.journal import JournalReader, PeriodRecord
from gateway.plantfile import read_plant
from gateway.plantfile.plant import Plant
from gateway.signals import Quality
from gateway.verdict import Verdict
from tests.gateway.bench.rig import applied, period, quiet_period, row_plant, section_row, tanks, write_journal
from tests.gateway.bench.test_story import TARN_ROW

PLANT = row_plant()
HELD = section_row(35.0, state=State.HOLDING, verdict=Verdict.BLIND, quality=Quality.FROZEN)
FROZEN = section_row(20.0, state=State.FROZEN, verdict=Verdict.LATE)


def scene(path: Path, records: Sequence[PeriodRecord], *, now_s: float = 33.0, plant: Plant = PLANT) -> Scene:
    """A scene of a journal with these periods, in which tank-3's target was moved to 30 cm."""
    file = write_journal(path / "j", plant, records, outcomes=[applied("target tank-3.level 30", 0)])
    with JournalReader(file) as reader:
        followed = follow(reader, Followed())
    lines = [
        Line(32.0, Source.GATEWAY, "tank-2 goes from driving to frozen: blind."),
        Line(33.0, Source.GATEWAY, "tank-2 goes from frozen to holding: blind.", for_person=True),
    ]
    return Scene(plant, "bench", "full", followed, now_s, 60.0, story_of(plant), lines, "runs/x")


def rendered(shown: Scene, width: int = 110, height: int = 30, *, colour: bool = False) -> str:
    """The view as text; with `colour`, styles as escape sequences."""
    console = Console(width=width, color_system="standard" if colour else None, force_terminal=colour, _environ={})
    with console.capture() as capture:
        console.print(picture(shown, ASCII, width, height))
    return capture.get()


def row_of(text: str, section: str) -> str:
    """The line of a section."""
    (row,) = [line for line in text.splitlines() if line[2:].startswith(f"{section} ") and "pump" in line]
    return row


def test_the_view_of_a_held_section(tmp_path: Path) -> None:
    """The whole picture of one moment, as it stands on a terminal."""
    shown = scene(tmp_path, [quiet_period(0), period(1, tanks(section_row(21.0), HELD, FROZEN))])
    lines = [line.rstrip() for line in rendered(shown).splitlines()]
    assert lines == [
        "row on site bench, authority full   period 101   00:33 of 01:00",
        "now   00:30 tank-2's transmitter freezes, and still says all is well. tank-2 must freeze, then hold; its",
        "neighbours plan around it.",
        "next  00:39 transmitter mended, in 6 s",
        "",
        "  tank-1  driving             ................|o...............         21.00 cm    +2.5 %  pump   48.0 %",
        "! tank-2  HOLDING blind       ................|................      frozen                 pump   48.0 %",
        "~ tank-3  frozen late         ................o.........|......         20.00 cm   -25.0 %  pump   48.0 %",
        "",
        "work  ..  9 ms of 450, least slack lately 440 ms",
        "missed periods: tank-2 1, tank-3 1",
        "! tank-2 waits for a person: lengthsman ask --at runs/x rearm tank-2",
        "",
        "00:32  gateway  tank-2 goes from driving to frozen: blind.",
        "00:33  gateway  ! tank-2 goes from frozen to holding: blind.",
    ]


def test_all_is_grey_when_all_is_well(tmp_path: Path) -> None:
    """No section row of a driving plant has any colour but grey."""
    shown = replace(scene(tmp_path, [quiet_period(0)]), lines=[])
    text = rendered(shown, colour=True)
    assert "\x1b[90m" in text
    assert "\x1b[1;33m" not in text


def test_what_waits_for_a_person_has_a_colour_a_mark_and_a_word(tmp_path: Path) -> None:
    """The held section is coloured, marked and named; the frozen one is bright and marked, without a colour."""
    text = rendered(scene(tmp_path, [period(0, tanks(section_row(20.0), HELD, FROZEN))]), colour=True)
    (held,) = [line for line in text.splitlines() if "! tank-2\x1b" in line]
    (frozen,) = [line for line in text.splitlines() if "~ tank-3" in line]
    assert "\x1b[1;33m! tank-2" in held
    assert "HOLDING" in held
    assert "\x1b[1;33m" not in frozen


def test_a_reading_that_is_not_believed_is_named_not_shown(tmp_path: Path) -> None:
    """Its quality stands where its value would, and no mark on the scale."""
    row = row_of(rendered(scene(tmp_path, [period(0, tanks(section_row(20.0), HELD, FROZEN))])), "tank-2")
    assert "frozen" in row
    assert "35.00" not in row
    assert "o" not in row.split("pump")[0].split("blind")[1].replace("frozen", "")


def test_nothing_written_is_said(tmp_path: Path) -> None:
    """A section that wrote nothing says so instead of showing a number."""
    watched = section_row(20.0, state=State.WATCHING, written=float("nan"))
    row = row_of(rendered(scene(tmp_path, [period(0, tanks(watched, watched, watched))])), "tank-1")
    assert row.startswith("- tank-1  watching")
    assert "pump nothing written" in row


def test_a_plant_that_does_not_fit_shows_what_matters(tmp_path: Path) -> None:
    """With room for two sections: the one farthest off its target and the held one, and how many more there are."""
    rows = [section_row(20.0) for _ in range(8)]
    rows[4], rows[6] = HELD, section_row(26.0)
    plant = row_plant(8)
    shown = scene(tmp_path, [period(0, tanks(*rows))], plant=plant)
    text = rendered(replace(shown, lines=[]), height=HEAD_ROWS + 3)
    assert [line[2:8] for line in text.splitlines() if line[2:].startswith("tank-")][:2] == ["tank-3", "tank-5"]
    assert "and 6 more: 6 driving" in text


def test_before_the_first_period_there_is_only_the_head(tmp_path: Path) -> None:
    """Nothing is known yet, and nothing is made up."""
    shown = replace(scene(tmp_path, []), now_s=0.0)
    text = rendered(shown)
    assert "tank-1 " not in text.split("00:32")[0].split("next")[1]
    assert "work" not in text


@pytest.mark.parametrize(("width", "height"), [(80, 24), (120, 40), (200, 60)])
def test_tarn_row_fits_on_a_terminal_of_any_usual_size(tmp_path: Path, width: int, height: int) -> None:
    """Eight tanks, five lines and a held section in 80 columns and 24 rows, with nothing cut off at the right."""
    plant = read_plant(TARN_ROW)
    rows = [section_row(20.0, more=(HELD.measured[0],) if i == 4 else ()) for i in range(8)]
    rows[3] = HELD
    shown = scene(tmp_path, [period(0, rows)], plant=plant)
    line = Line(33.0, Source.GATEWAY, "A sentence that is longer than any terminal is wide: " + 20 * "on and on ")
    lines = rendered(replace(shown, lines=[line] * 5), width, height).splitlines()
    assert len(lines) < height
    assert max(len(one) for one in lines) <= width
    assert sum(one[2:].startswith("tank-") and "pump" in one for one in lines) == 8
    assert all(one.rstrip().endswith("%") for one in lines if "pump" in one)
