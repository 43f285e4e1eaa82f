"""A whole run of the service in virtual time: plant, link, journal on disk, requests, and who moves the clock."""

from __future__ import annotations

import asyncio
from collections.abc import AsyncIterator
from contextlib import asynccontextmanager
from pathlib import Path

from gateway.authority import Authority
from gateway.clock import VirtualClock
from gateway.design import PlantDesign
from gateway.hold import State
from gateway.journal import Event, Journal, JournalReader, Outcome, PeriodRecord, RunEnd, RunStart
from gateway.journal.database import open_to_share, open_to_write
from gateway.plantfile import canonical
from gateway.plantfile.plant import SiteKind
from gateway.requests import RequestDesk, file
from gateway.requests.file import REQUESTS
from gateway.sentences import Notice
from gateway.service import Service
from gateway.tags import tags_of
from gateway.telling import layout_of
from gateway.worker import InlineWorker
from sim_plant.direct import DirectPlant
from tests.gateway.virtual import Tap, new_plant

WHO = "mira@bench-host"


class Run:
    """One run of the service. `async with running(...)` starts and ends it; nothing moves but by `periods`.

    Attributes:
        lines: notices logged so far, with the period they belong to.
    """

    def __init__(self, design: PlantDesign, folder: Path, run_id: str, clock: VirtualClock, plant: DirectPlant) -> None:
        self.design = design
        self.clock = clock
        self.plant = plant
        self.id = run_id
        self.path = folder / "journal.sqlite"
        tags = tags_of(design.plant, design.plant.sites["bench"])
        self.link = Tap(plant, tags, clock)
        self.worker = InlineWorker()
        self.lines: list[tuple[Notice, int | None]] = []
        self.stop = asyncio.Event()
        self.journal = Journal.open(self.path, self._start(), alarm=lambda _: None, wall_ns=clock.wall_ns)
        self._requests = folder / "requests.sqlite"
        connection = open_to_write(self._requests, REQUESTS, clock.wall_ns()).connection
        self.desk = RequestDesk(connection, design.plant, run_id, wall_ns=clock.wall_ns, tell=lambda _: None)
        self._tags = tags
        self.service: Service
        self.task: asyncio.Task[None]

    def begin(self, site: SiteKind, authority: Authority, for_s: float | None, *, override: bool) -> None:
        """Start the service's task."""
        self.service = Service(
            self.design, site, self._tags, self.link, self.worker, self.clock, self.journal, self.desk, self._line
        )
        self.task = asyncio.create_task(self.service.run(authority, self.stop, for_s=for_s, override=override))

    async def periods(self, count: int = 1) -> None:
        """Run so many periods, or until the service ends."""
        for _ in range(count):
            self.desk.step()
            due_ns = await self._asleep_until()
            if due_ns is None:
                break
            self.clock.advance_to(max(due_ns, self.clock.monotonic_ns()))
        await self._asleep_until()
        self.desk.step()
        self.journal.flush(30.0)

    async def ended(self) -> None:
        """Stop the service and wait until it has."""
        self.stop.set()
        await self.task

    def ask(self, words: str, age_s: float = 0.0) -> int:
        """Ask something, as any process could; it is taken by the next period."""
        connection = open_to_share(self._requests, REQUESTS)
        number = file.post(connection, self.id, self.clock.wall_ns() - round(age_s * 1e9), WHO, words)
        connection.close()
        return number

    def answer(self, number: int) -> file.Row:
        """What became of a request."""
        connection = open_to_share(self._requests, REQUESTS)
        found = file.row(connection, number)
        connection.close()
        assert found is not None
        return found

    def recorded(self) -> tuple[PeriodRecord, ...]:
        """Periods in the journal."""
        with JournalReader(self.path) as reader:
            return tuple(reader.periods(self.id, 0, 2**62))

    def events(self, kind: str) -> tuple[Event, ...]:
        """Events of one kind in the journal."""
        with JournalReader(self.path) as reader:
            return tuple(event for event in reader.events(self.id) if event.kind == kind)

    def outcomes(self) -> tuple[Outcome, ...]:
        """What became of requests, as the journal has it."""
        with JournalReader(self.path) as reader:
            return reader.outcomes(self.id)

    def said(self, kind: str) -> list[Notice]:
        """Log lines of one kind."""
        return [notice for notice, _ in self.lines if notice.kind == kind]

    def in_charge(self) -> list[str]:
        """Sections the panel has in our charge now."""
        shown = self.plant.read_all()
        return [one.name for one in self.design.plant.sections if shown[f"{one.name}.in_charge"].value is True]

    def close(self, how: RunEnd) -> None:
        """Close requests and journal; without an end the run looks killed."""
        self.desk.close()
        self.journal.close(self.clock.wall_ns(), how)

    def _line(self, notice: Notice, k: int | None) -> None:
        self.lines.append((notice, k))

    async def _asleep_until(self) -> int | None:
        """Let the service do what it can without time passing; the instant it waits for, None when it has ended."""
        for _ in range(1000):
            await asyncio.sleep(0)
            if self.task.done():
                self.task.result()
                return None
            if (due_ns := self.clock.next_ns()) is not None:
                return due_ns
        raise AssertionError("the service neither ends nor waits for a time")

    def _start(self) -> RunStart:
        design = self.design
        return RunStart(
            id=self.id,
            started_ns=self.clock.wall_ns(),
            plant=design.plant.name,
            fingerprint=design.fingerprint,
            versions={},
            host="bench-host",
            site="bench",
            layout=layout_of(design),
            canonical=canonical(design.plant),
        )


@asynccontextmanager
async def running(
    design: PlantDesign,
    folder: Path,
    *,
    site: SiteKind = SiteKind.BENCH,
    authority: Authority = Authority.FULL,
    for_s: float | None = None,
    override: bool = False,
    how: RunEnd = RunEnd.STOPPED,
    after: Run | None = None,
    seed: int = 3,
) -> AsyncIterator[Run]:
    """Run the service; it is stopped at the end if it still runs. `after` is a run before it on the same plant."""
    clock = VirtualClock(seed) if after is None else after.clock
    plant = new_plant(design, clock) if after is None else after.plant
    run_id = "run-1" if after is None else f"{after.id}-next"
    run = Run(design, folder, run_id, clock, plant)
    run.begin(site, authority, for_s, override=override)
    try:
        yield run
        if not run.task.done():
            await run.ended()
    finally:
        run.task.cancel()
        run.close(how)


def states(run: Run) -> set[State]:
    """States of the last recorded period."""
    return {row.state for row in run.recorded()[-1].sections}
