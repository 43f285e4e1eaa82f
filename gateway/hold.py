"""What a section's inputs are doing: the hold table of runtime section 3, without a clock and without I/O.

A section is in one of four states. Its state changes only as `TABLE` says, by events of three sources:

* the verdict on its period (`gateway.verdict`): a clean period, a miss, or the miss that reaches `latch_after` misses
  within the last `latch_window` periods;
* what a person asked (`Ask`): hold, rearm, or a change of the gateway's authority that takes or releases the plant;
* the start of a run whose predecessor did not end cleanly.

Besides its state a section has a **latch**: what put it on hold, kept until a rearm. It survives a release of
authority, so that no detour through `observe` ends a hold. `holding` is always latched, `driving` never is.

Symbols: k period index; all counts in periods. `HoldSpec` is the numbers of the table: `latch_after`,
`latch_window`, `clear_for`.

Everything here is a pure function of its arguments. The period therefore calls `advance` as often as it needs to from
the same starting point: before the synthesis to learn which sections it may move, after judging to know what to write,
and once more with `unwritten` when that write failed. Only the last result is kept.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from enum import StrEnum

from gateway.plantfile.plant import HoldSpec
from gateway.verdict import Verdict


class State(StrEnum):
    """What a section's inputs are doing."""

    DRIVING = "driving"
    FROZEN = "frozen"
    HOLDING = "holding"
    WATCHING = "watching"


class Event(StrEnum):
    """What can happen to a section; conditions are already decided, so that the table has none."""

    CLEAN = "clean period"
    MISS = "miss"
    LATCHING_MISS = "miss that latches"
    HOLD = "hold request"
    REARM = "rearm request, enough clean periods"
    EARLY_REARM = "rearm request, too early"
    TAKE = "authority taken"
    TAKE_LATCHED = "authority taken, latched before"
    RELEASE = "authority released"
    RESTART = "first period after an unclean end"


class Latch(StrEnum):
    """What an event does to the latch."""

    KEEP = "keep"
    SET = "set"
    CLEAR = "clear"


class Reason(StrEnum):
    """Why an event changes nothing."""

    NOT_HOLDING = "the section is not on hold"
    TOO_EARLY = "too few clean periods since it holds"
    NOT_TAKEN = "the section is only watched; take authority first"
    ALREADY_TAKEN = "authority over the section is already taken"
    ALREADY_RELEASED = "authority over the section is already released"
    IMPOSSIBLE = "this cannot happen in this state"


@dataclass(frozen=True, slots=True)
class Step:
    """One cell of the table: the state it leads to, and either what becomes of the latch or why nothing happens."""

    to: State
    latch: Latch = Latch.KEEP
    refusal: Reason | None = None


_D, _F, _H, _W = State.DRIVING, State.FROZEN, State.HOLDING, State.WATCHING

TABLE: Mapping[tuple[State, Event], Step] = {
    # driving
    (_D, Event.CLEAN): Step(_D),
    (_D, Event.MISS): Step(_F),
    (_D, Event.LATCHING_MISS): Step(_H, Latch.SET),
    (_D, Event.HOLD): Step(_H, Latch.SET),
    (_D, Event.REARM): Step(_D, refusal=Reason.NOT_HOLDING),
    (_D, Event.EARLY_REARM): Step(_D, refusal=Reason.NOT_HOLDING),
    (_D, Event.TAKE): Step(_D, refusal=Reason.ALREADY_TAKEN),
    (_D, Event.TAKE_LATCHED): Step(_D, refusal=Reason.IMPOSSIBLE),
    (_D, Event.RELEASE): Step(_W),
    (_D, Event.RESTART): Step(_D, refusal=Reason.IMPOSSIBLE),
    # frozen
    (_F, Event.CLEAN): Step(_D),
    (_F, Event.MISS): Step(_F),
    (_F, Event.LATCHING_MISS): Step(_H, Latch.SET),
    (_F, Event.HOLD): Step(_H, Latch.SET),
    (_F, Event.REARM): Step(_F, refusal=Reason.NOT_HOLDING),
    (_F, Event.EARLY_REARM): Step(_F, refusal=Reason.NOT_HOLDING),
    (_F, Event.TAKE): Step(_F, refusal=Reason.ALREADY_TAKEN),
    (_F, Event.TAKE_LATCHED): Step(_F, refusal=Reason.ALREADY_TAKEN),
    (_F, Event.RELEASE): Step(_W),
    (_F, Event.RESTART): Step(_H, Latch.SET),
    # holding
    (_H, Event.CLEAN): Step(_H),
    (_H, Event.MISS): Step(_H),
    (_H, Event.LATCHING_MISS): Step(_H),
    (_H, Event.HOLD): Step(_H, Latch.SET),
    (_H, Event.REARM): Step(_F, Latch.CLEAR),
    (_H, Event.EARLY_REARM): Step(_H, refusal=Reason.TOO_EARLY),
    (_H, Event.TAKE): Step(_H, refusal=Reason.IMPOSSIBLE),
    (_H, Event.TAKE_LATCHED): Step(_H, refusal=Reason.ALREADY_TAKEN),
    (_H, Event.RELEASE): Step(_W),
    (_H, Event.RESTART): Step(_H, refusal=Reason.IMPOSSIBLE),
    # watching
    (_W, Event.CLEAN): Step(_W),
    (_W, Event.MISS): Step(_W),
    (_W, Event.LATCHING_MISS): Step(_W),
    (_W, Event.HOLD): Step(_W, Latch.SET),
    (_W, Event.REARM): Step(_W, refusal=Reason.NOT_TAKEN),
    (_W, Event.EARLY_REARM): Step(_W, refusal=Reason.NOT_TAKEN),
    (_W, Event.TAKE): Step(_F),
    (_W, Event.TAKE_LATCHED): Step(_H),
    (_W, Event.RELEASE): Step(_W, refusal=Reason.ALREADY_RELEASED),
    (_W, Event.RESTART): Step(_W, refusal=Reason.IMPOSSIBLE),
}


