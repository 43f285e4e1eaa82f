"""However a command fails: one message for the person, one code for the shell, never a traceback on the terminal."""

from __future__ import annotations

import re
import subprocess
import sys
from pathlib import Path

import click
import pytest

from gateway.cli.commands import COMMANDS
from gateway.cli.faults import CommandError, run_command
from gateway.exit_codes import ExitCode
from tests.gateway.cli.rig import PLANT, lengthsman, plant_file


def raising(error: BaseException) -> click.Command:
    """A command that raises this."""

    @click.command("broken")
    def broken() -> None:
        """Be broken."""
        raise error

    return broken


def test_help_lists_every_command_without_importing_any() -> None:
    """`--help` is quick: no command, no numerics and no wire library is imported for it."""
    code = (
        "import sys; from gateway.cli import main\n"
        "try: main(['--help'])\n"
        "except SystemExit as end: assert end.code == 0\n"
        "heavy = {'numpy', 'numba', 'asyncua', 'pydantic', 'pint', 'rich', 'apsw', 'gateway.cli.bench'}\n"
        "assert not heavy & set(sys.modules), heavy & set(sys.modules)"
    )
    ended = subprocess.run([sys.executable, "-W", "error", "-c", code], capture_output=True, text=True, check=False)
    assert ended.returncode == 0, ended.stderr
    assert all(re.search(rf"^  {name} ", ended.stdout, re.MULTILINE) for name in COMMANDS)


@pytest.mark.parametrize("name", list(COMMANDS))
def test_every_command_has_help(capsys: pytest.CaptureFixture[str], name: str) -> None:
    """Each command of the table exists and explains itself."""
    ended = lengthsman(capsys, name, "--help")
    assert ended.code == 0
    assert ended.out.startswith(f"Usage: lengthsman {name} ")


def test_an_unknown_command_gets_the_nearest_one(capsys: pytest.CaptureFixture[str]) -> None:
    """The message names what was read, what there is, and the nearest."""
    ended = lengthsman(capsys, "chek")
    assert ended.code == 2
    assert ended.err == (
        "lengthsman: there is no command “chek”; commands are check, plant, run, bench, ask; nearest: check\n"
    )


@pytest.mark.parametrize("arguments", [["run"], ["run", "x.toml"], ["check", "x.toml", "--frob"], ["ask"]])
def test_a_wrong_call_is_one_message(capsys: pytest.CaptureFixture[str], arguments: list[str]) -> None:
    """The command, what is wrong, and where help is; one line, code 2."""
    ended = lengthsman(capsys, *arguments)
    assert ended.code == 2
    assert ended.err.count("\n") == 1
    assert ended.err.startswith(f"lengthsman {arguments[0]}: ")
    assert f"Try “lengthsman {arguments[0]} --help”." in ended.err


@pytest.mark.parametrize("command", [["check"], ["plant"], ["run", "--site=bench"], ["bench"]])
def test_a_plant_file_is_answered_with_all_its_mistakes(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, command: list[str]
) -> None:
    """Every command that reads one prints the same block, code 2, and starts nothing."""
    text = PLANT.replace('unit = "cm"', 'unit = "cn"').replace("horizon = 8", "horizn = 8")
    ended = lengthsman(capsys, command[0], plant_file(tmp_path, text), *command[1:])
    assert ended.code == 2
    assert ended.err.startswith("three.toml: ")
    assert "horizn" in ended.err
    assert "nearest: horizon" in ended.err
    assert '"cn"' in ended.err
    assert ended.out == ""
    assert [path.name for path in tmp_path.iterdir()] == ["three.toml"]


@pytest.mark.parametrize("command", ["check", "plant", "run", "bench"])
def test_an_unknown_site_gets_the_nearest_one(capsys: pytest.CaptureFixture[str], tmp_path: Path, command: str) -> None:
    """Sites are named, and the nearest one suggested."""
    ended = lengthsman(capsys, command, plant_file(tmp_path), "--site=lve")
    assert ended.code == 2
    assert "no site is called “lve”; sites are bench, live; nearest: live" in ended.err


@pytest.mark.parametrize("text", ["3", "soon", "-5s", "0 s", "5 cm", "nan s", "9999999 h"])
def test_a_time_that_is_none_is_refused(capsys: pytest.CaptureFixture[str], text: str) -> None:
    """A number without unit, a word, nothing, a negative time, a length, and for ever."""
    ended = lengthsman(capsys, "run", "x.toml", "--site=bench", f"--for={text}")
    assert ended.code == 2
    assert f"“{text}” is " in ended.err


@pytest.mark.parametrize("text", ["127.0.0.1:4840", "http://a:1", "opc.tcp://a", "opc.tcp://:1", "opc.tcp://a:b"])
def test_an_endpoint_that_is_none_is_refused(capsys: pytest.CaptureFixture[str], text: str) -> None:
    """Another scheme, no port, no host, a port of letters."""
    ended = lengthsman(capsys, "plant", "x.toml", f"--endpoint={text}")
    assert ended.code == 2
    assert f"“{text}” is no endpoint; give opc.tcp://host:port." in ended.err


def test_our_own_fault_is_one_sentence_and_a_file(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Code 70; the traceback stands in a file whose path is said."""
    monkeypatch.setattr("tempfile.tempdir", str(tmp_path))
    assert run_command(raising(ZeroDivisionError("by zero\nand more")), []) is ExitCode.OUR_FAULT
    said = capsys.readouterr().err
    assert said.count("\n") == 1
    assert said.startswith("Our fault, not yours: ZeroDivisionError: by zero; the traceback is in ")
    path = Path(said.rsplit(" ", 1)[1].strip())
    assert path.parent == tmp_path
    assert "ZeroDivisionError: by zero" in path.read_text(encoding="utf-8")


def test_a_traceback_that_cannot_be_kept_is_said(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Nowhere to write: then it is printed, since it must not be lost."""
    monkeypatch.setattr("tempfile.tempdir", str(tmp_path / "none"))
    monkeypatch.setattr(Path, "cwd", lambda: tmp_path / "none")
    run_command(raising(ZeroDivisionError("by zero")), [])
    said = capsys.readouterr().err
    assert "could not be kept anywhere" in said
    assert "Traceback (most recent call last)" in said


@pytest.mark.parametrize("code", list(ExitCode))
def test_a_command_ends_with_the_code_of_its_error(capsys: pytest.CaptureFixture[str], code: ExitCode) -> None:
    """The message is printed as it is, whatever the code."""
    assert run_command(raising(CommandError("This and that.", code)), []) is code
    assert capsys.readouterr().err == "This and that.\n"


@pytest.mark.parametrize("error", [KeyboardInterrupt(), click.Abort()], ids=["interrupt", "abort"])
def test_a_person_who_stops_a_command_is_no_fault(capsys: pytest.CaptureFixture[str], error: BaseException) -> None:
    """Ctrl-C is an end like any other."""
    assert run_command(raising(error), []) is ExitCode.DONE
    assert capsys.readouterr().err.strip() == "Stopped."
