"""Requests: what of one list of written values the panel takes.

Values are handled in the order of the list; the outcome of each says whether it took effect, so that nobody has to
guess. An input's outcome is known only when its set is committed or the request ends.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field, replace
from enum import StrEnum
from math import isfinite

from sim_plant.panel.charge import Cause
from sim_plant.panel.state import EventKind, PanelEvent, PanelSettings, PanelState
from sim_plant.panel.timing import tick


class Outcome(StrEnum):
    """What became of one written value."""

    TAKEN = "taken"
    UNKNOWN = "no such tag"
    READ_ONLY = "read only"
    WRONG_TYPE = "wrong type"
    NOT_FINITE = "not a finite number"
    NO_PERMIT = "permit is off"
    TRIPPED = "tripped, and the heartbeat has not moved since"
    NOT_IN_CHARGE = "its section is not in charge of control"
    UNCOMMITTED = "no period followed it in the same request"
    SPOILED = "another value of the set was not usable"
    NO_EXPIRY = "no expiry came before the period"
    EXPIRED = "expired"
    TOO_FAR = "expires later than the window allows"
    REPLAYED = "period counter not newer than the last accepted"


@dataclass(frozen=True)
class Written:
    """Answer to one request: the new state, the outcome of each value in order, and what is worth logging."""

    state: PanelState
    outcomes: tuple[Outcome, ...]
    events: tuple[PanelEvent, ...]


_READ_ONLY = frozenset(
    {"panel.permit", "panel.clock", "panel.accepted", "panel.refusal", "panel.tripped", "panel.clamped"}
)
_COUNTER_BITS = {"panel.heartbeat": 32, "panel.expires": 64, "panel.period": 64}


def write(settings: PanelSettings, state: PanelState, values: Sequence[tuple[str, object]], clock_ms: int) -> Written:
    """Handle one request of (tag, value) pairs that arrived at this instant.

    Raises:
        ValueError: the clock would run backwards.
    """
    state, events = tick(settings, state, clock_ms)
    request = _Request(settings, state, list(events))
    for position, (tag, value) in enumerate(values):
        request.take(position, tag, value)
    return Written(request.state, tuple(request.outcomes), tuple(request.events))


@dataclass
class _Request:
    """One request while it is being handled; gone with it."""

    settings: PanelSettings
    state: PanelState
    events: list[PanelEvent]
    outcomes: list[Outcome] = field(default_factory=list)
    staged: list[tuple[int, str, float]] = field(default_factory=list)
    """Inputs waiting for their period: position in the request, tag, value."""
    spoiled: str = ""
    """The tag of this set whose value could not be staged."""
    expires_ms: int | None = None

    def take(self, position: int, tag: str, value: object) -> None:
        """Handle the next value of the list."""
        if tag in self.settings.point_of:
            outcome = self._stage(position, tag, value)
        elif tag in self.settings.section_of_bit:
            outcome = self._take_or_hand_back(self.settings.section_of_bit[tag], value)
        elif not self.settings.supervised:
            outcome = Outcome.UNKNOWN
        elif tag in _COUNTER_BITS:
            outcome = self._count(tag, value)
        else:
            outcome = Outcome.READ_ONLY if tag in _READ_ONLY else Outcome.UNKNOWN
        self.outcomes.append(outcome)

    def _stage(self, position: int, tag: str, value: object) -> Outcome:
        if not isinstance(value, float):
            self.spoiled = tag
            return Outcome.WRONG_TYPE
        if not isfinite(value):
            self.spoiled = tag
            return Outcome.NOT_FINITE
        if not self.settings.supervised:
            self._command([(tag, value)])
            return Outcome.TAKEN
        self.staged.append((position, tag, value))
        return Outcome.UNCOMMITTED

    def _take_or_hand_back(self, section: str, value: object) -> Outcome:
        if not isinstance(value, bool):
            return Outcome.WRONG_TYPE
        had = self.state.in_charge(section)
        if not value:
            self.state = self.state.after(Cause.HAND_BACK, (section,))
            if had:
                self._note(EventKind.HANDED_BACK, f"{section} handed back by control, local action runs")
            return Outcome.TAKEN
        if not self.state.permit:
            return Outcome.NO_PERMIT
        if self.state.tripped:
            return Outcome.TRIPPED
        if not self.state.control_present:
            self.state = replace(self.state, still_since_ms=self.state.clock_ms)
        self.state = self.state.after(Cause.TAKE, (section,))
        if not had:
            self._note(EventKind.TAKEN, f"{section} taken by control")
        return Outcome.TAKEN

    def _count(self, tag: str, value: object) -> Outcome:
        if not isinstance(value, int) or isinstance(value, bool) or not 0 <= value < 1 << _COUNTER_BITS[tag]:
            if tag != "panel.heartbeat":
                self.spoiled = self.spoiled or tag
            return Outcome.WRONG_TYPE
        if tag == "panel.heartbeat":
            self._beat(value)
        elif tag == "panel.expires":
            self.expires_ms = value
            self.state = replace(self.state, expires_ms=value)
        else:
            return self._commit(value)
        return Outcome.TAKEN

    def _beat(self, heartbeat: int) -> None:
        if heartbeat == self.state.heartbeat:
            return
        if self.state.tripped:
            self._note(EventKind.UNTRIPPED, "heartbeat moves again: no longer tripped, sections wait to be taken")
        self.state = replace(self.state, heartbeat=heartbeat, still_since_ms=self.state.clock_ms, tripped=False)

    def _commit(self, period: int) -> Outcome:
        """Decide the set whole; either way it is over afterwards."""
        outcome, refusal = next(self._objections(period), (Outcome.TAKEN, ""))
        if outcome is Outcome.TAKEN:
            self._apply(period)
        else:
            for position, _, _ in self.staged:
                self.outcomes[position] = outcome
            self._refuse(period, refusal)
        self.staged, self.spoiled, self.expires_ms = [], "", None
        return outcome

    def _objections(self, period: int) -> Iterator[tuple[Outcome, str]]:
        """Everything that speaks against the set, gravest first, with the sentence that says so."""
        state, now_ms, window_ms = self.state, self.state.clock_ms, self.settings.window_ms
        if not state.permit:
            yield Outcome.NO_PERMIT, "permit is off"
        if self.spoiled:
            yield Outcome.SPOILED, f"the value of {self.spoiled} in it is of the wrong type or not finite"
        if self.expires_ms is None:
            yield Outcome.NO_EXPIRY, "panel.expires must come before panel.period in the same request"
        elif now_ms > self.expires_ms:
            yield Outcome.EXPIRED, f"expired at {self.expires_ms} ms, {now_ms - self.expires_ms} ms ago"
        elif window_ms is not None and self.expires_ms - now_ms > window_ms:
            yield Outcome.TOO_FAR, f"expires {self.expires_ms - now_ms} ms ahead, the window is {window_ms} ms"
        if period <= state.accepted and not state.restart:
            yield Outcome.REPLAYED, f"not newer than the last accepted, {state.accepted}"

    def _apply(self, period: int) -> None:
        told: list[tuple[str, float]] = []
        for position, tag, value in self.staged:
            if self.state.in_charge(self.settings.point_of[tag].section):
                told.append((tag, value))
                self.outcomes[position] = Outcome.TAKEN
            else:
                self.outcomes[position] = Outcome.NOT_IN_CHARGE
        self._command(told)
        if self.state.refused:
            self._note(EventKind.ACCEPTED_AGAIN, f"set {period} accepted, after {self.state.refused} refused in a row")
        self.state = replace(self.state, accepted=period, restart=False, refusal="", refused=0)

    def _command(self, inputs: Sequence[tuple[str, float]]) -> None:
        """Tell actuators what to do, inside their spans whatever was asked."""
        commands, clamped = dict(self.state.commands), self.state.clamped
        for tag, value in inputs:
            point = self.settings.point_of[tag]
            commands[tag] = min(max(value, point.low), point.high)
            if commands[tag] != value:
                clamped = (clamped + 1) % (1 << 32)
                self._note(EventKind.CLAMPED, f"{tag} asked for {value:g}, clamped to {commands[tag]:g}")
        self.state = replace(self.state, commands=commands, clamped=clamped)

    def _refuse(self, period: int, why: str) -> None:
        kind = EventKind.REFUSED_AGAIN if self.state.refused else EventKind.REFUSED
        self.state = replace(self.state, refusal=f"set {period} refused: {why}", refused=self.state.refused + 1)
        self._note(kind, self.state.refusal)

    def _note(self, kind: EventKind, text: str) -> None:
        self.events.append(PanelEvent(kind, text))