class Writes(StrEnum):
    """What goes to the plant for a section."""

    SYNTHESIS = "synthesis"
    LAST_WRITTEN = "last written"
    SAFE_HOLD = "safe hold"
    NOTHING = "nothing"


_WRITES = {_D: Writes.SYNTHESIS, _F: Writes.LAST_WRITTEN, _H: Writes.SAFE_HOLD, _W: Writes.NOTHING}


def writes(state: State) -> Writes:
    """What a section in this state sends to the plant.

    Before anything was written, the last written inputs are those found at take-over (`gateway.authority`).
    """
    return _WRITES[state]


class Ask(StrEnum):
    """What a person can ask of one section, directly or through the authority of the whole gateway."""

    HOLD = "hold"
    REARM = "rearm"
    TAKE = "take"
    RELEASE = "release"


class Start(StrEnum):
    """How the run that this section starts in came about."""

    CLEAN = "start"
    RESTART = "restart after an unclean end"


Cause = Verdict | Ask | Start
"""What brought a section into its state, or set its latch."""


@dataclass(frozen=True, slots=True)
class SectionHold:
    """Hold state of one section after period `k`.

    Attributes:
        state: what its inputs are doing.
        k: the period last accounted for.
        since: the period in which the state was entered.
        cause: what led to the state.
        latched_by: what set the latch; None when it is not latched.
        misses: periods with a miss, oldest first, only those still inside the window.
        clean: consecutive clean periods; counted anew from each entry into `holding` and each hold request. For a
            section that is not driving, a clean period is one that would have been on time.
    """

    state: State
    k: int
    since: int
    cause: Cause
    latched_by: Cause | None = None
    misses: tuple[int, ...] = ()
    clean: int = 0

    def clean_periods_missing(self, settings: HoldSpec) -> int:
        """How many more clean periods a rearm needs."""
        return max(0, settings.clear_for - self.clean)


@dataclass(frozen=True, slots=True)
class Transition:
    """The change of state of one section in one period: one journal event, one log line.

    `events` are the steps that changed something, in order. More than one is rare: a rearm in the very period of a
    miss, or an ask that follows another in one period. `before` may then equal `after`.
    """

    k: int
    before: State
    after: State
    events: tuple[Event, ...]
    cause: Cause
    verdict: Verdict
    misses: int


@dataclass(frozen=True, slots=True)
class Refusal:
    """An ask that changes nothing, and why."""

    ask: Ask
    reason: Reason
    clean_periods_missing: int = 0

    @property
    def sentence(self) -> str:
        """The answer for the person who asked."""
        if self.reason is Reason.TOO_EARLY:
            return f"{self.ask} refused: {self.reason}, {self.clean_periods_missing} more needed"
        return f"{self.ask} refused: {self.reason}"


def start(k: int, *, taken: bool, ended_cleanly: bool) -> SectionHold:
    """Hold state of a section before the first period `k` of a run.

    Args:
        k: the first period of the run.
        taken: whether the gateway starts with authority to write; without, the section only watches.
        ended_cleanly: whether the previous run ended as it should (or there was none). After any other end the
            section goes on hold in its first period, or, when it only watches, as soon as authority is taken.
    """
    cause = Start.CLEAN if ended_cleanly else Start.RESTART
    return SectionHold(
        state=State.FROZEN if taken else State.WATCHING,
        k=k - 1,
        since=k - 1,
        cause=cause,
        latched_by=None if ended_cleanly else cause,
    )


