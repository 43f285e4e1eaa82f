"""Every sentence a person reads in the log and in the journal's events, in one place.

One function per thing that can happen. It takes what happened as typed values and returns a `Notice`: the sentence, and
the same facts as data. The same notice becomes one log line (`gateway.logs`) and one journal event
(`gateway.journal.Event.of`), so that both tell one story in one wording.

A sentence stands alone: it names the section, the peer or the person, says what is so now, and, where somebody has to
do something about it, what. Numbers carry their unit. Levels: `info` is the ordinary course of a night, `warning` is
what the gateway copes with, `error` is what waits for a person. The module is long because it is the one place.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from enum import StrEnum

from gateway.hold import Ask, Start, State, Transition
from gateway.plantfile.plant import HoldSpec
from gateway.verdict import Verdict


class Level(StrEnum):
    """How much a notice matters; see the head of the module."""

    INFO = "info"
    WARNING = "warning"
    ERROR = "error"


class Kind(StrEnum):
    """What a notice is about: what to look for in the journal and in JSON lines."""

    RUN_STARTED = "run_started"
    RUN_ENDED = "run_ended"
    UNCLEAN_START = "unclean_start"
    INSECURE = "insecure"
    TRANSITION = "transition"
    AUTHORITY = "authority"
    REQUEST = "request"
    QUALITY = "quality"
    LINK = "link"
    WRITE_UNKNOWN = "write_unknown"
    PANEL = "panel"
    PERMIT = "permit"
    SET_REFUSED = "set_refused"
    SKIPPED = "skipped"
    SYNTHESIS = "synthesis"
    SUMMARY = "summary"
    CLOCK = "clock"
    TASK_DIED = "task_died"
    REHEARSAL = "rehearsal"
    JOURNAL = "journal"
    JOURNAL_LOST = "journal_lost"


@dataclass(frozen=True)
class Notice:
    """One thing that happened, as a sentence and as data (JSON types only, units in the names)."""

    kind: Kind
    level: Level
    sentence: str
    section: str | None = None
    detail: Mapping[str, object] = field(default_factory=dict)


# The run ---------------------------------------------------------------------------------------------------------


def run_started(plant: str, site: str, authority: str, fingerprint: str, period_s: float, sections: int) -> Notice:
    """The gateway begins its periods."""
    return Notice(
        Kind.RUN_STARTED,
        Level.INFO,
        f"{plant} starts on site {site} with authority {authority}: {sections} sections, one period every "
        f"{period_s * 1e3:g} ms, fingerprint {fingerprint[:12]}.",
        detail={
            "plant": plant,
            "site": site,
            "authority": authority,
            "fingerprint": fingerprint,
            "period_s": period_s,
            "sections": sections,
        },
    )


def run_ended(how: str, periods: int, missed: int) -> Notice:
    """The gateway ended its periods in order. `missed` counts section-periods."""
    return Notice(
        Kind.RUN_ENDED,
        Level.ERROR if how == "failed" else Level.INFO,
        f"The run {_ENDS.get(how, how)} after {_count(periods, 'period')}, {_count(missed, 'section-period')} missed.",
        detail={"how": how, "periods": periods, "missed": missed},
    )


_ENDS = {
    "completed": "is complete",
    "stopped": "was stopped",
    "held": "ended with sections on hold, which the next one starts with,",
    "failed": "failed",
}


def unclean_start(previous: str | None) -> Notice:
    """The previous run has no orderly end, or ended on hold, so every section starts held."""
    which = "An earlier run" if previous is None else f"Run {previous}"
    return Notice(
        Kind.UNCLEAN_START,
        Level.ERROR,
        f"{which} did not end in order, or ended on hold: every section comes up on hold. "
        "Look at the plant, then rearm.",
        detail={"previous": previous},
    )


def insecure(endpoint: str) -> Notice:
    """A live site is used without security; said at every start."""
    return Notice(
        Kind.INSECURE,
        Level.WARNING,
        f"The connection to {endpoint} is neither signed nor encrypted: anybody on its network can write to the plant.",
        detail={"endpoint": endpoint},
    )


# Sections --------------------------------------------------------------------------------------------------------


def transition(section: str, change: Transition, settings: HoldSpec, slack_us: int | None) -> Notice:
    """A section changed what its inputs do."""
    return Notice(
        Kind.TRANSITION,
        _transition_level(change),
        f"{section} goes {_way(change, settings, slack_us)}{_waits(change, 'It waits')}",
        section=section,
        detail=_transition_detail(change, settings, slack_us),
    )


def transitions(sections: Sequence[str], change: Transition, settings: HoldSpec, slack_us: int | None) -> Notice:
    """Several sections changed in the same way in one period: one line for one cause (alarm practice, IEC 62682)."""
    named = ", ".join(sections)
    return Notice(
        Kind.TRANSITION,
        _transition_level(change),
        f"{_count(len(sections), 'section')} ({named}) go {_way(change, settings, slack_us)}"
        f"{_waits(change, 'They wait')}",
        detail={"sections": list(sections), **_transition_detail(change, settings, slack_us)},
    )


def _way(change: Transition, settings: HoldSpec, slack_us: int | None) -> str:
    slack = "" if slack_us is None else f" Slack {slack_us / 1e3:.1f} ms."
    return (
        f"from {change.before} to {change.after}: {_cause(change)} "
        f"{_count(change.misses, 'miss', 'misses')} in the last {settings.latch_window} periods.{slack}"
    )


def _waits(change: Transition, words: str) -> str:
    return f" {words} for a rearm." if change.after is State.HOLDING and change.before is not State.HOLDING else ""


def _transition_detail(change: Transition, settings: HoldSpec, slack_us: int | None) -> dict[str, object]:
    return {
        "before": change.before,
        "after": change.after,
        "cause": change.cause,
        "verdict": change.verdict,
        "steps": list(change.events),
        "misses": change.misses,
        "window": settings.latch_window,
        "slack_ms": None if slack_us is None else slack_us / 1e3,
    }


def _transition_level(change: Transition) -> Level:
    if change.after is State.HOLDING:
        return Level.WARNING if change.cause is Ask.HOLD else Level.ERROR
    return Level.WARNING if change.after is State.FROZEN and isinstance(change.cause, Verdict) else Level.INFO


def _cause(change: Transition) -> str:
    if isinstance(change.cause, Verdict):
        return f"{change.cause}. {change.cause.sentence}"
    return _CAUSES[change.cause]


_CAUSES: Mapping[Ask | Start, str] = {
    Ask.HOLD: "a person asked for a hold.",
    Ask.REARM: "a person rearmed it.",
    Ask.TAKE: "the gateway took authority.",
    Ask.RELEASE: "the gateway released authority.",
    Start.CLEAN: "the run starts.",
    Start.RESTART: "the previous run did not end in order, or ended on hold.",
}


def quality(section: str, signal: str, before: str, after: str, value: object) -> Notice:
    """A signal's quality changed."""
    return Notice(
        Kind.QUALITY,
        Level.INFO if after == "good" else Level.WARNING,
        f"{section}.{signal} is {after} now, it was {before}; it reads {value!r}.",
        section=section,
        detail={"signal": signal, "before": before, "after": after, "value": str(value)[:80]},
    )


