"""`plant`: the simulated plant's own process, its address, its typed lines, and what is in its way."""

from __future__ import annotations

import asyncio
import contextlib
import os
import signal
import socket
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

from gateway.cli.serving import Lines, answer
from gateway.clock import VirtualClock
from gateway.plantfile import read_plant_text
from gateway.simulated import simulated_plant
from sim_plant.direct import DirectPlant
from tests.gateway.cli.rig import PLANT, lengthsman, plant_file

GUARD_S = 60.0


def plant() -> DirectPlant:
    """The simulated three tanks, not served anywhere."""
    return DirectPlant(simulated_plant(read_plant_text(PLANT, "three.toml")), VirtualClock())


@contextlib.contextmanager
def typed() -> Iterator[tuple[int, int]]:
    """A pipe that stands for standard input: read end, write end."""
    reads, writes = os.pipe()
    try:
        yield reads, writes
    finally:
        for descriptor in (reads, writes):
            with contextlib.suppress(OSError):
                os.close(descriptor)


def test_a_line_is_answered_by_what_it_did() -> None:
    """The plant's own sentence."""
    assert answer(plant(), "freeze tank-2.level") == "provoked: 'freeze tank-2.level'"


def test_a_wrong_line_is_refused_with_the_nearest_right_one() -> None:
    """It stays one line, and the plant goes on."""
    said = answer(plant(), "freez tank-2.level")
    assert said.startswith("refused: ")
    assert "nearest: 'freeze'" in said
    assert "\n" not in said


def test_help_lists_every_form_of_line() -> None:
    """In one line."""
    said = answer(plant(), "help")
    assert all(word in said for word in ("bias SIGNAL VALUE", "freeze SIGNAL", "permit off|on", "clear SIGNAL"))
    assert "\n" not in said


async def test_lines_are_answered_one_by_one_however_they_arrive(capsys: pytest.CaptureFixture[str]) -> None:
    """Two in one piece, one in two pieces, blank ones passed over; the end of input is told."""
    ended = asyncio.Event()
    heard: list[str] = []

    def hear(line: str) -> str:
        heard.append(line)
        return f"heard {line}"

    with typed() as (reads, writes):
        lines = Lines(reads, hear, ended.set)
        lines.start()
        os.write(writes, b"one\n\n  two  \nth")
        os.write(writes, b"ree\nnever ended")
        os.close(writes)
        async with asyncio.timeout(GUARD_S):
            await ended.wait()
        lines.stop()
        lines.stop()
    assert heard == ["one", "two", "three"]
    assert capsys.readouterr().out == "heard one\nheard two\nheard three\n"


async def test_an_input_that_cannot_be_waited_for_is_not_read(tmp_path: Path) -> None:
    """An ordinary file, or no standard input at all: the plant is served all the same."""
    with (tmp_path / "lines").open("w+") as file:
        for descriptor in (file.fileno(), None):
            lines = Lines(descriptor, str, lambda: None)
            lines.start()
            lines.stop()


@pytest.mark.wire
def test_a_port_that_is_taken_is_said(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    """The endpoint, why, and the way out; code 2."""
    with socket.create_server(("127.0.0.1", 0)) as taken:
        endpoint = f"opc.tcp://127.0.0.1:{taken.getsockname()[1]}"
        ended = lengthsman(capsys, "plant", plant_file(tmp_path), f"--endpoint={endpoint}", "--quiet")
    assert ended.code == 2
    assert f"{endpoint} cannot be listened at: Address already in use" in ended.err
    assert "port 0 takes a free one" in ended.err
    assert ended.out == ""


@pytest.mark.wire
def test_the_process_says_where_it_listens_answers_lines_and_stops_when_told(tmp_path: Path) -> None:
    """The first line of its output is machine-readable; SIGINT is an orderly end."""
    process = subprocess.Popen(
        [sys.executable, "-m", "gateway.cli", "plant", str(plant_file(tmp_path)),
         "--endpoint=opc.tcp://127.0.0.1:0", "--quiet"],
        stdin=subprocess.PIPE, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True,
    )  # fmt: skip
    assert process.stdin is not None
    assert process.stdout is not None
    try:
        listening = process.stdout.readline()
        process.stdin.write("set tank-9.consumer 3\n")
        process.stdin.flush()
        said = process.stdout.readline()
        process.send_signal(signal.SIGINT)
        out, err = process.communicate(timeout=GUARD_S)
    finally:
        process.kill()
    assert listening.startswith("listening opc.tcp://127.0.0.1:")
    assert int(listening.rsplit(":", 1)[1]) > 0
    assert said.startswith("refused: 'set tank-9.consumer 3'")
    assert (process.returncode, out, err) == (0, "", "")


def test_a_start_the_plant_cannot_rest_at_is_refused(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    """Forty percent of span above a target of 35 cm is above the rim: the message names the file; code 2."""
    text = PLANT.replace("target = 20", "target = 35").replace('"70 cm^3/s"', '"40 cm^3/s"')
    file = plant_file(tmp_path, text)
    ended = lengthsman(capsys, "plant", file, "--away=40")
    assert ended.code == 2
    assert ended.err.startswith(f"{file}: ")
