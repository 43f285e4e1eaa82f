"""The bench from its start to its summary: two child processes, a story, a view, and a verdict.

    plant      `lengthsman plant`, on a free port unless told otherwise
    gateway    `lengthsman run` on the plant file's bench site, ending by itself when the time is up
    story      acted as soon as the first period is in the journal
    view       the journal, read four times a second
    end        the gateway hands its sections back, the plant stops, the journal is worked into figures

Whatever ends first ends the rest, in this order: story, gateway, plant.
"""

from __future__ import annotations

import asyncio
import signal
from collections.abc import Coroutine, Mapping
from contextlib import AsyncExitStack
from dataclasses import dataclass
from pathlib import Path
from typing import Any, TypeVar

from rich.console import Console

from gateway.bench.acting import Done, act
from gateway.bench.children import LISTENING, Child, ChildEndedError
from gateway.bench.criteria import Criterion, judge_bench
from gateway.bench.figures import Figures, figures_of
from gateway.bench.following import Followed, follow, open_when_there
from gateway.bench.lines import Line, Source, lines_of
from gateway.bench.rehearsal import ProvokeError, Rehearsal
from gateway.bench.screen import Scene
from gateway.bench.stage import PER_SECOND, Stage
from gateway.bench.story import Step
from gateway.clock import NS, Clock
from gateway.exit_codes import ExitCode
from gateway.journal import Event, JournalReader
from gateway.plantfile.plant import Plant, SiteSpec
from gateway.requests import Answer, ask, whoami
from gateway.sentences import Kind

LISTENING_WITHIN_S = 60.0
FIRST_PERIOD_WITHIN_S = 180.0
"""A first start compiles the kernels."""

AWAY_PERCENT = 10.0

T = TypeVar("T")


AUTHORITY_IN: Mapping[str, str] = {Kind.RUN_STARTED: "authority", Kind.AUTHORITY: "after"}
"""Which fact of which event says how far the gateway may act."""


@dataclass(frozen=True)
class BenchFiles:
    """What a bench writes, all in one folder."""

    folder: Path

    @property
    def journal(self) -> Path:
        """The journal of the run."""
        return self.folder / "journal.sqlite"

    @property
    def requests(self) -> Path:
        """The file of requests."""
        return self.folder / "requests.sqlite"

    @property
    def gateway_log(self) -> Path:
        """What the gateway logged."""
        return self.folder / "gateway.log"

    @property
    def plant_log(self) -> Path:
        """What the simulated plant logged."""
        return self.folder / "plant.log"

    @property
    def summary(self) -> Path:
        """The summary as JSON."""
        return self.folder / "summary.json"


@dataclass(frozen=True)
class BenchOptions:
    """What a bench is told.

    Attributes:
        plant_file: path of the plant file.
        plant: the same, read.
        site: the bench site, with the endpoint to use; port 0 takes a free one.
        steps: of the story.
        for_s: how long to drive.
        files: what it writes.
    """

    plant_file: Path
    plant: Plant
    site: SiteSpec
    steps: tuple[Step, ...]
    for_s: float
    files: BenchFiles

    @property
    def planned(self) -> tuple[Step, ...]:
        """Steps that have a place in the time given."""
        return tuple(step for step in self.steps if step.at_s < self.for_s)


@dataclass(frozen=True)
class BenchResult:
    """How a bench went."""

    figures: Figures
    criteria: tuple[Criterion, ...]
    stopped: bool


