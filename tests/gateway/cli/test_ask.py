"""`ask`: it finds the one gateway that is meant, hands over the words, and tells its answer."""

from __future__ import annotations

import json
import os
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from threading import Event, Thread

import pytest

from gateway.cli.desks import requests_file
from gateway.cli.faults import CommandError
from gateway.exit_codes import ExitCode
from gateway.requests import RequestDesk, RequestState
from tests.gateway.cli.rig import lengthsman
from tests.gateway.requests.samples import PLANT


@contextmanager
def gateway(folder: Path, run: str = "run-1", state: RequestState = RequestState.APPLIED) -> Iterator[RequestDesk]:
    """A gateway that answers every request like this."""
    folder.mkdir(parents=True, exist_ok=True)
    desk = RequestDesk.open(
        folder / "requests.sqlite", PLANT, run, wall_ns=time.time_ns, tell=lambda _: None, poll_s=0.01
    )
    over = Event()

    def periods() -> None:
        while not over.wait(0.01):
            for asked in desk.take(time.time_ns()).asked:
                reason = "" if state is RequestState.APPLIED else "the section is not on hold"
                desk.answer(asked, state, reason, time.time_ns(), 7)

    thread = Thread(target=periods)
    thread.start()
    try:
        yield desk
    finally:
        over.set()
        thread.join()
        desk.close()


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A working folder of our own."""
    monkeypatch.chdir(tmp_path)
    return tmp_path


def test_the_only_gateway_is_found_and_its_answer_told(capsys: pytest.CaptureFixture[str], here: Path) -> None:
    """Nothing but the words is needed where one gateway runs."""
    with gateway(here / "runs" / "two-tanks"):
        ended = lengthsman(capsys, "ask", "hold", "tank-1")
    assert (ended.code, ended.out) == (0, "“hold tank-1” is applied in period 7\n")


def test_a_refusal_is_code_1_and_has_its_reason(capsys: pytest.CaptureFixture[str], here: Path) -> None:
    """What the gateway says is what the person reads."""
    with gateway(here / "runs" / "two-tanks", state=RequestState.REFUSED):
        ended = lengthsman(capsys, "ask", "rearm", "tank-1")
    assert ended.code == 1
    assert ended.out == "“rearm tank-1” is refused in period 7: the section is not on hold\n"


def test_words_the_gateway_does_not_know_are_refused_with_the_nearest(
    capsys: pytest.CaptureFixture[str], here: Path
) -> None:
    """The gateway reads them: it knows its plant."""
    with gateway(here / "runs" / "two-tanks"):
        ended = lengthsman(capsys, "ask", "hold", "tenk-1")
    assert ended.code == 1
    assert "nearest: tank-1" in ended.out


def test_a_negative_value_is_a_word_not_an_option(capsys: pytest.CaptureFixture[str], here: Path) -> None:
    """`target TAG -5` reaches the gateway, which refuses it for what it is."""
    with gateway(here / "runs" / "two-tanks"):
        ended = lengthsman(capsys, "ask", "target", "tank-1.level", "-5")
    assert ended.code == 1
    assert "outside its limits" in ended.out


def test_the_answer_as_json(capsys: pytest.CaptureFixture[str], here: Path) -> None:
    """State, reason, period, run, code."""
    with gateway(here / "runs" / "two-tanks"):
        facts = json.loads(lengthsman(capsys, "ask", "--json", "hold", "tank-1").out)
    assert facts == {"number": 1, "run": "run-1", "state": "applied", "reason": "", "k": 7, "exit": 0}


def test_nobody_there_is_code_3(capsys: pytest.CaptureFixture[str], here: Path) -> None:
    """No gateway below `runs`: where was looked, and what to do."""
    ended = lengthsman(capsys, "ask", "hold", "tank-1")
    assert ended.code == 3
    assert f"no running gateway was found below {here / 'runs'}" in ended.err
    assert "--at" in ended.err


def test_a_gateway_that_has_ended_is_nobody(here: Path) -> None:
    """Its file is still there, but it takes no requests."""
    with gateway(here / "runs" / "two-tanks"):
        pass
    with pytest.raises(CommandError) as caught:
        requests_file(None)
    assert caught.value.code is ExitCode.UNREACHABLE


def test_a_gateway_that_was_killed_is_nobody(here: Path) -> None:
    """It left its desk open, but its process is gone."""
    folder = here / "runs" / "two-tanks"
    with gateway(folder):
        (folder / "requests.sqlite.lock").write_text(f"{_free_pid()}\n")
        with pytest.raises(CommandError, match="no running gateway"):
            requests_file(None)


def test_two_gateways_are_never_guessed_between(here: Path) -> None:
    """A request must not reach the wrong plant: both are listed, with what to say to mean each."""
    with (
        gateway(here / "runs" / "two-tanks"),
        gateway(here / "runs" / "two-tanks" / "bench-1", "run-2"),
        pytest.raises(CommandError) as caught,
    ):
        requests_file(None)
    assert caught.value.code is ExitCode.WRONG_CALL
    assert "2 gateways take requests; say which one is meant:" in str(caught.value)
    assert f"--at {Path('runs/two-tanks/bench-1')}   (Two Tanks, run run-2)" in str(caught.value)


@pytest.mark.parametrize(
    "given",
    [lambda folder: folder, lambda folder: folder / "journal.sqlite", lambda folder: folder / "requests.sqlite"],
    ids=["folder", "journal", "requests"],
)
def test_a_place_may_be_given_three_ways(here: Path, given: Callable[[Path], Path]) -> None:
    """The folder, the journal in it, or the file of requests itself."""
    folder = here / "elsewhere"
    with gateway(folder):
        assert requests_file(given(folder)) == folder / "requests.sqlite"


def test_a_place_without_requests_is_code_3(here: Path) -> None:
    """The path that was looked at is named."""
    with pytest.raises(CommandError, match="there is no file of requests at") as caught:
        requests_file(here)
    assert caught.value.code is ExitCode.UNREACHABLE


def test_files_that_are_no_requests_are_passed_over(here: Path) -> None:
    """Something else under that name below `runs` does not stop the search."""
    (here / "runs" / "junk").mkdir(parents=True)
    (here / "runs" / "junk" / "requests.sqlite").write_text("not ours")
    (here / "runs" / "junk" / "requests.sqlite.lock").write_text(str(os.getpid()))
    with gateway(here / "runs" / "two-tanks"):
        assert requests_file(None) == Path("runs/two-tanks/requests.sqlite")


def _free_pid() -> int:
    """The number of a process that has ended."""
    pid = os.fork()
    if pid == 0:
        os._exit(0)
    os.waitpid(pid, 0)
    return pid
