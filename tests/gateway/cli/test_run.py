"""`run`: what it hands to control, what it says when it is over, and the cautions of a live site."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from gateway.cli.run import CAUTIONS
from gateway.control import RunOptions, RunResult, StartError
from gateway.deadline import DeadlineSummary, Quantiles
from gateway.exit_codes import ExitCode
from gateway.service import Tally
from tests.gateway.cli.rig import lengthsman, plant_file

SUMMARY = DeadlineSummary(
    periods=120,
    exact=True,
    quantiles={"slack_us": Quantiles(120, 434_900.0, 2.0, 1.0, 146_200.0)},
    sections={},
    period_s=0.5,
)
HELD = RunResult(ExitCode.HELD, "20250102-030000-test", Tally(120, 30, 1, ("tank-2",), True), SUMMARY)


@pytest.fixture
def handed(monkeypatch: pytest.MonkeyPatch) -> list[RunOptions]:
    """Options as they reach control, which ends with tank-2 on hold."""
    options: list[RunOptions] = []

    def control(given: RunOptions) -> RunResult:
        options.append(given)
        return HELD

    monkeypatch.setattr("gateway.cli.run.run_control", control)
    return options


def test_everything_asked_for_reaches_control(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, handed: list[RunOptions]
) -> None:
    """Site, authority, files, time in seconds, endpoint."""
    file, journal = plant_file(tmp_path), tmp_path / "night" / "journal.sqlite"
    lengthsman(
        capsys, "run", file, "--site=bench", "--authority=observe", f"--journal={journal}", "--for=20min",
        "--endpoint=opc.tcp://127.0.0.1:7",
    )  # fmt: skip
    assert handed == [
        RunOptions(
            plant_file=file,
            site="bench",
            journal=journal,
            requests=tmp_path / "night" / "requests.sqlite",
            authority="observe",
            for_s=1200.0,
            endpoint="opc.tcp://127.0.0.1:7",
        )
    ]


def test_files_go_below_runs_by_the_plant_s_name(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, handed: list[RunOptions]
) -> None:
    """Unless told otherwise."""
    lengthsman(capsys, "run", plant_file(tmp_path), "--site=bench")
    assert handed[0].journal == Path("runs/three-tanks/journal.sqlite")
    assert handed[0].requests == Path("runs/three-tanks/requests.sqlite")
    assert handed[0].for_s is None


def test_a_live_site_prints_its_cautions(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, handed: list[RunOptions]
) -> None:
    """Not a safety system, local codes, soak first: all of them, on standard error."""
    ended = lengthsman(capsys, "run", plant_file(tmp_path), "--site=live")
    assert ended.err == "".join(f"Caution: {caution}\n" for caution in CAUTIONS)
    assert "Not a safety system" in ended.err
    assert "licensed practice" in ended.err
    assert not handed[0].override


def test_a_bench_needs_no_cautions(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, handed: list[RunOptions]
) -> None:
    """Nobody can be hurt by a simulated plant."""
    assert lengthsman(capsys, "run", plant_file(tmp_path), "--site=bench").err == ""
    assert len(handed) == 1


@pytest.mark.usefixtures("handed")
def test_how_it_went_is_one_line_and_its_code_is_control_s(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    """Periods, misses, skipped periods, slack, who is on hold, and where the journal is."""
    ended = lengthsman(capsys, "run", plant_file(tmp_path), "--site=bench")
    assert ended.code == 4
    assert ended.out == (
        "Run 20250102-030000-test: 120 periods, 30 section-periods missed, 1 periods skipped. "
        "Slack 434.9 ms median, 146.2 ms least. On hold: tank-2. Journal: runs/three-tanks/journal.sqlite\n"
    )


@pytest.mark.usefixtures("handed")
def test_the_same_as_json(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    """One object on one line."""
    facts = json.loads(lengthsman(capsys, "run", plant_file(tmp_path), "--site=bench", "--json").out)
    assert (facts["run"], facts["missed"], facts["held"], facts["exit"]) == (HELD.run, 30, ["tank-2"], 4)
    assert facts["deadlines"]["quantiles"]["slack_us"]["worst"] == 146_200.0


def test_a_start_that_fails_is_its_message_and_its_code(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """What control says goes to the person as it is."""

    def refuse(_: RunOptions) -> RunResult:
        raise StartError("opc.tcp://127.0.0.1:1 cannot be reached: nobody listens there", ExitCode.UNREACHABLE)

    monkeypatch.setattr("gateway.cli.run.run_control", refuse)
    ended = lengthsman(capsys, "run", plant_file(tmp_path), "--site=bench")
    assert (ended.code, ended.err) == (3, "opc.tcp://127.0.0.1:1 cannot be reached: nobody listens there\n")


def test_without_record_is_handed_on(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, handed: list[RunOptions]
) -> None:
    """Somebody who insists is heard, by control, which says so loudly."""
    lengthsman(capsys, "run", plant_file(tmp_path), "--site=live", "--authority=full", "--without-record")
    assert handed[0].override
