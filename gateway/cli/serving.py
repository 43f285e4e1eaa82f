"""The simulated plant on the wire, with a person's lines on standard input beside it."""

from __future__ import annotations

import asyncio
import os
import signal
import sys
from collections.abc import Callable

import click

from gateway.bench.children import LISTENING
from gateway.cli.faults import CommandError
from gateway.clock import Clock
from gateway.plantfile.plant import SiteSpec
from gateway.simulated import identifiers_of
from sim_plant.direct import DirectPlant
from sim_plant.faults import FaultError, FaultKind
from sim_plant.servers.opcua import LONGEST_GAP_S, OpcUaPlant
from sim_plant.spec import SimulatedPlantSpec

MOST_READ_BYTES = 4096


async def serve(spec: SimulatedPlantSpec, site: SiteSpec, clock: Clock, *, until_eof: bool = False) -> None:
    """Simulate and serve a plant until SIGINT or SIGTERM; says on standard output where, once clients may come.

    Args:
        spec: what to simulate.
        site: where to serve it.
        clock: the injected clock.
        until_eof: stop at the end of standard input, too.

    Raises:
        CommandError: the site's addresses cannot be simulated, or its endpoint cannot be listened at.
        ExceptionGroup: the simulation died; nobody is served by a dead plant.
    """
    stop = asyncio.Event()
    for number in (signal.SIGINT, signal.SIGTERM):
        asyncio.get_running_loop().add_signal_handler(number, stop.set)
    plant = DirectPlant(spec, clock, longest_gap_s=LONGEST_GAP_S)
    try:
        server = OpcUaPlant(plant, clock, site.endpoint, site.namespace, identifiers_of(plant.tags, site))
    except ValueError as error:
        raise CommandError(f"site {site.name}: {error}") from error
    try:
        await server.__aenter__()
    except OSError as error:
        raise CommandError(
            f"{site.endpoint} cannot be listened at: {os.strerror(error.errno or 0)}; stop what listens there, "
            "or give another --endpoint (port 0 takes a free one)"
        ) from error
    typed = Lines(_standard_input(), lambda line: answer(plant, line), stop.set if until_eof else lambda: None)
    try:
        click.echo(f"{LISTENING}{server.endpoint}")
        async with asyncio.TaskGroup() as group:
            scanning = group.create_task(server.scan(), name="scan")
            typed.start()
            await stop.wait()
            scanning.cancel()
    finally:
        typed.stop()
        await server.__aexit__(None, None, None)


def answer(plant: DirectPlant, line: str) -> str:
    """Answer one typed line: what it did, or why it was refused."""
    if line == "help":
        return "one line is one of: " + "; ".join(kind.form for kind in FaultKind)
    try:
        return plant.provoke(line)
    except FaultError as error:
        return f"refused: {error}"


class Lines:
    """Lines typed on a file descriptor, each answered on standard output, on the event loop.

    A descriptor that cannot be waited for (an ordinary file, none at all) is not read.

    Args:
        descriptor: where they are typed, None for nowhere.
        answer_to: makes the answer to one line.
        at_end: told of the end of the input.
    """

    def __init__(self, descriptor: int | None, answer_to: Callable[[str], str], at_end: Callable[[], None]) -> None:
        self._descriptor = descriptor
        self._answer_to = answer_to
        self._at_end = at_end
        self._rest = b""
        self._reading = False

    def start(self) -> None:
        """Begin to listen for lines."""
        if self._descriptor is None:
            return
        try:
            asyncio.get_running_loop().add_reader(self._descriptor, self._read, self._descriptor)
        except (OSError, ValueError):
            return
        self._reading = True

    def stop(self) -> None:
        """Listen no more; safe to call twice."""
        if self._reading and self._descriptor is not None:
            asyncio.get_running_loop().remove_reader(self._descriptor)
        self._reading = False

    def _read(self, descriptor: int) -> None:
        read = os.read(descriptor, MOST_READ_BYTES)
        if not read:
            self.stop()
            self._at_end()
            return
        *lines, self._rest = (self._rest + read).split(b"\n")
        for line in lines:
            if text := line.decode(errors="replace").strip():
                click.echo(self._answer_to(text))


def _standard_input() -> int | None:
    try:
        return None if sys.stdin is None else sys.stdin.fileno()
    except (OSError, ValueError):
        return None
