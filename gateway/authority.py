"""How far the gateway as a whole may act: observe, limited, full.

    observe   reads, computes and records what it would have written; writes nothing
    limited   writes inside a band around the inputs found at take-over
    full      writes inside the plant file's limits

    band of one input = [found − b w, found + b w] ∩ hard limits,   w its span, b = `band_spans`

A site that leads to a real plant starts in observe, the bench in full. A change is validated as a whole before any of
it holds: every input must have been read and lie inside its hard limits, or nothing changes. Asking for `limited` again
finds the inputs anew. Leaving and entering observe is what each section's hold table knows as release and take.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from enum import StrEnum
from math import isfinite

from gateway.hold import Ask
from gateway.plantfile.plant import Signal, SiteKind

BAND_SPANS = 0.1
MOST_NAMED = 8
"""Inputs spelled out in a sentence before the rest is only counted."""


class Authority(StrEnum):
    """How far the gateway may act."""

    OBSERVE = "observe"
    LIMITED = "limited"
    FULL = "full"

    @property
    def writes(self) -> bool:
        """Whether anything may be written at all."""
        return self is not Authority.OBSERVE

    @property
    def sentence(self) -> str:
        """One sentence for a person."""
        return _SENTENCES[self]


_SENTENCES = {
    Authority.OBSERVE: "The gateway only watches: it computes and records, and writes nothing.",
    Authority.LIMITED: "The gateway drives inside a band around the inputs found when it took over.",
    Authority.FULL: "The gateway drives inside the limits of the plant file.",
}


@dataclass(frozen=True)
class AuthorityState:
    """Authority that holds now.

    Attributes:
        level: how far it goes.
        limits: band by tag, engineering units; empty unless `limited`.
    """

    level: Authority
    limits: Mapping[str, tuple[float, float]] = field(default_factory=dict)

    def bands(self) -> Mapping[str, tuple[float, float]]:
        """Band of every input that has one, by tag, engineering units."""
        return self.limits


class Denial(StrEnum):
    """Why authority does not change."""

    ALREADY = "already"
    UNREAD = "unread"
    OUTSIDE = "outside"
    NOT_SOAKED = "not_soaked"


@dataclass(frozen=True)
class Denied:
    """Authority stays as it is, and why; `tags` are the inputs in the way."""

    reason: Denial
    sentence: str
    tags: tuple[str, ...] = ()


@dataclass(frozen=True)
class Changed:
    """Authority changes.

    Attributes:
        state: what holds from now on.
        before: the level until now.
        ask: what every section is asked with it, None when nothing changes for its hold table.
        overridden: whether it was given against the missing soak record; to be told loudly.
    """

    state: AuthorityState
    before: Authority
    ask: Ask | None
    overridden: bool

    @property
    def sentence(self) -> str:
        """One sentence for a person."""
        text = f"Authority is {self.state.level} now, it was {self.before}. {self.state.level.sentence}"
        if self.overridden:
            text += " This plant file has no passed soak record: somebody decided to go on without one."
        return text


def default_authority(kind: SiteKind) -> Authority:
    """Authority a site of this kind starts with unless told otherwise."""
    return {SiteKind.BENCH: Authority.FULL, SiteKind.LIVE: Authority.OBSERVE}[kind]


def at_start(level: Authority) -> AuthorityState:
    """Authority before anything was read.

    Raises:
        ValueError: `limited`, whose band needs inputs that were read.
    """
    if level is Authority.LIMITED:
        raise ValueError("authority = limited: cannot hold before inputs were read; start in observe, then ask for it")
    return AuthorityState(level)


def change(
    state: AuthorityState,
    to: Authority,
    inputs: Sequence[Signal],
    found: Mapping[str, float],
    site: SiteKind,
    *,
    soaked: bool,
    override: bool = False,
    band_spans: float = BAND_SPANS,
) -> Changed | Denied:
    """Decide a request for authority.

    Args:
        state: what holds now.
        to: what is asked for.
        inputs: all driven signals.
        found: what each is told now, by tag, engineering units; absent or not finite when unread.
        site: where the signals lead.
        soaked: whether a passed soak record exists for exactly this plant file.
        override: whether the person insists on full authority over a live site without one.
        band_spans: half width of the band of `limited`, fraction of span.

    Raises:
        ValueError: the band is not a positive fraction.
    """
    if not 0 < band_spans <= 1:
        raise ValueError(f"band_spans = {band_spans}: must be a fraction of span, above 0, at most 1")
    if to is state.level and to is not Authority.LIMITED:
        return Denied(Denial.ALREADY, f"Authority is {to} already.")
    if not to.writes:
        return Changed(AuthorityState(to), state.level, Ask.RELEASE, overridden=False)
    if (denied := _check_inputs(inputs, found)) is not None:
        return denied
    unproven = to is Authority.FULL and site is SiteKind.LIVE and not soaked
    if unproven and not override:
        return Denied(
            Denial.NOT_SOAKED,
            "Full authority over a live site wants a passed soak record of exactly this plant file; there is none.",
        )
    limits = {}
    if to is Authority.LIMITED:
        limits = {signal.tag: _band(signal, found[signal.tag], band_spans) for signal in inputs}
    ask = None if state.level.writes else Ask.TAKE
    return Changed(AuthorityState(to, limits), state.level, ask, overridden=unproven)


def _check_inputs(inputs: Sequence[Signal], found: Mapping[str, float]) -> Denied | None:
    unread = tuple(signal.tag for signal in inputs if not isfinite(found.get(signal.tag, float("nan"))))
    if unread:
        return Denied(
            Denial.UNREAD,
            f"Nobody knows what these inputs are told now, so they cannot be taken over: {_named(unread)}.",
            unread,
        )
    outside = [signal for signal in inputs if not signal.hard[0] <= found[signal.tag] <= signal.hard[1]]
    if outside:
        facts = [f"{s.tag} at {found[s.tag]:g} {s.unit} ({s.hard[0]:g}..{s.hard[1]:g})" for s in outside]
        return Denied(
            Denial.OUTSIDE,
            f"These inputs stand outside their hard limits; bring them inside first: {_named(facts)}.",
            tuple(signal.tag for signal in outside),
        )
    return None


def _band(signal: Signal, found: float, band_spans: float) -> tuple[float, float]:
    half = band_spans * signal.width
    return max(found - half, signal.hard[0]), min(found + half, signal.hard[1])


def _named(names: Sequence[str]) -> str:
    rest = len(names) - MOST_NAMED
    return ", ".join(names[:MOST_NAMED]) + (f" and {rest} more" if rest > 0 else "")
