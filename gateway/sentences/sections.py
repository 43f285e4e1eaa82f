"""Sentences about sections and their signals."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from gateway.hold import Ask, Start, State, Transition
from gateway.plantfile.plant import HoldSpec
from gateway.sentences.notice import Kind, Level, Notice, counted
from gateway.verdict import Verdict


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
        f"{counted(len(sections), 'section')} ({named}) go {_way(change, settings, slack_us)}"
        f"{_waits(change, 'They wait')}",
        detail={"sections": list(sections), **_transition_detail(change, settings, slack_us)},
    )


def _way(change: Transition, settings: HoldSpec, slack_us: int | None) -> str:
    slack = "" if slack_us is None else f" Slack {slack_us / 1e3:.1f} ms."
    return (
        f"from {change.before} to {change.after}: {_cause(change)} "
        f"{counted(change.misses, 'miss', 'misses')} in the last {settings.latch_window} periods.{slack}"
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
        f"{section}.{signal} is {after} now, it was {before}; it reads {_plain(value)}.",
        section=section,
        detail={"signal": signal, "before": before, "after": after, "value": str(value)[:80]},
    )


def _plain(value: object) -> str:
    """A value as a person would write it: no more digits than a transmitter has."""
    return f"{value:.6g}" if isinstance(value, float) else repr(value)[:80]