class Bench:
    """One bench; `run` does it.

    Args:
        options: what to do.
        console: where to show it.
        clock: the injected clock.
    """

    def __init__(self, options: BenchOptions, console: Console, clock: Clock) -> None:
        self._options = options
        self._console = console
        self._clock = clock
        self._stage = Stage(console)
        self._followed = Followed()
        self._untold: tuple[Event, ...] = ()
        self._authority = ""
        self._done: list[Done] = []
        self._stop = asyncio.Event()

    async def run(self) -> BenchResult | None:
        """Start everything, tell the story, stop everything; None when a person stopped it before the first period.

        Raises:
            ChildEndedError: the plant or the gateway could not start, or died; its message has their last words.
        """
        for number in (signal.SIGINT, signal.SIGTERM):
            asyncio.get_running_loop().add_signal_handler(number, self._stop.set)
        async with AsyncExitStack() as stack:
            self._bench_says("Starting the simulated plant.")
            plant = await self._start_plant(stack)
            endpoint = await self._unless_stopped(plant.line_with(LISTENING, LISTENING_WITHIN_S))
            if endpoint is None:
                return None
            self._bench_says(f"It listens at {endpoint}. Designing the controllers and warming their kernels.")
            gateway = await self._start_gateway(stack, endpoint)
            reader = await self._first_period(stack, plant, gateway)
            if reader is not None:
                with self._stage:
                    await self._drive(reader, plant, gateway, endpoint)
            self._require_code(await gateway.stop(), gateway)
        return self._result()

    async def _start_plant(self, stack: AsyncExitStack) -> Child:
        options = self._options
        child = await Child.start(
            "The simulated plant",
            [
                "plant",
                str(options.plant_file),
                f"--site={options.site.name}",
                f"--endpoint={options.site.endpoint}",
                f"--away={AWAY_PERCENT}",
                "--until-eof",
            ],
            options.files.plant_log,
            piped_in=True,
        )
        stack.push_async_callback(child.stop)
        return child

    async def _start_gateway(self, stack: AsyncExitStack, endpoint: str) -> Child:
        options = self._options
        child = await Child.start(
            "The gateway",
            [
                "run",
                str(options.plant_file),
                f"--site={options.site.name}",
                f"--endpoint={endpoint}",
                f"--journal={options.files.journal}",
                f"--requests={options.files.requests}",
                f"--for={options.for_s}s",
            ],
            options.files.gateway_log,
        )
        stack.push_async_callback(child.stop)
        return child

    async def _first_period(self, stack: AsyncExitStack, plant: Child, gateway: Child) -> JournalReader | None:
        """Wait for the first period in the journal; None when a person stopped the bench before."""
        deadline_ns = self._clock.monotonic_ns() + round(FIRST_PERIOD_WITHIN_S * NS)
        reader: JournalReader | None = None
        while not self._stop.is_set():
            self._require_running(plant, gateway)
            if reader is None:
                reader = open_when_there(self._options.files.journal)
                if reader is not None:
                    stack.callback(reader.close)
            if reader is not None:
                self._look(reader)
                if self._followed.first_ns is not None:
                    return reader
            if self._clock.monotonic_ns() > deadline_ns:
                raise ChildEndedError(
                    gateway.name, None, f"{gateway.name} did not drive within {FIRST_PERIOD_WITHIN_S:g} s"
                )
            await self._pause()
        return None

    async def _drive(self, reader: JournalReader, plant: Child, gateway: Child, endpoint: str) -> None:
        """Tell the story and show the run until the gateway ends or a person stops the bench."""
        story = asyncio.create_task(self._tell(endpoint), name="story")
        try:
            while gateway.code is None and not self._stop.is_set():
                self._require_running(plant)
                if story.done():
                    story.result()
                self._look(reader)
                self._stage.show(self._scene())
                await self._pause()
        finally:
            story.cancel()
            await asyncio.gather(story, return_exceptions=True)
        self._look(reader)
        if self._stop.is_set():
            self._bench_says("Stopping in order: the gateway hands its sections back, then the plant stops.")

    async def _tell(self, endpoint: str) -> None:
        options, clock = self._options, self._clock
        start_ns = clock.monotonic_ns() - round(self._now_s() * NS)
        who = f"{whoami()}, story of the bench"

        async def asked(words: str) -> Answer:
            return await asyncio.to_thread(ask, options.files.requests, words, who=who)

        try:
            async with Rehearsal(endpoint, options.site.namespace) as rehearsal:
                async for done in act(options.planned, start_ns, clock, rehearsal.provoke, asked, self._begins):
                    self._done.append(done)
                    if not done.ok:
                        self._stage.say([Line(self._now_s(), Source.STORY, f"That failed: {done.answer}", True)])
        except ProvokeError as error:
            self._stage.say([Line(self._now_s(), Source.STORY, f"The story cannot be told: {error}", True)])

    def _begins(self, step: Step) -> None:
        self._stage.say([Line(step.at_s, Source.STORY, step.sentence)])

    def _bench_says(self, text: str) -> None:
        self._stage.say([Line(self._now_s(), Source.BENCH, text)])

    def _look(self, reader: JournalReader) -> None:
        """Read what is new, and say it."""
        self._followed = follow(reader, self._followed)
        self._untold += self._followed.events
        for event in self._followed.events:
            if event.kind in AUTHORITY_IN:
                self._authority = str(event.detail.get(AUTHORITY_IN[event.kind], self._authority))
        if self._followed.first_ns is not None:
            self._stage.say(lines_of(self._untold, self._followed.first_ns, len(self._options.plant.sections)))
            self._untold = ()

    def _scene(self) -> Scene:
        options = self._options
        return Scene(
            plant=options.plant,
            site=options.site.name,
            authority=self._authority,
            followed=self._followed,
            now_s=self._now_s(),
            length_s=options.for_s,
            steps=options.planned,
            lines=self._stage.lines,
            where=str(options.files.folder),
        )

    def _result(self) -> BenchResult | None:
        options = self._options
        if self._followed.run is None or self._followed.first_ns is None:
            return None
        with JournalReader(options.files.journal) as reader:
            figures = figures_of(reader, reader.run(self._followed.run.id), options.plant, options.planned)
        return BenchResult(figures, judge_bench(figures, options.planned, self._done), self._stop.is_set())

    def _now_s(self) -> float:
        return self._followed.since_start_s(self._clock.wall_ns())

    async def _pause(self) -> None:
        await self._clock.sleep_until(self._clock.monotonic_ns() + round(NS / PER_SECOND))

    async def _unless_stopped(self, work: Coroutine[Any, Any, T]) -> T | None:
        """What the work gives; None when a person stops the bench first."""
        working, stopped = asyncio.ensure_future(work), asyncio.ensure_future(self._stop.wait())
        try:
            await asyncio.wait({working, stopped}, return_when=asyncio.FIRST_COMPLETED)
            return working.result() if working.done() else None
        finally:
            stopped.cancel()
            working.cancel()

    @staticmethod
    def _require_running(*children: Child) -> None:
        for child in children:
            if child.code is not None:
                raise child.failure()

    def _require_code(self, code: int, child: Child) -> None:
        """A gateway ends with its time, stopped by us, or with sections on hold; anything else is a failure.

        Stopped before it was ready to be, it dies of our signal.
        """
        stopped = code == -signal.SIGINT and self._stop.is_set()
        if code not in (ExitCode.DONE, ExitCode.HELD) and not stopped:
            raise child.failure()
