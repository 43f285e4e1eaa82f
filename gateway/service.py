"""The control process' main loop: start, run one period after the other, supervise, stop.

    start   read and design, look at how the last run ended, open journal and requests, reach the plant
    loop    sleep until due(k), take requests, run the period, answer, record, tell, clean up
    stop    hand every section back to the panel, close link, requests and journal, in this order

It listens on nothing. A period that raises is our fault: the loop ends, the panel's watchdog takes over, and the next
start comes up on hold.
"""

from __future__ import annotations

import asyncio
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from controllers import Measured
from gateway import sentences
from gateway.admit import first_memory
from gateway.admit_rules import plan_admission
from gateway.authority import Authority, AuthorityState, Denied, at_start
from gateway.clock import NS, Clock, Schedule, WallStepWatch
from gateway.deadline import DeadlineStatistics, DeadlineSummary
from gateway.design import PlantDesign
from gateway.hold import State, start
from gateway.journal import Event, Journal, PeriodRecord
from gateway.links.protocol import Link, WriteOutcome
from gateway.orders import Answer, Orders, apply_requests, change_authority, settle
from gateway.period import Happened, Period
from gateway.plantfile.plant import SiteKind
from gateway.requests import Asked, RequestDesk, SetAuthority
from gateway.sentences import Notice
from gateway.signals import Tag
from gateway.standing import Standing
from gateway.tags import in_charge_tag
from gateway.telling import Told, layout_of, notices_of, record_of, transition_events, transition_lines
from gateway.upkeep import GarbageKeeper, IntervalSummary
from gateway.verdict import Verdict
from gateway.worker import Worker

LEAD_NS = 200_000_000
"""Time between deciding to start and the first period."""

SUMMARY_S = 60.0

TAKE_OVER_PERIODS = 20
"""How many periods to wait for inputs that cannot be read, before the authority a run was started with is denied."""


@dataclass
class Tally:
    """What a run amounts to so far."""

    periods: int = 0
    missed: int = 0
    skipped: int = 0
    held: tuple[str, ...] = field(default_factory=tuple)
    latched: bool = False


def first_standing(design: PlantDesign, authority: AuthorityState, first_k: int, *, ended_cleanly: bool) -> Standing:
    """Standing before the first period: nothing is known, and after an unclean end everything is on hold."""
    sections, writes = len(design.plant.sections), authority.level.writes
    return Standing(
        holds=tuple(start(first_k, taken=writes, ended_cleanly=ended_cleanly) for _ in range(sections)),
        authority=authority,
        targets={signal.tag: signal.target for signal in design.outputs if signal.target is not None},
        admission=first_memory(plan_admission(design.plant)),
        blind=frozenset(),
        estimate=None,
        iterate=None,
        last=np.full(len(design.inputs), np.nan),
        acting=design.scaling.u_zero,
        known=np.zeros(design.network.e.shape[1]),
        charge_expected=np.zeros(sections, dtype=bool),
        sent=None,
        heartbeat=0,
    )


def warm_up(design: PlantDesign) -> None:
    """Compile or load the kernels before anything depends on a deadline."""
    net = design.network
    rest = Measured(np.zeros(net.a.shape[0]), np.zeros(net.e.shape[1]), np.zeros(net.b.shape[1]))
    _, iterate = design.synthesis.solve(rest, max_iterations=design.synthesis.settings.chunk)
    design.synthesis.solve(rest, before=iterate, max_iterations=design.synthesis.settings.chunk)