# People ----------------------------------------------------------------------------------------------------------


def authority(before: str, after: str, who: str) -> Notice:
    """The authority of the whole gateway changed."""
    return Notice(
        Kind.AUTHORITY,
        Level.WARNING,
        f"Authority is {after} now, it was {before}; by {who}.",
        detail={"before": before, "after": after, "who": who},
    )


def authority_denied(wanted: str, why: str) -> Notice:
    """The authority a run was started with is not given."""
    return Notice(
        Kind.AUTHORITY,
        Level.ERROR,
        _full_stop(f"Authority {wanted} is denied: {why}"),
        detail={"wanted": wanted, "why": why},
    )


def request(number: int, who: str, words: str, state: str, reason: str) -> Notice:
    """What became of what a person asked; `reason` is empty when nothing needs saying."""
    because = f": {reason}" if reason else ""
    return Notice(
        Kind.REQUEST,
        Level.INFO if state == "applied" else Level.WARNING,
        _full_stop(f"Request {number} of {who}, “{words}”, is {state}{because}"),
        detail={"request": number, "who": who, "words": words, "state": state, "reason": reason},
    )


def rehearsal(line: str, answer: str) -> Notice:
    """The simulated plant was told to misbehave."""
    return Notice(
        Kind.REHEARSAL,
        Level.INFO,
        _full_stop(f"Rehearsal: “{line}”; the simulated plant answers: {answer}"),
        detail={"line": line, "answer": answer},
    )


# Links and panel -------------------------------------------------------------------------------------------------


def link_up(endpoint: str, connects: int) -> Notice:
    """A link carries traffic (again)."""
    again = "" if connects <= 1 else f", for the {_ordinal(connects)} time"
    return Notice(
        Kind.LINK,
        Level.INFO,
        f"The link to {endpoint} is up{again}.",
        detail={"endpoint": endpoint, "state": "up", "connects": connects},
    )


def link_lost(endpoint: str, error: str, sections: Sequence[str]) -> Notice:
    """A link broke: one notice for all its sections, not one for each."""
    return Notice(
        Kind.LINK,
        Level.ERROR,
        f"The link to {endpoint} is lost, {_count(len(sections), 'section')} with it: {_full_stop(error)} "
        "It is being built anew.",
        detail={"endpoint": endpoint, "state": "down", "error": error, "sections": list(sections)},
    )


