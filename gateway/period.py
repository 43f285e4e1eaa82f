"""One sampling period, from gathering to recording.

    gather -> admit -> estimate -> synthesise -> judge -> saturate -> write -> record

`Period.run` is that list; what it leaves behind is recorded and told by `telling`. It holds nothing between two
periods: everything it needs to remember comes in as `Standing` and goes out as a new one. Every phase has a cut-off, a
fraction of the period counted from its due instant; a phase that is not done by then is a verdict, never a wait. A
result that comes late is thrown away.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from controllers import ControllerError, Estimate, Measured, Outcome, Plan
from controllers.arrays import Floats
from gateway.admit import Admission, AdmitMemory, admit
from gateway.admit_rules import plan_admission
from gateway.clock import NS, Clock
from gateway.deadline import Cutoff, Stopwatch
from gateway.deciding import Accounting, Decision, decide, worsened
from gateway.delivering import Delivery, compose_set
from gateway.design import PlantDesign
from gateway.estimating import Seen, estimate_period
from gateway.hold import Ask, Refusal, Transition, writes
from gateway.inputs import intended_paths
from gateway.judging import foresee, judge, set_not_taken
from gateway.links.protocol import Gathered, Link
from gateway.panel_view import PanelView, view_panel
from gateway.period_rows import period_rows
from gateway.saturate import Guard
from gateway.signals import Tag
from gateway.standing import Standing
from gateway.verdict import Verdict
from gateway.worker import Job, Solved, Worker


@dataclass(frozen=True)
class Happened:
    """Everything one period leaves behind besides the new standing; what is recorded and told is made from it.

    Attributes:
        k: the period.
        gathered: the readings as they came.
        admission: what each is worth.
        view: the panel.
        plan: of the synthesis, None when it was late or broke down.
        broken: why the synthesis broke down, empty when it did not.
        wanted: its inputs (m,), engineering units, NaN where there are none.
        written: inputs acknowledged (m,), engineering units, NaN where none were.
        innovation: (p,) spans between prediction and plant.
        verdicts: per section.
        transitions: per section whose hold state changed.
        refusals: per section, asks that changed nothing.
        refused_set: counter of the last set and the panel's words about it, None unless it refused it.
        unknown: tags whose write was not answered.
        timing: where the time went.
    """

    k: int
    gathered: Gathered
    admission: Admission
    view: PanelView
    plan: Plan | None
    broken: str
    wanted: Floats
    written: Floats
    innovation: Floats
    verdicts: tuple[Verdict, ...]
    transitions: Mapping[int, Transition]
    refusals: Mapping[int, tuple[Refusal, ...]]
    refused_set: tuple[int, str] | None
    unknown: tuple[str, ...]
    timing: Stopwatch


@dataclass(frozen=True)
class _Found:
    """What gathering and admitting found.

    Attributes:
        last: what every input was told last (m,), NaN where nobody knows: the panel's own word where it can be read,
            else ours, as long as nobody but us could have told it anything since.
        acting: the same, with what was last known of it where nobody knows.
        blind: names of the sections whose state nobody knows, for lack of measurements or of such an input.
    """

    gathered: Gathered
    view: PanelView
    admission: Admission
    memory: AdmitMemory
    seen: Seen
    last: Floats
    acting: Floats
    blind: frozenset[str]


class Period:
    """The pipeline of one plant on one site.

    Args:
        design: of the plant.
        tags: all tags of the site.
        link: carries them.
        worker: runs the synthesis.
        clock: the injected one.
    """

    def __init__(self, design: PlantDesign, tags: Sequence[Tag], link: Link, worker: Worker, clock: Clock) -> None:
        self._design = design
        self._tags = {tag.name: tag for tag in tags}
        self._link = link
        self._worker = worker
        self._clock = clock
        self._period_ns = round(design.plant.period_s * NS)
        self._rules = plan_admission(design.plant)
        self._names = [section.name for section in design.plant.sections]
        self._guard = Guard(design.inputs, self._names, design.plant.period_s)

    async def run(
        self, k: int, due_ns: int, standing: Standing, asks: Mapping[int, Sequence[Ask]]
    ) -> tuple[Standing, Happened]:
        """Run period k.

        Args:
            k: its index.
            due_ns: its due instant, monotonic.
            standing: what the last period left.
            asks: per section, what was asked of it, in order.
        """
        design = self._design
        cut = Cutoff.of(due_ns, self._period_ns, design.plant.cutoffs)
        watch = Stopwatch.start(self._clock, cut)

        # Gather
        gathered = await self._link.gather(cut.gather_ns)
        watch.lap("gather")

        # Admit, estimate
        found = self._admit(k, standing, gathered)
        estimate, innovation = estimate_period(design, standing.estimate, found.acting, standing.known, found.seen)
        watch.lap("estimate")

        # Synthesise, around whoever misses this period for certain
        not_taken = set_not_taken(design, standing, found.view)
        foreseen = foresee(design, gathered, found.view, standing.charge_expected, found.blind, not_taken)
        accounting = Accounting(design, k, standing.holds, asks)
        solved, broken = await self._synthesise(standing, accounting.account(foreseen), found, estimate, cut)
        plan = None if solved is None else solved[0]
        wanted = np.full(len(design.inputs), np.nan) if plan is None else design.scaling.u_back(plan.inputs)
        watch.lap("synthesise")

        # Judge, saturate
        judged = judge(design, foreseen, plan, broken)
        decision = decide(accounting, self._guard, judged, wanted, found.last, found.view, standing)

        # Write
        heartbeat = (standing.heartbeat + 1) % 2**32
        outgoing = compose_set(design, self._tags, decision.parts, found.view, k, heartbeat)
        outcomes = await self._link.write(outgoing.values, cut.write_ns) if outgoing.values else {}
        delivery = Delivery.of(design, decision.parts, outgoing, outcomes, found.view, k)
        if delivery.lost.any():
            decision = accounting.account(worsened(decision.verdicts, delivery.lost, Verdict.UNWRITTEN))
        watch.acknowledged()

        after = replace(
            standing,
            holds=decision.holds,
            admission=found.memory,
            blind=found.blind,
            estimate=estimate,
            iterate=None if solved is None or plan is None or plan.outcome is Outcome.NOT_FINITE else solved[1],
            last=np.where(
                delivery.doubtful, np.nan, np.where(np.isfinite(delivery.written), delivery.written, found.last)
            ),
            acting=np.where(np.isfinite(delivery.written), delivery.written, found.acting),
            known=found.seen.known,
            charge_expected=delivery.charge_expected,
            sent=delivery.sent,
            heartbeat=heartbeat,
        )
        happened = Happened(
            k=k,
            gathered=gathered,
            admission=found.admission,
            view=found.view,
            plan=plan,
            broken=broken,
            wanted=wanted,
            written=delivery.written,
            innovation=innovation,
            verdicts=decision.verdicts,
            transitions=decision.transitions,
            refusals=decision.refusals,
            refused_set=self._refusal(standing, found.view),
            unknown=delivery.unknown,
            timing=watch,
        )
        return after, happened

    def _admit(self, k: int, standing: Standing, gathered: Gathered) -> _Found:
        """Judge every reading; find out what the panel shows and what every input was told last."""
        view = view_panel(self._design, gathered.readings)
        admission, memory = admit(self._rules, standing.admission, k, gathered.readings, view.clock_ms)
        sections = list(self._design.section_of_input)
        ours = (standing.charge_expected & view.in_charge)[sections]
        last = np.where(np.isfinite(view.commands), view.commands, np.where(ours, standing.last, np.nan))
        acting = np.where(np.isfinite(last), last, standing.acting)
        unknown = {self._names[i] for i, value in zip(sections, last, strict=True) if np.isnan(value)}
        blind = admission.blind | unknown
        seen = Seen.of(self._design, admission.by_tag(), standing.blind - blind, standing.known)
        return _Found(gathered, view, admission, memory, seen, last, acting, blind)

    async def _synthesise(
        self,
        standing: Standing,
        intended: Decision,
        found: _Found,
        estimate: Estimate,
        cut: Cutoff,
    ) -> tuple[Solved | None, str]:
        """Plan with what every input is known to do; None when that is late or breaks down, with the reason."""
        design = self._design
        intentions = [writes(hold.state) for hold in intended.holds]
        paths = intended_paths(design, intentions, found.view.in_charge, found.acting, standing.authority.bands())
        job = Job(
            design.synthesis,
            Measured(estimate.x, estimate.w + found.seen.known, design.scaling.u(found.acting)),
            period_rows(design, paths, standing.targets),
            standing.iterate,
        )
        try:
            return await self._worker.solve(job, cut.stop_ns, cut.synthesise_ns), ""
        except ControllerError as error:
            return None, str(error)

    @staticmethod
    def _refusal(standing: Standing, view: PanelView) -> tuple[int, str] | None:
        """The last set and the panel's words about it, None when it took it and when nobody can tell."""
        if standing.sent is None or view.accepted is None or view.accepted == standing.sent.k:
            return None
        return standing.sent.k, view.refusal or "it shows another counter"
