"""Sentences about what people asked, and what came of it."""

from __future__ import annotations

from gateway.sentences.notice import Kind, Level, Notice, full_stop


def authority(before: str, after: str, who: str, *, overridden: bool = False) -> Notice:
    """The authority of the whole gateway changed; `overridden` when a person insisted without a passed soak record."""
    loud = " This plant file has no passed soak record: somebody decided to go on without one." if overridden else ""
    return Notice(
        Kind.AUTHORITY,
        Level.ERROR if overridden else Level.WARNING,
        f"Authority is {after} now, it was {before}; by {who}.{loud}",
        detail={"before": before, "after": after, "who": who, "overridden": overridden},
    )


def authority_denied(wanted: str, why: str) -> Notice:
    """The authority a run was started with is not given."""
    return Notice(
        Kind.AUTHORITY,
        Level.ERROR,
        full_stop(f"Authority {wanted} is denied: {why}"),
        detail={"wanted": wanted, "why": why},
    )


def request(number: int, who: str, words: str, state: str, reason: str) -> Notice:
    """What became of what a person asked; `reason` is empty when nothing needs saying."""
    because = f": {reason}" if reason else ""
    return Notice(
        Kind.REQUEST,
        Level.INFO if state == "applied" else Level.WARNING,
        full_stop(f"Request {number} of {who}, “{words}”, is {state}{because}"),
        detail={"request": number, "who": who, "words": words, "state": state, "reason": reason},
    )


def rehearsal(line: str, answer: str) -> Notice:
    """The simulated plant was told to misbehave."""
    return Notice(
        Kind.REHEARSAL,
        Level.INFO,
        full_stop(f"Rehearsal: “{line}”; the simulated plant answers: {answer}"),
        detail={"line": line, "answer": answer},
    )
