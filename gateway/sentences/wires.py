"""Sentences about links and the panel."""

from __future__ import annotations

from collections.abc import Sequence

from gateway.sentences.notice import Kind, Level, Notice, counted, full_stop, ordinal


def link_up(endpoint: str, connects: int) -> Notice:
    """A link carries traffic (again)."""
    again = "" if connects <= 1 else f", for the {ordinal(connects)} time"
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
        f"The link to {endpoint} is lost, {counted(len(sections), 'section')} with it: {full_stop(error)} "
        "It is being built anew.",
        detail={"endpoint": endpoint, "state": "down", "error": error, "sections": list(sections)},
    )


def link_retry(endpoint: str, attempt: int, wait_s: float, error: str) -> Notice:
    """An attempt to build a link failed."""
    return Notice(
        Kind.LINK,
        Level.WARNING,
        f"Attempt {attempt} to reach {endpoint} failed: {full_stop(error)} Next attempt in {wait_s:.1f} s.",
        detail={"endpoint": endpoint, "state": "connecting", "attempt": attempt, "wait_s": wait_s, "error": error},
    )


def write_unknown(tags: Sequence[str], k_sent: int, error: str) -> Notice:
    """Nobody knows whether a set of inputs arrived."""
    return Notice(
        Kind.WRITE_UNKNOWN,
        Level.WARNING,
        f"The write of set {k_sent} was not acknowledged ({error}): {counted(len(tags), 'value')} may still arrive. "
        "The panel's counter is read back before anything is trusted.",
        detail={"tags": list(tags), "set": k_sent, "error": error},
    )


def hand_back_unanswered(sections: Sequence[str]) -> Notice:
    """At the end of a run, nobody knows whether the panel has these sections back."""
    return Notice(
        Kind.WRITE_UNKNOWN,
        Level.WARNING,
        f"Handing {counted(len(sections), 'section')} back to the panel was not acknowledged ({', '.join(sections)}): "
        "without our heartbeat its watchdog takes what it has not got.",
        detail={"sections": list(sections)},
    )


def set_refused(k_sent: int, refusal: str) -> Notice:
    """The panel refused a whole set of inputs."""
    return Notice(
        Kind.SET_REFUSED,
        Level.WARNING,
        full_stop(f"The panel refused set {k_sent}: {refusal}"),
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
