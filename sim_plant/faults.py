"""Faults by request: one line of text is one fault, or the end of one.

    bias SIGNAL VALUE [for N s]      the transmitter reads VALUE too high (in the signal's unit), with good status
    freeze SIGNAL [for N s]          the transmitter repeats its last reading, with good status
    dropout SIGNAL [for N s]         no value, bad status
    nan SIGNAL [for N s]             not a number, with good status
    stuck SIGNAL [for N s]           the actuator stays where it is, whatever it is told
    clear SIGNAL                     ends the fault of a transmitter or an actuator; `clear all` ends them all
    set SIGNAL VALUE [for N s]       a consumer takes VALUE instead of its profile
    release SIGNAL                   the consumer follows its profile again
    permit off|on [for N s]          the site withdraws or gives the permit

A signal is named as in logs, `tank-4.level`. A device has one fault at a time, the newest. With `for`, the fault ends
by itself after that much plant time; `min` is understood as well.
"""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from dataclasses import dataclass
from enum import StrEnum
from math import isfinite

ALL = "all"
"""In place of a signal: every fault there is."""
PERMIT = "panel.permit"
"""What `permit` acts upon."""

_UNITS_S = {"s": 1.0, "min": 60.0}


class Device(StrEnum):
    """What a line acts upon. One signal may have two devices: a measured consumer draws, and has a transmitter."""

    TRANSMITTER = "transmitter"
    ACTUATOR = "actuator"
    CONSUMER = "consumer"
    PERMIT = "permit"


class FaultKind(StrEnum):
    """First word of a line."""

    BIAS = "bias"
    FREEZE = "freeze"
    DROPOUT = "dropout"
    NAN = "nan"
    STUCK = "stuck"
    CLEAR = "clear"
    SET = "set"
    RELEASE = "release"
    PERMIT = "permit"

    @property
    def devices(self) -> tuple[Device, ...]:
        """What it can act upon."""
        return _DEVICES[self]

    @property
    def with_value(self) -> bool:
        """Whether a value follows the signal."""
        return self in (FaultKind.BIAS, FaultKind.SET)

    @property
    def timed(self) -> bool:
        """Whether `for` may follow."""
        return self not in (FaultKind.CLEAR, FaultKind.RELEASE)

    @property
    def form(self) -> str:
        """How the line is written."""
        subject = "off|on" if self is FaultKind.PERMIT else "SIGNAL"
        return f"{self} {subject}{' VALUE' if self.with_value else ''}{' [for N s]' if self.timed else ''}"


_DEVICES = {
    FaultKind.BIAS: (Device.TRANSMITTER,),
    FaultKind.FREEZE: (Device.TRANSMITTER,),
    FaultKind.DROPOUT: (Device.TRANSMITTER,),
    FaultKind.NAN: (Device.TRANSMITTER,),
    FaultKind.STUCK: (Device.ACTUATOR,),
    FaultKind.CLEAR: (Device.TRANSMITTER, Device.ACTUATOR),
    FaultKind.SET: (Device.CONSUMER,),
    FaultKind.RELEASE: (Device.CONSUMER,),
    FaultKind.PERMIT: (Device.PERMIT,),
}


class FaultError(ValueError):
    """A line that can't be understood or doesn't fit the plant; says where, what was read, and what is allowed."""


@dataclass(frozen=True)
class Fault:
    """One line, understood. `signal` is a tag, `ALL` or `PERMIT`; `duration_s` None means until further notice."""

    kind: FaultKind
    signal: str
    value: float | None = None
    on: bool | None = None
    duration_s: float | None = None

    def __str__(self) -> str:
        subject = ("on" if self.on else "off") if self.kind is FaultKind.PERMIT else self.signal
        value = "" if self.value is None else f" {self.value:g}"
        until = "" if self.duration_s is None else f" for {self.duration_s:g} s"
        return f"{self.kind} {subject}{value}{until}"


def parse(line: str) -> Fault:
    """Understand one line.

    Raises:
        FaultError: names the word, what stands there, and what is allowed.
    """
    words = line.split()
    if not words:
        raise FaultError(f"empty line: allowed are {_listed(kind.form for kind in FaultKind)}")
    try:
        kind = FaultKind(words[0])
    except ValueError:
        raise _wrong(words, 0, f"allowed are {_listed(FaultKind)}", list(FaultKind)) from None
    duration_s, words = _split_duration(kind, words)
    wanted = 3 if kind.with_value else 2
    if len(words) < wanted:
        missing = "VALUE" if len(words) == 2 else ("off or on" if kind is FaultKind.PERMIT else "SIGNAL")
        raise FaultError(f"'{' '.join(words)}' ends too early: {missing} is missing; the form is '{kind.form}'")
    if len(words) > wanted:
        raise _wrong(words, wanted, f"nothing more is expected here; the form is '{kind.form}'")
    if kind is FaultKind.PERMIT:
        if words[1] not in ("off", "on"):
            raise _wrong(words, 1, "allowed are 'off' and 'on'")
        return Fault(kind, PERMIT, on=words[1] == "on", duration_s=duration_s)
    if words[1] != ALL and "." not in words[1]:
        raise _wrong(words, 1, "a signal is written SECTION.SIGNAL, like tank-4.level")
    if words[1] == ALL and kind is not FaultKind.CLEAR:
        raise _wrong(words, 1, f"only 'clear' takes 'all'; the form is '{kind.form}'")
    value = _number(words, 2, "a finite number") if kind.with_value else None
    return Fault(kind, words[1], value=value, duration_s=duration_s)


def _split_duration(kind: FaultKind, words: list[str]) -> tuple[float | None, list[str]]:
    """Take `for N s` off the end."""
    if "for" not in words:
        return None, words
    at = words.index("for")
    if not kind.timed:
        raise _wrong(words, at, f"'{kind}' acts at once and has no duration; the form is '{kind.form}'")
    if len(words) != at + 3:
        raise _wrong(words, at, "a duration is written 'for N s' or 'for N min', at the end of the line")
    number = _number(words, at + 1, "a number above zero")
    if number <= 0.0:
        raise _wrong(words, at + 1, "a duration must be above zero")
    if words[at + 2] not in _UNITS_S:
        raise _wrong(words, at + 2, f"allowed units of time are {_listed(_UNITS_S)}")
    return number * _UNITS_S[words[at + 2]], words[:at]


def _number(words: list[str], at: int, wanted: str) -> float:
    try:
        number = float(words[at])
    except ValueError:
        number = float("nan")
    if not isfinite(number):
        raise _wrong(words, at, f"{wanted} is wanted")
    return number


def _wrong(words: list[str], at: int, allowed: str, spellings: Iterable[str] = ()) -> FaultError:
    nearest = difflib.get_close_matches(words[at], list(spellings), n=1)
    hint = f" (nearest: '{nearest[0]}')" if nearest else ""
    return FaultError(f"word {at + 1} of '{' '.join(words)}': read '{words[at]}', {allowed}{hint}")


def _listed(names: Iterable[str]) -> str:
    return ", ".join(f"'{name}'" for name in names)