def link_retry(endpoint: str, attempt: int, wait_s: float, error: str) -> Notice:
    """An attempt to build a link failed."""
    return Notice(
        Kind.LINK,
        Level.WARNING,
        f"Attempt {attempt} to reach {endpoint} failed: {_full_stop(error)} Next attempt in {wait_s:.1f} s.",
        detail={"endpoint": endpoint, "state": "connecting", "attempt": attempt, "wait_s": wait_s, "error": error},
    )


def write_unknown(tags: Sequence[str], k_sent: int, error: str) -> Notice:
    """Nobody knows whether a set of inputs arrived."""
    return Notice(
        Kind.WRITE_UNKNOWN,
        Level.WARNING,
        f"The write of set {k_sent} was not acknowledged ({error}): {_count(len(tags), 'value')} may still arrive. "
        "The panel's counter is read back before anything is trusted.",
        detail={"tags": list(tags), "set": k_sent, "error": error},
    )


def set_refused(k_sent: int, refusal: str) -> Notice:
    """The panel refused a whole set of inputs."""
    return Notice(
        Kind.SET_REFUSED,
        Level.WARNING,
        _full_stop(f"The panel refused set {k_sent}: {refusal}"),
        detail={"set": k_sent, "refusal": refusal},
    )


def panel(*, tripped: bool) -> Notice:
    """The panel tripped to its local action, or its trip is over."""
    sentence = (
        "The panel has tripped: it lost our heartbeat and drives every section by its own local action."
        if tripped
        else "The panel's trip is over: it sees our heartbeat again."
    )
    return Notice(Kind.PANEL, Level.ERROR if tripped else Level.INFO, sentence, detail={"tripped": tripped})


def permit(*, on: bool) -> Notice:
    """The panel's permit went on or off."""
    sentence = "The panel's permit is on." if on else "The panel's permit is off: nothing is written until it is on."
    return Notice(Kind.PERMIT, Level.INFO if on else Level.ERROR, sentence, detail={"on": on})


# The service itself ----------------------------------------------------------------------------------------------


@dataclass(frozen=True)
class Interval:
    """What the periods of one summary interval were like.

    Attributes:
        seconds: its length.
        periods: how many periods ran.
        misses: section-periods by verdict, misses only.
        states: sections by state, now.
        held: names of the sections on hold, now.
        slack_median_us, slack_least_us: over the periods with an acknowledged write; None when there was none.
    """

    seconds: float
    periods: int
    misses: Mapping[Verdict, int]
    states: Mapping[State, int]
    held: Sequence[str]
    slack_median_us: float | None
    slack_least_us: float | None


def summary(interval: Interval) -> Notice:
    """One line per summary interval."""
    missed = sum(interval.misses.values())
    causes = ", ".join(f"{verdict} {count}" for verdict, count in sorted(interval.misses.items()) if count)
    states = ", ".join(f"{count} {state}" for state, count in sorted(interval.states.items()) if count)
    held = f" ({', '.join(interval.held)})" if interval.held else ""
    slack = (
        "nothing written"
        if interval.slack_median_us is None or interval.slack_least_us is None
        else f"slack {interval.slack_median_us / 1e3:.1f} ms median, {interval.slack_least_us / 1e3:.1f} ms least"
    )
    return Notice(
        Kind.SUMMARY,
        Level.INFO,
        f"Last {interval.seconds:g} s: {_count(interval.periods, 'period')}, "
        f"{_count(missed, 'section-period')} missed{f' ({causes})' if causes else ''}, {slack}; {states}{held}.",
        detail={
            "seconds": interval.seconds,
            "periods": interval.periods,
            "misses": dict(interval.misses),
            "states": dict(interval.states),
            "held": list(interval.held),
            "slack_median_us": interval.slack_median_us,
            "slack_least_us": interval.slack_least_us,
        },
    )


def skipped(first_k: int, count: int) -> Notice:
    """Whole periods passed without being run."""
    return Notice(
        Kind.SKIPPED,
        Level.WARNING,
        f"{_count(count, 'period')} from {first_k} on did not run: this process was not given the processor in time.",
        detail={"first_k": first_k, "count": count},
    )


def clock_stepped(step_ns: int) -> Notice:
    """The wall clock was moved; periods are not."""
    return Notice(
        Kind.CLOCK,
        Level.WARNING,
        f"The wall clock was stepped by {step_ns / 1e6:+.0f} ms. Periods keep to the monotonic clock.",
        detail={"step_ms": step_ns / 1e6},
    )


def synthesis_broken(why: str) -> Notice:
    """The synthesis refused to run or broke down; every section is frozen for the period."""
    return Notice(
        Kind.SYNTHESIS,
        Level.ERROR,
        f"The synthesis broke down: {_full_stop(why)} Its inputs were thrown away.",
        detail={"why": why},
    )


