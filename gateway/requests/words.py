"""What a person may ask, and how it is read: words in, a frozen request out, or one clear error."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from math import isfinite

from gateway.authority import Authority
from gateway.plantfile.mistakes import nearest
from gateway.plantfile.plant import Plant, Signal

ALL = "all"

MOST_NAMED = 8
"""Names spelled out in an error before the rest is only counted."""


class RequestError(ValueError):
    """The words are no request for this plant; the message names the word, what is allowed and the nearest spelling."""


@dataclass(frozen=True)
class Hold:
    """Put these sections on hold."""

    sections: tuple[str, ...]


@dataclass(frozen=True)
class Rearm:
    """End the safe hold of these sections."""

    sections: tuple[str, ...]


@dataclass(frozen=True)
class SetAuthority:
    """Let the gateway act this far."""

    authority: Authority


@dataclass(frozen=True)
class SetTarget:
    """Aim this signal at this value, in the signal's engineering unit."""

    tag: str
    value: float


@dataclass(frozen=True)
class Rehearse:
    """Let the next syntheses be late; control refuses it anywhere but on a bench."""

    slow_periods: int


Request = Hold | Rearm | SetAuthority | SetTarget | Rehearse

MOST_SLOW = 100
"""Longest rehearsal of slow syntheses, periods."""


def parse_request(words: str | Sequence[str], plant: Plant) -> Request:
    """Read a request.

    Args:
        words: "hold tank-3", or the same already split.
        plant: the plant it is made to: its sections, tags, units and limits.

    Raises:
        RequestError: with the word that is wrong, what is allowed there, and the nearest right spelling.
    """
    split = words.split() if isinstance(words, str) else [part for word in words for part in word.split()]
    if not split:
        raise RequestError(f"nothing was asked; ask one of: {_USAGES}")
    verb, *rest = split
    if verb not in _READERS:
        raise RequestError(_unknown(verb, "request", _READERS))
    return _READERS[verb](rest, plant)


def _hold(rest: Sequence[str], plant: Plant) -> Request:
    return Hold(_sections("hold", rest, plant))


def _rearm(rest: Sequence[str], plant: Plant) -> Request:
    return Rearm(_sections("rearm", rest, plant))


def _sections(verb: str, rest: Sequence[str], plant: Plant) -> tuple[str, ...]:
    names = tuple(section.name for section in plant.sections)
    if len(rest) != 1:
        raise RequestError(f"{verb} wants one section, or {ALL}; got {len(rest)} words")
    if rest[0] == ALL:
        return names
    if rest[0] not in names:
        raise RequestError(_unknown(rest[0], f"section of {plant.name}", (*names, ALL)))
    return (rest[0],)


def _authority(rest: Sequence[str], plant: Plant) -> Request:
    if len(rest) != 1 or rest[0] not in tuple(Authority):
        raise RequestError(_unknown(" ".join(rest), "authority", Authority))
    return SetAuthority(Authority(rest[0]))


def _target(rest: Sequence[str], plant: Plant) -> Request:
    if not 2 <= len(rest) <= 3:
        raise RequestError(f"target wants a tag, a value and perhaps its unit; got {len(rest)} words")
    signals = {signal.tag: signal for section in plant.sections for signal in section.signals}
    aimed = {tag: signal for tag, signal in signals.items() if signal.target is not None}
    tag, text, *unit = rest
    if tag not in signals:
        raise RequestError(_unknown(tag, f"tag of {plant.name}", aimed))
    if tag not in aimed:
        raise RequestError(f"{tag} has no target in the plant file, so none can be set; tags with one: {_named(aimed)}")
    signal = aimed[tag]
    if unit and unit[0] != signal.unit:
        raise RequestError(f"{tag} is in {signal.unit}, not {unit[0]}; give the value in {signal.unit}")
    return SetTarget(tag, _value(text, signal))


def _value(text: str, signal: Signal) -> float:
    try:
        value = float(text)
    except ValueError:
        raise RequestError(f"“{text}” is no number; give the target of {signal.tag} in {signal.unit}") from None
    low = max(signal.span[0], signal.hard[0], signal.soft[0])
    high = min(signal.span[1], signal.hard[1], signal.soft[1])
    if not isfinite(value) or not low <= value <= high:
        raise RequestError(
            f"{signal.tag} = {text} {signal.unit} is outside its limits; allowed: {low:g} to {high:g} {signal.unit}"
        )
    return value


def _rehearse(rest: Sequence[str], _: Plant) -> Request:
    if len(rest) != 2 or rest[0] != "slow" or not rest[1].isdecimal() or not 1 <= int(rest[1]) <= MOST_SLOW:
        got = " ".join(rest) or "nothing"
        raise RequestError(f"rehearse wants “slow” and a number of periods from 1 to {MOST_SLOW}; got “{got}”")
    return Rehearse(int(rest[1]))


_READERS: Mapping[str, Callable[[Sequence[str], Plant], Request]] = {
    "hold": _hold,
    "rearm": _rearm,
    "authority": _authority,
    "target": _target,
    "rehearse": _rehearse,
}

_USAGES = "hold SECTION|all, rearm SECTION|all, authority observe|limited|full, target TAG VALUE, rehearse slow PERIODS"


def _unknown(word: str, what: str, right: Iterable[str]) -> str:
    names = list(right)
    close = nearest(word, names)
    hint = f"; nearest: {close}" if close is not None else ""
    return f"“{word}” is no {what}; allowed: {_named(names)}{hint}"


def _named(names: Iterable[str]) -> str:
    listed = list(names)
    rest = len(listed) - MOST_NAMED
    return ", ".join(listed[:MOST_NAMED]) + (f" and {rest} more" if rest > 0 else "") or "none"
