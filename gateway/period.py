"""One sampling period, from gathering to recording.

    gather -> admit -> estimate -> synthesise -> judge -> saturate -> write -> record

`Period.run` is that list. It holds nothing between two periods: everything it needs to remember comes in as `Standing`
and goes out as a new one. Every phase has a cut-off, a fraction of the period counted from its due instant; a phase
that is not done by then is a verdict, never a wait. A result that comes late is thrown away.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from controllers import Measured, Outcome, Plan
from controllers.arrays import Bools, Floats
from gateway import judging
from gateway.admit import Admission, admit
from gateway.admit_rules import plan_admission
from gateway.clock import Clock
from gateway.deadline import Cutoff, Stopwatch
from gateway.design import PlantDesign
from gateway.estimating import Seen, estimate_period
from gateway.hold import Ask, Refusal, SectionHold, Transition, Writes, advance, may_drive, writes
from gateway.inputs import LEFT_ALONE, Outgoing, compose_set, intended_paths, outgoing_of
from gateway.links.protocol import Gathered, Link, WriteOutcome
from gateway.panel_view import PanelView, view_panel
from gateway.period_rows import period_rows
from gateway.saturate import Guard
from gateway.signals import Tag
from gateway.standing import SentSet, Standing
from gateway.verdict import Verdict, first_cause
from gateway.worker import Job, Worker


@dataclass(frozen=True)
class Happened:
    """Everything one period leaves behind besides the new standing; what is recorded and told is made from it.

    Attributes:
        k: the period.
        gathered: the readings as they came.
        admission: what each is worth.
        view: the panel.
        plan: of the synthesis, None when it was late.
        wanted: its inputs (m,), engineering units, NaN where there are none.
        written: inputs acknowledged (m,), engineering units, NaN where none were.
        innovation: (p,) spans between prediction and plant.
        verdicts: per section.
        transitions: per section whose hold state changed.
        refusals: per section, asks that changed nothing.
        refused_set: the panel's words when it refused the last set, empty otherwise.
        unknown: tags whose write was not answered.
        timing: where the time went.
    """

    k: int
    gathered: Gathered
    admission: Admission
    view: PanelView
    plan: Plan | None
    wanted: Floats
    written: Floats
    innovation: Floats
    verdicts: tuple[Verdict, ...]
    transitions: Mapping[int, Transition]
    refusals: Mapping[int, tuple[Refusal, ...]]
    refused_set: str
    unknown: tuple[str, ...]
    timing: Stopwatch


class Period:
    """The pipeline of one plant on one site.

    Args:
        design: of the plant.
        tags: all tags of the site, by name.
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
        self._settings = design.plant.hold
        self._rules = plan_admission(design.plant)
        self._everybody = frozenset(section.name for section in design.plant.sections)
        self._guard = Guard(design.inputs, [section.name for section in design.plant.sections], design.plant.period_s)

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
        design, period_ns = self._design, round(self._design.plant.period_s * 1e9)
        cut = Cutoff.of(due_ns, period_ns, design.plant.cutoffs)
        watch = Stopwatch.start(self._clock, cut)

        # Gather, admit
        gathered = await self._link.gather(cut.gather_ns)
        watch.lap("gather")
        view = view_panel(design, gathered.readings)
        admission, memory = admit(self._rules, standing.admission, k, gathered.readings, view.clock_ms)
        seen = Seen.of(design, admission.by_tag(), standing.blind - admission.blind, standing.known)
        last = np.where(np.isfinite(view.commands), view.commands, standing.last)
        ready = bool(np.isfinite(last).all())

        # Estimate
        estimate, innovation = standing.estimate, np.zeros(len(design.outputs))
        if ready:
            estimate, innovation = estimate_period(design, estimate, last, standing.known, seen)
        watch.lap("estimate")

        # Synthesise
        intentions = [self._intention(hold, k, asks.get(i, ())) for i, hold in enumerate(standing.holds)]
        bands = standing.authority.bands()
        solved = None
        if estimate is not None:
            paths = intended_paths(design, intentions, view.in_charge, last, bands)
            job = Job(
                design.synthesis,
                Measured(estimate.x, estimate.w + seen.known, design.scaling.u(last)),
                period_rows(design, paths, standing.targets),
                standing.iterate,
            )
            solved = await self._worker.solve(job, cut.stop_ns, cut.synthesise_ns)
        watch.lap("synthesise")
        plan = solved[0] if solved is not None else None
        wanted = design.scaling.u_back(plan.inputs) if plan is not None else np.full(len(design.inputs), np.nan)

        # Judge, saturate
        refused = self._set_refused(standing, view)
        judged = judging.judge(
            design,
            gathered,
            view,
            standing.charge_expected,
            admission.blind if ready else self._everybody,
            plan,
            refused,
        )
        guarded = self._guard.check(wanted, last, bands)
        verdicts = [
            first_cause((v, Verdict.REFUSED)) if bad else v for v, bad in zip(judged, guarded.refused, strict=True)
        ]
        holds = self._advanced(standing.holds, k, verdicts, asks)
        parts = [
            outgoing_of(design, i, writes(hold.state), guarded.values, last, view, bands)
            for i, (hold, _, _) in enumerate(holds)
        ]
        stopped = self._stopped(parts, last, bands)
        if stopped.any():
            # What a hold would write is looked at like everything else; what fails stays off the wire.
            verdicts = [
                first_cause((v, Verdict.REFUSED)) if bad else v for v, bad in zip(verdicts, stopped, strict=True)
            ]
            holds = self._advanced(standing.holds, k, verdicts, asks)
            parts = [LEFT_ALONE if bad else part for part, bad in zip(parts, stopped, strict=True)]

        # Write
        heartbeat = (standing.heartbeat + 1) % 2**32
        outgoing, sends = compose_set(design, self._tags, parts, view, k, heartbeat)
        outcomes = await self._link.write(outgoing, cut.write_ns) if outgoing else {}
        watch.acknowledged()
        lost = self._unwritten(parts, sends, outcomes, view)
        if lost.any():
            verdicts = [
                first_cause((v, Verdict.UNWRITTEN)) if bad else v for v, bad in zip(verdicts, lost, strict=True)
            ]
            holds = self._advanced(standing.holds, k, verdicts, asks)

        written = self._acknowledged(outgoing, sends & ~lost)
        after = replace(
            standing,
            holds=tuple(hold for hold, _, _ in holds),
            admission=memory,
            blind=admission.blind,
            estimate=estimate,
            iterate=solved[1] if solved is not None and solved[0].outcome is not Outcome.NOT_FINITE else None,
            last=np.where(np.isfinite(written), written, last),
            known=seen.known,
            charge_expected=self._charge_expected(parts, sends, outcomes, view),
            sent=SentSet(k, sends) if sends.any() else None,
            heartbeat=heartbeat,
        )
        happened = Happened(
            k=k,
            gathered=gathered,
            admission=admission,
            view=view,
            plan=plan,
            wanted=wanted,
            written=written,
            innovation=innovation,
            verdicts=tuple(verdicts),
            transitions={i: moved for i, (_, moved, _) in enumerate(holds) if moved is not None},
            refusals={i: refusals for i, (_, _, refusals) in enumerate(holds) if refusals},
            refused_set=(view.refusal or "it kept an older set") if refused.any() else "",
            unknown=tuple(tag for tag, outcome in outcomes.items() if outcome is WriteOutcome.UNKNOWN),
            timing=watch,
        )
        return after, happened

    def _intention(self, hold: SectionHold, k: int, asks: Sequence[Ask]) -> Writes:
        """What a section will write if this period turns out on time."""
        if may_drive(hold, self._settings, k, asks):
            return Writes.SYNTHESIS
        return writes(advance(hold, self._settings, k, Verdict.ON_TIME, asks)[0].state)

    def _advanced(
        self, holds: Sequence[SectionHold], k: int, verdicts: Sequence[Verdict], asks: Mapping[int, Sequence[Ask]]
    ) -> list[tuple[SectionHold, Transition | None, tuple[Refusal, ...]]]:
        """Account for the period from where it started; called again when the write changes a verdict."""
        return [
            advance(hold, self._settings, k, verdict, asks.get(i, ()))
            for i, (hold, verdict) in enumerate(zip(holds, verdicts, strict=True))
        ]

    def _stopped(self, parts: Sequence[Outgoing], last: Floats, bands: Mapping[str, tuple[float, float]]) -> Bools:
        """Sections whose outgoing values, whoever made them, fail the last look before the wire."""
        going = {tag: value for part in parts for tag, value in part.values.items()}
        values = np.array([going.get(signal.tag, np.nan) for signal in self._design.inputs])
        refused = self._guard.check(values, last, bands).refused
        return np.logical_and(refused, [bool(part.values) for part in parts])

    @staticmethod
    def _set_refused(standing: Standing, view: PanelView) -> Bools:
        """Sections whose last set the panel did not take: it shows another counter than the one sent."""
        nobody = np.zeros(len(standing.holds), dtype=bool)
        if standing.sent is None or view.accepted is None or view.accepted == standing.sent.k:
            return nobody
        return standing.sent.sections

    @staticmethod
    def _unwritten(
        parts: Sequence[Outgoing], sends: Bools, outcomes: Mapping[str, WriteOutcome], view: PanelView
    ) -> Bools:
        """Sections with something to write that did not arrive for certain."""
        committed = all(
            outcomes.get(tag, WriteOutcome.WRITTEN) is WriteOutcome.WRITTEN for tag in ("panel.expires", "panel.period")
        )
        return np.array(
            [
                bool(part.values)
                and not (
                    sends[i] and committed and all(outcomes.get(tag) is WriteOutcome.WRITTEN for tag in part.values)
                )
                for i, part in enumerate(parts)
            ]
        )

    def _acknowledged(self, outgoing: Sequence[tuple[Tag, float | int | bool]], arrived: Bools) -> Floats:
        """Inputs that were written for certain (m,), NaN elsewhere."""
        sent = {tag.name: value for tag, value in outgoing}
        return np.array(
            [
                float(sent[signal.tag]) if arrived[i] and signal.tag in sent else np.nan
                for signal, i in zip(self._design.inputs, self._design.section_of_input, strict=True)
            ]
        )

    @staticmethod
    def _charge_expected(
        parts: Sequence[Outgoing], sends: Bools, outcomes: Mapping[str, WriteOutcome], view: PanelView
    ) -> Bools:
        """Sections the panel must show in our charge next period: taken now, or ours already and not handed back."""
        answered = bool(outcomes) and all(outcome is WriteOutcome.WRITTEN for outcome in outcomes.values())
        return np.array(
            [
                (part.take and bool(sends[i]) and answered) or (view.in_charge[i] and not part.hand_back)
                for i, part in enumerate(parts)
            ]
        )
