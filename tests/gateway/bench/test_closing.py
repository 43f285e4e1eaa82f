"""The summary: figures as they are, what failed marked by a word, and the same facts as data."""

from __future__ import annotations

import json
from dataclasses import replace
from math import nan

import pytest

from gateway.bench.closing import closing_words, exit_code_of, facts_of, words_in_lines
from gateway.bench.criteria import Criterion
from gateway.bench.figures import Figures, SectionFigures
from gateway.cli.facts import json_text
from gateway.deadline import Quantiles
from gateway.exit_codes import ExitCode
from gateway.hold import State
from gateway.verdict import Verdict
from tests.gateway.bench.rig import row_plant

PLANT = row_plant()
WELL = SectionFigures("tank-1", "tank-1.level", "cm", 20.02, 20.0, 0.0501, {State.DRIVING: 120}, {}, 0, State.DRIVING)
HELD = SectionFigures(
    "tank-2",
    "tank-2.level",
    "cm",
    nan,
    20.0,
    nan,
    {State.DRIVING: 60, State.HOLDING: 50, State.FROZEN: 10},
    {Verdict.BLIND: 14, Verdict.LATE: 2},
    3,
    State.HOLDING,
)
FIGURES = Figures(
    run="20250102-030000-test",
    periods=120,
    skipped=0,
    seconds=60.0,
    window_s=30.0,
    sections=(WELL, HELD),
    work_us=Quantiles(120, 13_800.0, 249_700.0, 302_600.0, 302_660.0),
    slack_us=None,
    out_of_limits=0,
    lost=0,
    ended=True,
)
PASSED, FAILED = Criterion("no period skipped", True, "0"), Criterion("nothing lost from the journal", False, "2")


def text(figures: Figures = FIGURES) -> list[str]:
    """The summary as lines."""
    return words_in_lines(closing_words(PLANT, figures, (PASSED, FAILED))).splitlines()


def line(start: str) -> str:
    """The one line that begins like this."""
    (found,) = [one for one in text() if one.startswith(start)]
    return found


def test_a_section_that_did_well() -> None:
    """State, value, target, mean error with its sign, periods by state."""
    assert line("tank-1").split() == [
        "tank-1", "driving", "20.02", "cm", "20.00", "cm", "+0.050", "%", "120", "driving", "none",
    ]  # fmt: skip


def test_a_section_that_holds_and_missed() -> None:
    """It is marked, numbers that do not exist are dashes, misses are counted and those nothing explains named."""
    found = line("tank-2")
    assert "HOLDING !" in found
    assert found.split()[3:7] == ["–", "20.00", "cm", "–"]
    assert "60 driving, 50 holding, 10 frozen" in found
    assert found.endswith("14 blind, 2 late; 3 of them unprovoked !")


def test_deadlines_are_in_milliseconds_and_absent_ones_are_dashes() -> None:
    """Median, 99 %, 99.9 % and worst; no slack when nothing was written."""
    assert line("work").split()[1::2] == ["13.8", "249.7", "302.6", "302.7"]
    assert line("slack").split() == ["slack", "–", "–", "–", "–"]
    assert any("of 450 ms to the write cut-off" in one for one in text())


def test_a_criterion_that_failed_is_said_in_words() -> None:
    """Yes or NO with a mark, the criterion, and what was found."""
    assert line("yes").split()[0:4] == ["yes", "no", "period", "skipped"]
    assert line("NO !").rstrip().endswith("2")


def test_lines_end_where_their_text_ends() -> None:
    """No trailing blanks, and no line broken to a terminal's width."""
    assert all(one == one.rstrip() for one in text())
    assert len([one for one in text() if one.startswith("tank-")]) == 2


@pytest.mark.parametrize(
    ("sections", "criteria", "code"),
    [
        ((WELL,), (PASSED,), ExitCode.DONE),
        ((WELL,), (PASSED, FAILED), ExitCode.CRITERIA_FAILED),
        ((WELL, HELD), (PASSED,), ExitCode.HELD),
        ((WELL, HELD), (FAILED,), ExitCode.HELD),
    ],
)
def test_how_a_bench_ends(
    sections: tuple[SectionFigures, ...], criteria: tuple[Criterion, ...], code: ExitCode
) -> None:
    """A section on hold waits for a person, which matters more than a criterion."""
    assert exit_code_of(replace(FIGURES, sections=sections), criteria) is code


def test_the_facts_are_json_and_say_the_same() -> None:
    """Every figure is there, what is no number is null, and the exit code is the command's."""
    facts = json.loads(
        json_text(facts_of(FIGURES, (PASSED, FAILED), ExitCode.HELD, {"journal": "runs/x/journal.sqlite"}))
    )
    assert facts["sections"][1]["value"] is None
    assert facts["sections"][1]["misses"] == {"blind": 14, "late": 2}
    assert facts["work_us"]["p999"] == 302_600.0
    assert facts["slack_us"] is None
    assert facts["held"] == ["tank-2"]
    assert facts["unprovoked"] == 3
    assert facts["criteria"][1] == {"name": "nothing lost from the journal", "passed": False, "found": "2"}
    assert facts["exit"] == 4
    assert facts["wrote"] == {"journal": "runs/x/journal.sqlite"}
