"""`lengthsman run`: from options to a finished run, with everything opened and closed in order.

    plant file -> design -> warm kernels -> journal, requests -> link -> Service -> result

Each step that fails ends the start with one message and an exit code; nothing half-started is left behind.
"""

from __future__ import annotations

import asyncio
import os
import platform
import signal
import socket
import sys
from contextlib import AsyncExitStack
from dataclasses import dataclass, replace
from importlib.metadata import version
from pathlib import Path

from controllers import ControllerError
from gateway import logs, sentences
from gateway.authority import Authority, default_authority
from gateway.clock import Clock, RealClock
from gateway.deadline import DeadlineSummary
from gateway.design import PlantDesign, build_design
from gateway.exit_codes import ExitCode
from gateway.journal import Alarm, Journal, RunEnd, RunStart, StorageError, new_run_id
from gateway.links.events import LinkEvent, LinkEventKind
from gateway.links.opcua import OpcUaLink
from gateway.links.protocol import AddressUnknownError, PeerUnreachableError
from gateway.plantfile import Plant, PlantFileError, canonical, read_plant
from gateway.plantfile.plant import SiteKind, SiteSpec
from gateway.requests import RequestDesk
from gateway.sentences import Notice
from gateway.service import Service, Tally, warm_up
from gateway.tags import tags_of
from gateway.telling import layout_of
from gateway.worker import ThreadWorker

DIAL_TIMEOUT_S = 5.0


@dataclass(frozen=True)
class RunOptions:
    """What a run is told.

    Attributes:
        plant_file: path of the plant file.
        site: name of the site.
        authority: "observe", "limited" or "full"; the site's default when None.
        journal: path of the journal; its folder is made.
        requests: path of the file of requests.
        for_s: seconds to run, None until stopped.
        endpoint: overrides the site's.
        override: full authority over a live site without a passed record, because a person insists.
    """

    plant_file: Path
    site: str
    journal: Path
    requests: Path
    authority: str | None = None
    for_s: float | None = None
    endpoint: str | None = None
    override: bool = False


class StartError(Exception):
    """A run cannot start; the message is for the person, the code for the shell."""

    def __init__(self, message: str, code: ExitCode) -> None:
        super().__init__(message)
        self.code = code


@dataclass(frozen=True)
class RunResult:
    """How a run went."""

    code: ExitCode
    run: str
    tally: Tally
    deadlines: DeadlineSummary


def run_control(options: RunOptions, *, clock: Clock | None = None) -> RunResult:
    """Run the gateway until it is done, stopped, or failed.

    Raises:
        StartError: it never started; its message says why and what to do.
    """
    plant = _read(options)
    site = _site(plant, options)
    try:
        design = build_design(plant)
    except ControllerError as error:
        raise StartError(f"{options.plant_file}: {error}", ExitCode.WRONG_CALL) from error
    warm_up(design)
    return asyncio.run(_run(options, design, site, clock or RealClock()))


def _read(options: RunOptions) -> Plant:
    try:
        return read_plant(options.plant_file)
    except PlantFileError as error:
        raise StartError(str(error), ExitCode.WRONG_CALL) from error


def _site(plant: Plant, options: RunOptions) -> SiteSpec:
    if options.site not in plant.sites:
        known = ", ".join(plant.sites)
        raise StartError(
            f"{options.plant_file}: no site is called {options.site!r}; sites are {known}", ExitCode.WRONG_CALL
        )
    site = plant.sites[options.site]
    return site if options.endpoint is None else replace(site, endpoint=options.endpoint)


async def _run(options: RunOptions, design: PlantDesign, site: SiteSpec, clock: Clock) -> RunResult:
    plant = design.plant
    run_id = new_run_id(clock.wall_ns(), os.urandom(2).hex())
    authority = default_authority(site.kind) if options.authority is None else Authority(options.authority)
    tags = tags_of(plant, site)
    async with AsyncExitStack() as stack:
        log = logs.start(sys.stderr, clock.wall_ns)
        stack.callback(log.close)
        log.run = run_id
        told = _Teller(log, site.endpoint, [section.name for section in plant.sections])
        link = OpcUaLink.for_site(site, tags, clock, on_event=told.link_event)
        try:
            await link.open(DIAL_TIMEOUT_S)
        except (PeerUnreachableError, AddressUnknownError) as error:
            raise StartError(str(error), ExitCode.UNREACHABLE) from error
        stack.push_async_callback(link.close)
        journal = _journal(options, design, site, run_id, clock, told)
        how = [RunEnd.FAILED]
        stack.callback(lambda: _finish_journal(journal, clock, how[0], told))
        desk = _desk(options, plant, run_id, clock, told)
        stack.callback(desk.close)
        worker = ThreadWorker(clock)
        stack.callback(worker.close)
        service = Service(design, site.kind, tags, link, worker, clock, journal, desk, told.log)
        told.attach(service)
        _opening_words(service, journal, design, site, authority)
        stop = asyncio.Event()
        _stop_on_signals(stop)
        await service.run(authority, stop, for_s=options.for_s, override=options.override)
        if service.tally.latched:
            how[0] = RunEnd.HELD
        else:
            how[0] = RunEnd.STOPPED if stop.is_set() else RunEnd.COMPLETED
        service.tell(sentences.run_ended(how[0], service.tally.periods, service.tally.missed))
        code = ExitCode.HELD if service.tally.held else ExitCode.DONE
        return RunResult(code, run_id, service.tally, service.deadlines())


