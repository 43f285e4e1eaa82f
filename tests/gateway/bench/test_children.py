"""Child processes: ready when they say so, stopped in bounded time, and their last words when they die."""

from __future__ import annotations

import signal
from pathlib import Path

import pytest

from gateway.bench.children import Child, ChildEndedError


async def test_a_child_is_ready_when_it_says_its_line(tmp_path: Path) -> None:
    """The rest of the line is handed over."""
    child = await Child.start("Help", ["--help"], tmp_path / "log")
    assert await child.line_with("Usage: ", 30.0) == "lengthsman [OPTIONS] COMMAND [ARGS]..."
    assert await child.ended() == 0
    assert await child.stop() == 0


async def test_a_child_that_ends_before_it_is_ready_leaves_its_last_words(tmp_path: Path) -> None:
    """Its exit code, its own message and the path of its log are in the error."""
    child = await Child.start("The gateway", ["run", str(tmp_path / "none.toml"), "--site=bench"], tmp_path / "log")
    with pytest.raises(ChildEndedError) as caught:
        await child.line_with("listening ", 60.0)
    await child.stop()
    assert caught.value.code == 2
    assert "The gateway ended with exit code 2" in str(caught.value)
    assert "a file that can be read" in str(caught.value)
    assert str(tmp_path / "log") in str(caught.value)


async def test_a_child_that_is_never_ready_is_given_up(tmp_path: Path) -> None:
    """After the time it was given, with a message that names the time and the log."""
    child = await Child.start("The plant", ["plant", "--help"], tmp_path / "log")
    with pytest.raises(ChildEndedError, match=r"not ready within 0 s|ended with exit code 0"):
        await child.line_with("never said", 0.0)
    child.kill()
    await child.stop()


async def test_a_child_that_was_killed_is_said_to_have_been(tmp_path: Path) -> None:
    """The signal is named instead of an exit code."""
    child = await Child.start("The gateway", ["ask", "--help"], tmp_path / "log")
    child.kill()
    assert await child.ended() == -signal.SIGKILL
    await child.stop()
    assert "was killed by signal 9" in str(child.failure())


def test_records_are_no_last_words(tmp_path: Path) -> None:
    """Of a log only lines a person wrote for persons are repeated, the last few."""
    log = tmp_path / "log"
    log.write_text('{"event":"one"}\nOur fault, not yours: it broke\n{"event":"two"}\n', encoding="utf-8")
    child = Child("The gateway", None, log)  # type: ignore[arg-type]
    assert child.last_words() == "Our fault, not yours: it broke"
