"""The bench's child processes: the simulated plant and the gateway, each as a person would start it.

Children run in sessions of their own, so that Ctrl-C on the terminal reaches the bench alone, which then stops them in
order: the gateway first, so that it hands its sections back to a plant that is still there. The plant ends by itself
when the pipe to it breaks, so that it does not outlive a bench that was killed.
"""

from __future__ import annotations

import asyncio
import contextlib
import signal
import sys
from asyncio.subprocess import DEVNULL, PIPE, Process
from collections.abc import Sequence
from pathlib import Path

LISTENING = "listening "
"""What the plant's line on standard output begins with that says where it is served; the endpoint follows."""

STOP_AFTER_S = 15.0
"""A child that was asked to stop and has not stopped by then is killed."""

TAIL_LINES = 6


class ChildEndedError(Exception):
    """A child ended when it should not have, or never got ready.

    Attributes:
        name: what it is called in messages.
        code: its exit code, None when it had to be killed.
    """

    def __init__(self, name: str, code: int | None, message: str) -> None:
        super().__init__(message)
        self.name = name
        self.code = code


class Child:
    """One running child; its standard error goes to a file.

    Args:
        name: what it is called in messages.
        process: its process, standard output piped.
        log: where its standard error goes.
    """

    def __init__(self, name: str, process: Process, log: Path) -> None:
        self.name = name
        self.log = log
        self._process = process
        self._drain: asyncio.Task[None] | None = None

    @classmethod
    async def start(cls, name: str, arguments: Sequence[str], log: Path, *, piped_in: bool = False) -> Child:
        """Start `lengthsman ARGUMENTS` in this Python; `piped_in` gives it a standard input that ends with us."""
        with log.open("ab") as errors:
            process = await asyncio.create_subprocess_exec(
                sys.executable,
                "-m",
                "gateway.cli",
                *arguments,
                stdin=PIPE if piped_in else DEVNULL,
                stdout=PIPE,
                stderr=errors,
                start_new_session=True,
            )
        return cls(name, process, log)

    @property
    def pid(self) -> int:
        """Number of its process."""
        return self._process.pid

    @property
    def code(self) -> int | None:
        """Its exit code, None while it runs."""
        return self._process.returncode

    async def line_with(self, start: str, timeout_s: float) -> str:
        """Wait for a line of its standard output that begins like this; returns the rest of it.

        Raises:
            ChildEndedError: it ended first, or did not say it in time.
        """
        stream = self._process.stdout
        if stream is None:
            raise RuntimeError(f"{self.name} was started without a pipe; this is our fault")
        try:
            async with asyncio.timeout(timeout_s):
                while line := (await stream.readline()).decode(errors="replace"):
                    if line.startswith(start):
                        self._drain = asyncio.create_task(self._read_on(stream))
                        return line.removeprefix(start).strip()
                await self.ended()
        except TimeoutError:
            raise ChildEndedError(
                self.name, None, f"{self.name} was not ready within {timeout_s:g} s; its log is {self.log}"
            ) from None
        raise self.failure()

    async def ended(self) -> int:
        """Wait until it has ended; returns its exit code."""
        if self._drain is None and self._process.stdout is not None:
            self._drain = asyncio.create_task(self._read_on(self._process.stdout))
        return await self._process.wait()

    async def stop(self) -> int:
        """Ask it to stop and wait; kill it when it does not. Safe to call twice."""
        if self.code is None:
            self._signal(signal.SIGINT)
            try:
                async with asyncio.timeout(STOP_AFTER_S):
                    await self.ended()
            except TimeoutError:
                self.kill()
        code = await self.ended()
        if self._process.stdin is not None:
            self._process.stdin.close()
        if self._drain is not None:
            await self._drain
        return code

    def kill(self) -> None:
        """End it at once."""
        self._signal(signal.SIGKILL)

    def failure(self) -> ChildEndedError:
        """What to raise when it has ended and should not have: its own last words."""
        said = self.last_words()
        how = (
            f"ended with exit code {self.code}"
            if (self.code or 0) >= 0
            else f"was killed by signal {-(self.code or 0)}"
        )
        tail = f":\n{said}" if said else " without a word"
        return ChildEndedError(self.name, self.code, f"{self.name} {how}{tail}\nIts log is {self.log}")

    def last_words(self) -> str:
        """The end of its log, without lines that are records."""
        try:
            lines = self.log.read_text(encoding="utf-8", errors="replace").splitlines()
        except OSError:
            return ""
        return "\n".join([line for line in lines if line and not line.startswith("{")][-TAIL_LINES:])

    def _signal(self, number: signal.Signals) -> None:
        with contextlib.suppress(ProcessLookupError):
            self._process.send_signal(number)

    async def _read_on(self, stream: asyncio.StreamReader) -> None:
        """Read and forget, so that the child never waits for us."""
        while await stream.read(65536):
            pass
