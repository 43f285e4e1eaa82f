"""The story of one minute: what happens to the plant when, as a table of steps.

Every step is either a line to the simulated plant, as if something broke, or a request to the gateway, as a person
would make it. Nothing else tells the gateway what is coming. `story_of` fills the table for any plant: names are picked
by position, and what a plant lacks (a consumer, a second section) is left out.

Times are seconds after the first period (`Times`). A minute for periods up to half a second; longer periods, and holds
that take many periods to latch or to clear, stretch it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from itertools import chain
from typing import Self

from gateway.plantfile.plant import Plant, Role, SectionSpec, Signal

USUAL_PERIOD_S = 0.5
NOTICE_PERIODS = 8
"""Longest time from a freeze to its proof, as a rule: a few equal readings."""

SEE_AGAIN_PERIODS = 9
"""From a mended transmitter to the first clean period: a jump is believed after five readings, and some to spare."""

LONGEST_SLOW = 3
"""Slow syntheses in a row, fewer where so many would latch a hold."""

RETARGET_SPANS = 0.05


@dataclass(frozen=True)
class Step:
    """One thing that happens.

    Attributes:
        at_s: when, seconds after the first period.
        name: in a word or three.
        sentence: for whoever watches.
        provoke: lines to the simulated plant, in order.
        ask: words of a request to the gateway, empty for none.
        disturbs: sections that may miss periods because of it.
        until_s: up to when such misses are its doing.
    """

    at_s: float
    name: str
    sentence: str
    provoke: tuple[str, ...] = ()
    ask: str = ""
    disturbs: frozenset[str] = field(default_factory=frozenset)
    until_s: float = 0.0


@dataclass(frozen=True)
class Times:
    """When what happens, seconds after the first period."""

    retarget: float
    consumer: float
    freeze: float
    mend: float
    rearm: float
    slow: float
    end: float

    @classmethod
    def of(cls, plant: Plant) -> Self:
        """Times of a plant: every step has room for what it shows."""
        stretch, period_s, hold = max(1.0, plant.period_s / USUAL_PERIOD_S), plant.period_s, plant.hold
        freeze = 30.0 * stretch
        mend = freeze + max(9.0 * stretch, (NOTICE_PERIODS + hold.blind_after + hold.latch_after) * period_s)
        rearm = mend + max(7.0 * stretch, (SEE_AGAIN_PERIODS + hold.clear_for) * period_s)
        slow = rearm + 5.0 * stretch
        return cls(12.0 * stretch, 20.0 * stretch, freeze, mend, rearm, slow, slow + 9.0 * stretch)


def story_of(plant: Plant, *, quiet: bool = False) -> tuple[Step, ...]:
    """The steps for a plant, in order; `quiet` leaves consumers to their own profiles and nothing breaks."""
    times = Times.of(plant)
    first = [_settle(plant, quiet=quiet), *_retarget(plant, times)]
    if quiet:
        return tuple(first)
    return tuple(
        chain(first, _consumer(plant, times), _freeze(plant, times), _slow(plant, times), _release(plant, times))
    )


def excused(steps: Sequence[Step], section: str, at_s: float) -> bool:
    """Whether a miss of a section at this time is the story's doing."""
    return any(section in step.disturbs and step.at_s <= at_s <= step.until_s for step in steps)


def _settle(plant: Plant, *, quiet: bool) -> Step:
    shut = () if quiet else tuple(f"set {one.tag} {one.profile.low:g}" for one in _consumers(plant) if one.profile)
    sections = "section" if len(plant.sections) == 1 else "sections"
    return Step(
        0.0,
        "settle",
        f"The plant starts off its targets; {len(plant.sections)} {sections} settle, each with its own controller.",
        provoke=shut,
    )