def task_died(task: str, error: str) -> Notice:
    """A supervised task ended that should not have."""
    return Notice(
        Kind.TASK_DIED,
        Level.ERROR,
        f"Our task {task} died: {_full_stop(error)} What depends on it is frozen.",
        detail={"task": task, "error": error},
    )


# The journal -----------------------------------------------------------------------------------------------------


def journal_failing(error: str) -> Notice:
    """The journal cannot be written."""
    return Notice(
        Kind.JOURNAL,
        Level.ERROR,
        f"The journal cannot be written: {_full_stop(error)} Periods go on; recent records wait in memory. "
        "Make room on its disk.",
        detail={"state": "failing", "error": error},
    )


def journal_behind(depth: int, capacity: int) -> Notice:
    """The journal's queue fills up."""
    return Notice(
        Kind.JOURNAL,
        Level.WARNING,
        f"The journal is behind: {depth} of at most {capacity} records wait. Its disk is too slow, or failing.",
        detail={"state": "behind", "depth": depth, "capacity": capacity},
    )


def journal_losing(why: str) -> Notice:
    """Records are being lost."""
    return Notice(
        Kind.JOURNAL,
        Level.ERROR,
        f"The journal is losing records, and counts them: {_full_stop(why)} Periods go on.",
        detail={"state": "losing", "why": why},
    )


def journal_unrecordable(error: str) -> Notice:
    """A record has a form that no disk would take."""
    return Notice(
        Kind.JOURNAL,
        Level.ERROR,
        f"A record cannot be written, whatever the disk does: {_full_stop(error)} It is counted as lost; our fault.",
        detail={"state": "unrecordable", "error": error},
    )


def journal_recovered(failed_attempts: int, lost: int) -> Notice:
    """The journal is written again, or has caught up."""
    now = f"is written again, after {_count(failed_attempts, 'failed attempt')}" if failed_attempts else "has caught up"
    return Notice(
        Kind.JOURNAL,
        Level.WARNING if lost else Level.INFO,
        f"The journal {now}; {_count(lost, 'record')} lost.",
        detail={"state": "recovered", "failed_attempts": failed_attempts, "lost": lost},
    )


def journal_dead(error: str) -> Notice:
    """The journal's thread died."""
    return Notice(
        Kind.JOURNAL,
        Level.ERROR,
        f"The journal's thread died: {_full_stop(error)} Nothing is recorded any more. Restart when the plant allows.",
        detail={"state": "dead", "error": error},
    )


def journal_lost(what: str, cause: str, count: int, first_k: int | None, last_k: int | None) -> Notice:
    """The gap in the journal, told inside it."""
    where = "" if first_k is None else f" between periods {first_k} and {last_k}"
    return Notice(
        Kind.JOURNAL_LOST,
        Level.ERROR,
        _full_stop(f"The journal lacks {_count(count, what)}{where}: {cause}"),
        detail={"what": what, "cause": cause, "count": count, "first_k": first_k, "last_k": last_k},
    )


def requests_failing(error: str) -> Notice:
    """The file of requests cannot be read or written."""
    return Notice(
        Kind.REQUEST,
        Level.ERROR,
        f"Requests cannot be taken: {_full_stop(error)} Periods go on, but nobody can hold or rearm a section.",
        detail={"state": "failing", "error": error},
    )


def requests_recovered() -> Notice:
    """The file of requests works again."""
    return Notice(Kind.REQUEST, Level.INFO, "Requests are taken again.", detail={"state": "recovered"})


def requests_dead(error: str) -> Notice:
    """The thread that takes requests died."""
    return Notice(
        Kind.REQUEST,
        Level.ERROR,
        f"The thread that takes requests died: {_full_stop(error)} Nobody can hold or rearm a section.",
        detail={"state": "dead", "error": error},
    )


def moved_aside(noun: str, aside: str) -> Notice:
    """A damaged file was found, kept under another name, and replaced by a new one."""
    return Notice(
        Kind.JOURNAL,
        Level.ERROR,
        f"The {noun} was damaged. It was kept as {aside}, nothing of it was deleted; a new one begins here.",
        detail={"state": "moved_aside", "noun": noun, "aside": aside},
    )


def _count(number: int, noun: str, plural: str | None = None) -> str:
    return f"{number} {noun if number == 1 else plural or noun + 's'}"


def _ordinal(number: int) -> str:
    suffix = "th" if number % 100 in (11, 12, 13) else {1: "st", 2: "nd", 3: "rd"}.get(number % 10, "th")
    return f"{number}{suffix}"


def _full_stop(text: str) -> str:
    return text if text.endswith((".", "!", "?")) else f"{text}."