def advance(
    section: SectionHold, settings: HoldSpec, k: int, verdict: Verdict, asks: Sequence[Ask] = ()
) -> tuple[SectionHold, Transition | None, tuple[Refusal, ...]]:
    """Account for period `k` of one section: what was asked at its start, in the order given, then its verdict.

    Periods between the last one accounted for and `k` did not run: nobody drove the section in them, so each counts
    as a miss (`late`). An ask that changes the state takes effect in this period, but a section it leaves frozen
    starts to drive in the next one at the earliest: its observer and its warm start are seeded anew first.

    Raises:
        ValueError: the period was accounted for already.
    """
    if k <= section.k:
        raise ValueError(f"period {k} cannot be accounted for: it must come after period {section.k}")
    steps: list[Event] = []
    before = section.state
    for skipped in range(max(section.k + 1, k - settings.latch_window), k):
        section = _judge(section, settings, skipped, Verdict.LATE, steps)
    refusals = []
    for ask in asks:
        section, refusal = _ask(section, settings, k, ask, steps)
        if refusal is not None:
            refusals.append(refusal)
    section = _judge(section, settings, k, verdict, steps)
    transition = (
        Transition(k, before, section.state, tuple(steps), section.cause, verdict, len(section.misses))
        if steps
        else None
    )
    return section, transition, tuple(refusals)


def _ask(
    section: SectionHold, settings: HoldSpec, k: int, ask: Ask, steps: list[Event]
) -> tuple[SectionHold, Refusal | None]:
    event = {
        Ask.HOLD: Event.HOLD,
        Ask.REARM: Event.EARLY_REARM if section.clean_periods_missing(settings) else Event.REARM,
        Ask.TAKE: Event.TAKE if section.latched_by is None else Event.TAKE_LATCHED,
        Ask.RELEASE: Event.RELEASE,
    }[ask]
    step = TABLE[section.state, event]
    if step.refusal is not None:
        missing = section.clean_periods_missing(settings) if step.refusal is Reason.TOO_EARLY else 0
        return section, Refusal(ask, step.refusal, missing)
    cause = section.latched_by if event is Event.TAKE_LATCHED and section.latched_by is not None else ask
    section = _enter(section, k, event, cause, steps)
    if ask is Ask.HOLD:
        section = replace(section, clean=0)
    if ask in (Ask.REARM, Ask.TAKE):
        # A person has looked: misses from before are no reason to latch again at the first one that follows.
        section = replace(section, misses=())
    return section, None


def _judge(section: SectionHold, settings: HoldSpec, k: int, verdict: Verdict, steps: list[Event]) -> SectionHold:
    recent = tuple(miss for miss in section.misses if miss > k - settings.latch_window)
    if verdict.is_miss:
        section = replace(section, k=k, misses=(*recent, k), clean=0)
        latches = len(section.misses) >= settings.latch_after
        event = Event.LATCHING_MISS if latches else Event.MISS
    else:
        section = replace(section, k=k, misses=recent, clean=section.clean + 1)
        event = Event.CLEAN
    cause: Cause = verdict
    if section.state is State.FROZEN and section.latched_by is not None:
        event, cause = Event.RESTART, section.latched_by
    if event is Event.CLEAN and section.since == k:
        return section  # Frozen by an ask in this very period: the *next* on-time period drives.
    return _enter(section, k, event, cause, steps)


def _enter(section: SectionHold, k: int, event: Event, cause: Cause, steps: list[Event]) -> SectionHold:
    step = TABLE[section.state, event]
    latched_by = {
        Latch.KEEP: section.latched_by,
        Latch.SET: section.latched_by or cause,
        Latch.CLEAR: None,
    }[step.latch]
    if step.to is section.state:
        return replace(section, latched_by=latched_by)
    steps.append(event)
    clean = 0 if step.to is State.HOLDING else section.clean
    return replace(section, state=step.to, since=k, cause=cause, latched_by=latched_by, clean=clean)


BEGIN_MARK = "<!-- begin: hold table, generated by gateway.hold.diagram_markdown -->"
END_MARK = "<!-- end: hold table -->"


def diagram() -> str:
    """State diagram in Mermaid notation, generated from `TABLE`; arrows that lead nowhere else are left out."""
    arrows: dict[tuple[State, State], list[Event]] = {}
    for (state, event), step in TABLE.items():
        if step.to is not state:
            arrows.setdefault((state, step.to), []).append(event)
    lines = [
        "stateDiagram-v2",
        f"    [*] --> {State.FROZEN}: start with authority",
        f"    [*] --> {State.WATCHING}: start",
    ]
    lines += [f"    {state} --> {to}: {' / '.join(events)}" for (state, to), events in arrows.items()]
    return "\n".join(lines)


def diagram_markdown() -> str:
    """The diagram and the whole table between `BEGIN_MARK` and `END_MARK`, for DEVELOPERS.md."""

    def cell(state: State, event: Event) -> str:
        step = TABLE[state, event]
        if step.refusal is not None:
            return "cannot happen" if step.refusal is Reason.IMPOSSIBLE else f"refused: {step.refusal}"
        text = "stays" if step.to is state else f"**{step.to}**"
        return text if step.latch is Latch.KEEP else f"{text}, latch {step.latch}"

    head = [f"| event | {' | '.join(State)} |", "|---|" + "---|" * len(State)]
    rows = [f"| {event} | {' | '.join(cell(state, event) for state in State)} |" for event in Event]
    foot = [f"| *writes* | {' | '.join(writes(state) for state in State)} |"]
    return "\n".join([BEGIN_MARK, "```mermaid", diagram(), "```", "", *head, *rows, *foot, END_MARK])
