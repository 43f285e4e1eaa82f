"""The simulated plant and the gateway as processes, and ways to wait for what they do."""

from __future__ import annotations

import signal
import subprocess
import sys
import time
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from types import TracebackType
from typing import IO, Self, TypeVar

from gateway.journal import JournalReader, PeriodRecord, StorageMissingError

ROOT = Path(__file__).parent.parent.parent
TARN_ROW = ROOT / "deploy" / "tarn-row.toml"
PATIENCE_S = 60.0
"""How long anything may take before a test gives up; never asserted as a speed."""

T = TypeVar("T")


def eventually(look: Callable[[], T | None], what: str) -> T:
    """Look until there is something to see."""
    give_up = time.monotonic() + PATIENCE_S
    while time.monotonic() < give_up:
        if seen := look():
            return seen
        time.sleep(0.05)
    raise AssertionError(f"{what}: not seen within {PATIENCE_S:g} s")


@dataclass
class Process:
    """One `lengthsman` command as a process; killed when the test leaves it behind."""

    process: subprocess.Popen[str]
    log: IO[str]

    @classmethod
    def start(cls, *words: str, cwd: Path) -> Self:
        """Start `lengthsman WORDS`."""
        log = (cwd / f"{words[0]}.log").open("a")
        command = [sys.executable, "-m", "gateway.cli", *words]
        return cls(
            subprocess.Popen(command, cwd=cwd, stdin=subprocess.DEVNULL, stdout=subprocess.PIPE, stderr=log, text=True),
            log,
        )

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.process.kill()
        self.process.wait()
        if self.process.stdout is not None:
            self.process.stdout.close()
        self.log.close()

    def line(self) -> str:
        """Next line it prints."""
        assert self.process.stdout is not None
        return self.process.stdout.readline().strip()

    def kill(self) -> None:
        """kill -9."""
        self.process.kill()
        self.process.wait()

    def stop(self) -> int:
        """Ask it to end and wait; returns its exit code."""
        self.process.send_signal(signal.SIGTERM)
        return self.process.wait(PATIENCE_S)


def plant(cwd: Path) -> tuple[Process, str]:
    """Start the simulated Tarn Row on a free port; returns it and its endpoint."""
    process = Process.start("plant", str(TARN_ROW), "--endpoint", "opc.tcp://127.0.0.1:0", cwd=cwd)
    word, endpoint = process.line().split()
    assert word == "listening"
    return process, endpoint


def control(cwd: Path, endpoint: str, *more: str) -> Process:
    """Start the gateway against it, with its journal in `cwd`."""
    words = ("run", str(TARN_ROW), "--site", "bench", "--endpoint", endpoint, "--journal", str(cwd / "journal.sqlite"))
    return Process.start(*words, *more, cwd=cwd)


def periods(cwd: Path, run: int = -1) -> list[PeriodRecord]:
    """Periods of one run of the journal so far, empty before there is any."""
    try:
        with JournalReader(cwd / "journal.sqlite") as reader:
            runs = reader.runs()
            if not runs or not -len(runs) <= run < len(runs):
                return []
            span = reader.span(runs[run].id)
            return [] if span is None else list(reader.periods(runs[run].id, span[0], span[1] + 1))
    except StorageMissingError:
        return []