def _retarget(plant: Plant, times: Times) -> list[Step]:
    """The second section that has a target gets another one."""
    aimed = [signal for signal in plant.signals(Role.MEASURED) if signal.target is not None]
    if not aimed:
        return []
    signal = aimed[min(1, len(aimed) - 1)]
    before, after = signal.target or 0.0, _other_target(signal)
    return [
        Step(
            times.retarget,
            "target change",
            f"A person moves the target of {signal.tag} from {before:g} to {after:g} {signal.unit}.",
            ask=f"target {signal.tag} {after:g}",
        )
    ]


def _other_target(signal: Signal) -> float:
    """A little up, or down where there is no room."""
    low, high = max(signal.span[0], signal.soft[0]), min(signal.span[1], signal.soft[1])
    before, move = signal.target or 0.0, RETARGET_SPANS * signal.width
    after = before + move if before + move <= high else before - move
    return float(f"{min(max(after, low), high):.6g}")


def _consumers(plant: Plant) -> list[Signal]:
    """Consumers that can be opened, those nobody measures first."""
    roles = (Role.UNMEASURED_DISTURBANCE, Role.MEASURED_DISTURBANCE)
    return [signal for role in roles for signal in plant.signals(role) if signal.profile is not None]


def _consumer(plant: Plant, times: Times) -> list[Step]:
    for signal in _consumers(plant):
        if signal.profile is not None:
            unseen = "that nobody measures" if signal.role is Role.UNMEASURED_DISTURBANCE else "that is measured"
            return [
                Step(
                    times.consumer,
                    "consumer opens",
                    f"{signal.section}'s {signal.name} opens: {signal.profile.high:g} {signal.unit} {unseen}.",
                    provoke=(f"set {signal.tag} {signal.profile.high:g}",),
                )
            ]
    return []


def _freeze(plant: Plant, times: Times) -> list[Step]:
    """The transmitter of the section after the consumer's freezes, is mended, and a person rearms the section."""
    signal = _transmitter(plant)
    if signal is None:
        return []
    section = signal.section
    return [
        Step(
            times.freeze,
            "transmitter freezes",
            f"{section}'s transmitter freezes, and still says all is well. {section} must freeze, then hold; its "
            "neighbours plan around it.",
            provoke=(f"freeze {signal.tag}",),
            disturbs=frozenset({section}),
            until_s=times.rearm,
        ),
        Step(
            times.mend,
            "transmitter mended",
            f"Somebody mends {section}'s transmitter. {section} keeps holding: only a person ends a hold.",
            provoke=(f"clear {signal.tag}",),
        ),
        Step(
            times.rearm,
            "rearm",
            f"The operator has looked at {section} and rearms it.",
            ask=f"rearm {section}",
        ),
    ]


def _transmitter(plant: Plant) -> Signal | None:
    """A measured signal of the section after the first consumer's, of the middle one without any consumer."""
    consumers = _consumers(plant)
    names = [section.name for section in plant.sections]
    start = names.index(consumers[0].section) + 1 if consumers else len(names) // 2
    turned: list[SectionSpec] = [*plant.sections[start:], *plant.sections[:start]]
    for section in turned:
        for signal in section.signals_of(Role.MEASURED):
            return signal
    return None


def _slow(plant: Plant, times: Times) -> list[Step]:
    count = min(LONGEST_SLOW, plant.hold.latch_after - 1)
    if count < 1:
        return []
    words = {1: "one synthesis is too slow", 2: "two syntheses in a row are too slow"}
    what = words.get(count, "three syntheses in a row are too slow")
    return [
        Step(
            times.slow,
            "slow synthesis",
            f"Rehearsed: {what}. Late results are thrown away, everybody freezes, then drives on.",
            ask=f"rehearse slow {count}",
            disturbs=frozenset(section.name for section in plant.sections),
            until_s=times.slow + (count + 4) * plant.period_s,
        )
    ]


def _release(plant: Plant, times: Times) -> list[Step]:
    held = tuple(f"release {signal.tag}" for signal in _consumers(plant))
    if not held:
        return []
    sentence = "From here on the consumers open and shut as their profiles have it."
    return [Step(times.end, "consumers released", sentence, provoke=held)]