def _opening_words(
    service: Service, journal: Journal, design: PlantDesign, site: SiteSpec, authority: Authority
) -> None:
    plant = design.plant
    service.tell(
        sentences.run_started(plant.name, site.name, authority, design.fingerprint, plant.period_s, len(plant.sections))
    )
    if site.kind is SiteKind.LIVE and site.insecure:
        service.tell(sentences.insecure(site.endpoint))
    if not journal.previous.ended_cleanly:
        last = journal.previous.run
        service.tell(sentences.unclean_start(None if last is None else last.id))


def _journal(
    options: RunOptions, design: PlantDesign, site: SiteSpec, run_id: str, clock: Clock, told: _Teller
) -> Journal:
    run = RunStart(
        id=run_id,
        started_ns=clock.wall_ns(),
        plant=design.plant.name,
        fingerprint=design.fingerprint,
        versions={"lengthsman": version("lengthsman"), "python": platform.python_version(), "numpy": version("numpy")},
        host=socket.gethostname(),
        site=site.name,
        layout=layout_of(design),
        canonical=canonical(design.plant),
    )
    try:
        options.journal.parent.mkdir(parents=True, exist_ok=True)
        return Journal.open(options.journal, run, alarm=told.journal_alarm, wall_ns=clock.wall_ns)
    except OSError as error:
        raise StartError(
            f"the journal's folder {options.journal.parent} cannot be made: {error.strerror}", ExitCode.WRONG_CALL
        ) from error
    except StorageError as error:
        raise StartError(str(error), ExitCode.WRONG_CALL) from error


def _finish_journal(journal: Journal, clock: Clock, how: RunEnd, told: _Teller) -> None:
    """Close the journal; what could not be written is said where it still can be, in the log."""
    if not journal.close(clock.wall_ns(), how):
        counts = journal.statistics()
        told.log(sentences.journal_unfinished(counts.depth + counts.lost_periods + counts.lost_notes), None)


def _desk(options: RunOptions, plant: Plant, run_id: str, clock: Clock, told: _Teller) -> RequestDesk:
    try:
        return RequestDesk.open(options.requests, plant, run_id, wall_ns=clock.wall_ns, tell=told.from_thread)
    except StorageError as error:
        raise StartError(str(error), ExitCode.WRONG_CALL) from error


def _stop_on_signals(stop: asyncio.Event) -> None:
    loop = asyncio.get_running_loop()
    for number in (signal.SIGINT, signal.SIGTERM):
        loop.add_signal_handler(number, stop.set)


class _Teller:
    """Turns what links, journal and requests report into notices, from whichever thread it comes."""

    def __init__(self, log: logs.Log, endpoint: str, sections: list[str]) -> None:
        self._log = log
        self._endpoint = endpoint
        self._sections = sections
        self._connects = 0
        self._service: Service | None = None

    def attach(self, service: Service) -> None:
        """From now on, what is told goes to the journal too."""
        self._service = service

    def log(self, notice: Notice, k: int | None) -> None:
        """One log line."""
        self._log.tell(notice, k)

    def from_thread(self, notice: Notice) -> None:
        """Log and journal; both are safe from any thread."""
        if self._service is not None:
            self._service.tell(notice)
        else:
            self.log(notice, None)

    def journal_alarm(self, alarm: Alarm) -> None:
        """Log only: the journal tells itself."""
        self.log(alarm.notice, None)

    def link_event(self, event: LinkEvent) -> None:
        """One notice per event of the link."""
        match event.kind:
            case LinkEventKind.CONNECTED:
                self._connects += 1
                notice = sentences.link_up(self._endpoint, self._connects)
            case LinkEventKind.LOST:
                notice = sentences.link_lost(self._endpoint, event.reason, self._sections)
            case LinkEventKind.RETRYING:
                notice = sentences.link_retry(self._endpoint, event.attempt, event.retry_in_s or 0.0, event.reason)
            case LinkEventKind.KEEPER_RESTARTED:
                notice = sentences.task_died("link keeper", event.reason)
            case LinkEventKind.CLOSED:
                return
        self.from_thread(notice)