class Service:
    """One run of the gateway on one site; everything it needs is handed in, so that tests run it in virtual time.

    Args:
        design: of the plant.
        site: kind of site.
        tags: of the site.
        link: open already.
        worker: for the synthesis.
        clock: the injected one.
        journal: open already.
        desk: takes requests; None when nobody can ask.
        tell: makes a log line of a notice.
    """

    def __init__(
        self,
        design: PlantDesign,
        site: SiteKind,
        tags: Sequence[Tag],
        link: Link,
        worker: Worker,
        clock: Clock,
        journal: Journal,
        desk: RequestDesk | None,
        tell: Callable[[Notice, int | None], None],
    ) -> None:
        self._design = design
        self._site = site
        self._tags = {tag.name: tag for tag in tags}
        self._link = link
        self._worker = worker
        self._clock = clock
        self._journal = journal
        self._desk = desk
        self._tell = tell
        self._period = Period(design, tags, link, worker, clock)
        self._layout = layout_of(design)
        self._period_ns = round(design.plant.period_s * NS)
        self._wall = WallStepWatch(clock)
        self._garbage = GarbageKeeper(full_every=max(1, round(30 / design.plant.period_s)))
        self._summary = IntervalSummary(
            [section.name for section in design.plant.sections],
            max(1, round(SUMMARY_S / design.plant.period_s)),
            design.plant.period_s,
        )
        self._told = Told({}, None)
        self._wanted: tuple[Authority, bool] | None = None
        self._patience = TAKE_OVER_PERIODS
        self._statistics = DeadlineStatistics(
            [section.name for section in design.plant.sections], design.plant.period_s
        )
        self.tally = Tally()

    def deadlines(self) -> DeadlineSummary:
        """Deadline statistics of the run so far."""
        return self._statistics.summary()

    def tell(self, notice: Notice, k: int | None = None) -> None:
        """Log a notice and put it into the journal."""
        self._tell(notice, k)
        self._journal.put_event(Event.of(notice, self._clock.wall_ns(), k))

    async def run(self, authority: Authority, stop: asyncio.Event, *, for_s: float | None, override: bool) -> None:
        """Run periods until `stop` is set or `for_s` seconds of periods are done, then hand the sections back.

        Args:
            authority: how far to act; on a live site, and for `limited`, it is taken once the inputs were read.
            stop: ends the run after the current period.
            for_s: how long, None until stopped.
            override: whether a person insists on full authority over a live site without a passed record.
        """
        schedule, k = Schedule.aligned(self._clock, self._period_ns, LEAD_NS)
        at_once = authority is Authority.FULL and self._site is SiteKind.BENCH
        self._wanted = None if at_once or not authority.writes else (authority, override)
        standing = first_standing(
            self._design,
            at_start(authority if at_once else Authority.OBSERVE),
            k,
            ended_cleanly=self._journal.previous.ended_cleanly,
        )
        last_k = None if for_s is None else k + max(1, round(for_s / self._design.plant.period_s))
        self._garbage.start()
        try:
            while not stop.is_set() and (last_k is None or k < last_k):
                await self._until(schedule.due_ns(k), stop)
                if stop.is_set():
                    break
                k = self._caught_up(schedule, k)
                standing = await self._one(k, schedule.due_ns(k), standing)
                k += 1
        finally:
            self._garbage.stop()
        await self._hand_back(standing)

    async def _until(self, instant_ns: int, stop: asyncio.Event) -> None:
        """Sleep until an instant, or until asked to stop."""
        asleep = asyncio.ensure_future(self._clock.sleep_until(instant_ns))
        stopped = asyncio.ensure_future(stop.wait())
        try:
            await asyncio.wait({asleep, stopped}, return_when=asyncio.FIRST_COMPLETED)
        finally:
            asleep.cancel()
            stopped.cancel()

    def _caught_up(self, schedule: Schedule, k: int) -> int:
        """The period to run now: periods that are over already are skipped and told, never run late."""
        current = schedule.current(self._clock.monotonic_ns())
        if current <= k:
            return k
        self.tell(sentences.skipped(k, current - k), k)
        self.tally.skipped += current - k
        return current

    async def _one(self, k: int, due_ns: int, standing: Standing) -> Standing:
        """Requests, the period, answers, record, sentences."""
        wall_ns = self._clock.wall_ns() - (self._clock.monotonic_ns() - due_ns)
        orders = self._orders(standing)
        if orders.slow_periods:
            self._worker.provoke_slow(orders.slow_periods)
        after, happened = await self._period.run(k, due_ns, orders.standing, orders.asks)
        for answer in settle(self._design.plant, orders, happened):
            self._answer(answer, k)
        if orders.changed is not None:
            changed, who = orders.changed
            self.tell(sentences.authority(changed.before, changed.state.level, who, overridden=changed.overridden), k)
        self._record(after, happened, wall_ns)
        self._garbage.between_periods()
        return after

    def _orders(self, standing: Standing) -> Orders:
        if self._wanted is not None:
            if np.isfinite(standing.last).all() or not self._patience:
                return self._take_over(standing, *self._wanted)
            self._patience -= 1
        if self._desk is None:
            return Orders(standing)
        taken = self._desk.take(self._clock.wall_ns())
        for outcome in taken.refused:
            self._journal.put_outcome(outcome)
            self.tell(sentences.request(outcome.request, outcome.who, outcome.words, outcome.state, outcome.reason))
        if any(isinstance(one.request, SetAuthority) for one in taken.asked):
            self._wanted = None  # A person's word about authority is newer than the command that started the run.
        return apply_requests(self._design, self._site, standing, taken.asked)

    def _take_over(self, standing: Standing, to: Authority, override: bool) -> Orders:
        """Take the authority this run was started with, now that the inputs are read; told when it is denied."""
        self._wanted = None
        decided = change_authority(self._design, self._site, standing, to, override=override)
        if isinstance(decided, Denied):
            self.tell(sentences.authority_denied(to, decided.sentence))
            return Orders(standing)
        everybody = range(len(self._design.plant.sections))
        asks = {} if decided.ask is None else dict.fromkeys(everybody, (decided.ask,))
        return Orders(
            replace(standing, authority=decided.state), asks, changed=(decided, "the command that started it")
        )

    def _answer(self, answer: Answer, k: int) -> None:
        asked: Asked = answer.asked
        now_ns = self._clock.wall_ns()
        if self._desk is not None:
            self._journal.put_outcome(self._desk.answer(asked, answer.state, answer.reason, now_ns, k))
        self.tell(sentences.request(asked.number, asked.who, asked.words, answer.state, answer.reason), k)

    def _record(self, after: Standing, happened: Happened, wall_ns: int) -> None:
        record: PeriodRecord = record_of(self._design, self._layout, after, happened, wall_ns)
        self._journal.put_period(record)
        notices, self._told = notices_of(self._design, self._told, happened)
        for notice in notices:
            self.tell(notice, happened.k)
        for notice in transition_lines(self._design, happened):
            self._tell(notice, happened.k)
        for notice in transition_events(self._design, happened):
            self._journal.put_event(Event.of(notice, self._clock.wall_ns(), happened.k))
        if step_ns := self._wall.step_ns():
            self.tell(sentences.clock_stepped(step_ns), happened.k)
        if (interval := self._summary.add(after, happened)) is not None:
            self.tell(sentences.summary(interval), happened.k)
        names = [section.name for section in self._design.plant.sections]
        states = [hold.state for hold in after.holds]
        iterations = None if happened.plan is None else happened.plan.iterations
        self._statistics.add(happened.timing, iterations, happened.verdicts, states)
        self.tally.periods += 1
        self.tally.missed += sum(verdict is not Verdict.ON_TIME for verdict in happened.verdicts)
        self.tally.latched = any(hold.latched_by is not None for hold in after.holds)
        self.tally.held = tuple(
            name for name, hold in zip(names, after.holds, strict=True) if hold.state is State.HOLDING
        )

    async def _hand_back(self, standing: Standing) -> None:
        """Leave the plant to its panel: an orderly end does not wait for a watchdog."""
        if self._design.plant.panel is None or not standing.charge_expected.any():
            return
        sections = self._design.plant.sections
        ours = [one.name for one, expected in zip(sections, standing.charge_expected, strict=True) if expected]
        bits = [(self._tags[in_charge_tag(name)], False) for name in ours]
        outcomes = await self._link.write(bits, self._clock.monotonic_ns() + self._period_ns)
        open_ = [name for name in ours if outcomes.get(in_charge_tag(name)) is not WriteOutcome.WRITTEN]
        if open_:
            self.tell(sentences.hand_back_unanswered(open_))
