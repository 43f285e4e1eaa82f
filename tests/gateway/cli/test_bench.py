"""`bench`: its folder, its children's failures, and what it prints when it is over. The story itself runs elsewhere."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from gateway.bench.bench import BenchOptions, BenchResult
from gateway.bench.children import ChildEndedError
from gateway.bench.figures import Figures
from tests.gateway.bench.test_closing import FAILED, FIGURES, PASSED, WELL
from tests.gateway.cli.rig import lengthsman, plant_file

GOOD = replace(FIGURES, sections=(WELL,))


class Stand:
    """Stands in for the bench: hands over what it is told to, and remembers its options."""

    result: BenchResult | None = BenchResult(GOOD, (PASSED,), stopped=False)
    error: Exception | None = None
    options: BenchOptions | None = None

    def __init__(self, options: BenchOptions, *_: Any) -> None:
        Stand.options = options

    async def run(self) -> BenchResult | None:
        """Be a bench that went like this."""
        if Stand.error is not None:
            raise Stand.error
        return Stand.result


@pytest.fixture(autouse=True)
def stand(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> type[Stand]:
    """No child process is started, and files go below a folder of our own."""
    monkeypatch.chdir(tmp_path)
    monkeypatch.setattr("gateway.cli.bench.Bench", Stand)
    for name, value in (("result", BenchResult(GOOD, (PASSED,), stopped=False)), ("error", None), ("options", None)):
        monkeypatch.setattr(Stand, name, value)
    return Stand


def options_of(stand: type[Stand]) -> BenchOptions:
    """What reached the bench."""
    assert stand.options is not None
    return stand.options


def test_it_takes_a_free_port_a_new_folder_and_the_story_s_time(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, stand: type[Stand]
) -> None:
    """So that two benches can run at once, and none goes on with another's journal."""
    lengthsman(capsys, "bench", plant_file(tmp_path))
    first = options_of(stand)
    lengthsman(capsys, "bench", plant_file(tmp_path))
    second = options_of(stand)
    assert first.site.endpoint == "opc.tcp://127.0.0.1:0"
    assert first.files.folder.parent == Path("runs/three-tanks")
    assert first.files.folder != second.files.folder
    assert first.for_s == pytest.approx(60.0)
    assert [step.name for step in first.planned][-1] == "slow synthesis"


def test_a_quiet_bench_breaks_nothing(capsys: pytest.CaptureFixture[str], tmp_path: Path, stand: type[Stand]) -> None:
    """For long runs: only the settling and a target change."""
    lengthsman(capsys, "bench", plant_file(tmp_path), "--quiet-plant", "--for=20min")
    assert options_of(stand).for_s == 1200.0
    assert not any(step.provoke for step in options_of(stand).planned)


def test_a_story_that_does_not_fit_is_said_to_be_cut(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, stand: type[Stand]
) -> None:
    """What is left out is named; what is left in is what counts."""
    ended = lengthsman(capsys, "bench", plant_file(tmp_path), "--for=40s")
    assert "The time is too short for: rearm, slow synthesis." in ended.out
    assert [step.name for step in options_of(stand).planned][-1] == "transmitter mended"


def test_the_summary_is_printed_written_and_its_paths_named(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, stand: type[Stand]
) -> None:
    """Table, criteria, paths; the file has the same facts."""
    ended = lengthsman(capsys, "bench", plant_file(tmp_path), "--out=here")
    assert ended.code == 0
    assert "tank-1   driving" in ended.out
    assert "yes  no period skipped" in ended.out
    assert "journal        here/journal.sqlite\n" in ended.out
    facts = json.loads((tmp_path / "here" / "summary.json").read_text(encoding="utf-8"))
    assert facts["run"] == GOOD.run
    assert facts["wrote"]["summary"] == "here/summary.json"
    assert options_of(stand).files.folder == Path("here")


def test_json_is_alone_on_standard_output(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    """Everything else goes to standard error."""
    ended = lengthsman(capsys, "bench", plant_file(tmp_path), "--json", "--for=40s")
    assert json.loads(ended.out)["periods"] == 120
    assert "The time is too short" in ended.err


@pytest.mark.parametrize(
    ("figures", "criteria", "code"),
    [(GOOD, (PASSED,), 0), (GOOD, (PASSED, FAILED), 1), (FIGURES, (PASSED,), 4)],
)
def test_how_it_went_is_its_code(
    capsys: pytest.CaptureFixture[str],
    tmp_path: Path,
    stand: type[Stand],
    figures: Figures,
    criteria: tuple[Any, ...],
    code: int,
) -> None:
    """Done, criteria failed, a section on hold."""
    stand.result = BenchResult(figures, criteria, stopped=False)
    assert lengthsman(capsys, "bench", plant_file(tmp_path)).code == code


@pytest.mark.parametrize(("child_code", "code"), [(2, 2), (3, 3), (70, 70), (1, 70), (-9, 70), (None, 70)])
def test_a_child_that_dies_ends_the_bench_with_its_words(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, stand: type[Stand], child_code: int | None, code: int
) -> None:
    """A wrong call or an unreachable peer stays what it is; anything else is our fault."""
    stand.error = ChildEndedError("The gateway", child_code, "The gateway was killed by signal 9")
    ended = lengthsman(capsys, "bench", plant_file(tmp_path))
    assert (ended.code, ended.err) == (code, "The gateway was killed by signal 9\n")


def test_stopped_before_the_first_period_is_no_failure(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, stand: type[Stand]
) -> None:
    """Nothing was driven, so there is nothing to judge."""
    stand.result = None
    ended = lengthsman(capsys, "bench", plant_file(tmp_path))
    assert ended.code == 0
    assert "Stopped before the first period" in ended.out


def test_a_folder_with_a_journal_is_not_used_again(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    """A run that did not end in order would make every section start on hold."""
    (tmp_path / "old").mkdir()
    (tmp_path / "old" / "journal.sqlite").touch()
    ended = lengthsman(capsys, "bench", plant_file(tmp_path), "--out=old")
    assert (ended.code, ended.err) == (2, "old has a journal already; give a new folder with --out\n")


@pytest.mark.parametrize("out", ["three.toml", "three.toml/below", "/proc/none"])
def test_a_folder_that_cannot_be_made_is_said(capsys: pytest.CaptureFixture[str], tmp_path: Path, out: str) -> None:
    """A file in its place, a file in its way, a place nobody may write to."""
    ended = lengthsman(capsys, "bench", plant_file(tmp_path), f"--out={out}")
    assert ended.code == 2
    assert ended.err.startswith(f"{out} cannot be written: ")
    assert "--out" in ended.err


def test_a_live_site_is_never_benched(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    """Faults are provoked on a bench only."""
    ended = lengthsman(capsys, "bench", plant_file(tmp_path), "--site=live")
    assert ended.code == 2
    assert "the bench drives bench sites only" in ended.err


def test_a_summary_that_cannot_be_written_is_said_and_printed(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """A full disk at the end costs the file, not the figures."""
    (tmp_path / "here" / "summary.json").mkdir(parents=True)
    ended = lengthsman(capsys, "bench", plant_file(tmp_path), "--out=here")
    assert ended.code == 0
    assert "The summary could not be written: Is a directory" in ended.out
    assert "tank-1   driving" in ended.out
    assert "summary.json" not in ended.out.split("tank-1   driving")[1]
