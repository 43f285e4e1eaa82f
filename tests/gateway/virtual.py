"""Tarn Row in virtual time: plant, panel, link and period in one process; nothing waits, all that goes out is noted.

`Rig` is one run of the period on one plant. `Tap` is its link: it notes every request and can spoil readings and
answers. What a test wants to know of the plant itself it asks `rig.plant`, which no gateway can.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from controllers.arrays import Floats
from gateway.authority import Authority, at_start
from gateway.clock import NS, Schedule, VirtualClock
from gateway.design import PlantDesign
from gateway.hold import State
from gateway.links.direct import DirectLink
from gateway.links.protocol import Gathered, LinkStatistics, WriteOutcome
from gateway.orders import Answer, apply_requests, settle
from gateway.period import Happened, Period
from gateway.plantfile.plant import HoldSpec, SafeHold, SiteKind
from gateway.requests import Asked, parse_request
from gateway.service import LEAD_NS, first_standing
from gateway.signals import Quality, Reading, Tag
from gateway.simulated import simulated_plant
from gateway.standing import Standing
from gateway.tags import tags_of
from gateway.verdict import Verdict
from gateway.worker import InlineWorker, Worker
from sim_plant.direct import DirectPlant

TARN_ROW = Path(__file__).parents[2] / "deploy" / "tarn-row.toml"

Value = float | int | bool


@dataclass(frozen=True)
class Sent:
    """One request as it went out, what the panel told the actuators just before it, and what was answered."""

    values: tuple[tuple[str, Value], ...]
    told: Mapping[str, float]
    outcomes: Mapping[str, WriteOutcome]

    @property
    def names(self) -> list[str]:
        """Tags in their order."""
        return [name for name, _ in self.values]

    @property
    def inputs(self) -> dict[str, float]:
        """Inputs among them: all but the panel's own tags and the in-charge bits."""
        return {
            name: value
            for name, value in self.values
            if isinstance(value, float) and not name.startswith("panel.") and not name.endswith(".in_charge")
        }

    @property
    def bits(self) -> dict[str, bool]:
        """In-charge bits among them, by section."""
        return {
            name.removesuffix(".in_charge"): bool(value) for name, value in self.values if name.endswith(".in_charge")
        }

    def counter(self, name: str) -> int:
        """One of the counters control writes to the panel."""
        value = dict(self.values)[f"panel.{name}"]
        assert isinstance(value, int)
        return value


class Tap:
    """A direct link with somebody listening.

    Attributes:
        sent: requests so far.
        shows: readings shown instead of the plant's, by tag; None hides the tag.
        refuses: tags the peer answers with a bad status, without handing them on.
        takes_ns: virtual time a gathering takes.
    """

    def __init__(self, plant: DirectPlant, tags: Sequence[Tag], clock: VirtualClock) -> None:
        self.direct = DirectLink(plant, tags)
        self._plant = plant
        self._clock = clock
        self.sent: list[Sent] = []
        self.shows: dict[str, Reading | None] = {}
        self.refuses: set[str] = set()
        self.takes_ns = 0

    async def open(self, timeout_s: float) -> None:
        """Pass on."""
        await self.direct.open(timeout_s)

    async def gather(self, due_ns: int) -> Gathered:
        """Pass on, then spoil what was asked for."""
        self._clock.spend(self.takes_ns)
        gathered = await self.direct.gather(due_ns)
        if self.direct.cut or not self.shows:
            return gathered
        readings = {**gathered.readings, **self.shows}
        return replace(gathered, readings={tag: one for tag, one in readings.items() if one is not None})

    async def write(self, values: Sequence[tuple[Tag, Value]], due_ns: int) -> Mapping[str, WriteOutcome]:
        """Note, then pass on."""
        told = told_by(self._plant)
        passed = [(tag, value) for tag, value in values if tag.name not in self.refuses]
        rejected = {tag.name: WriteOutcome.REJECTED for tag, _ in values if tag.name in self.refuses}
        outcomes = {**await self.direct.write(passed, due_ns), **rejected}
        self.sent.append(Sent(tuple((tag.name, value) for tag, value in values), told, outcomes))
        return outcomes

    async def close(self) -> None:
        """Pass on."""
        await self.direct.close()

    def statistics(self) -> LinkStatistics:
        """Pass on."""
        return self.direct.statistics()


def told_by(plant: DirectPlant) -> dict[str, float]:
    """What the panel tells every actuator now, whatever control believes."""
    return {tag: float(one.value) for tag, one in plant.read_all().items() if isinstance(one.value, float)}


def new_plant(design: PlantDesign, clock: VirtualClock) -> DirectPlant:
    """The plant file's twin, at rest at its targets, all consumers shut."""
    plant = DirectPlant(simulated_plant(design.plant), clock)
    for tag in ("tank-3.consumer", "tank-5.consumer", "tank-6.consumer"):
        plant.provoke(f"set {tag} 0")
    return plant


def with_hold(design: PlantDesign, hold: HoldSpec) -> PlantDesign:
    """The same design with other numbers in its hold table."""
    return replace(design, plant=replace(design.plant, hold=hold))


def with_safe_hold(design: PlantDesign, action: SafeHold) -> PlantDesign:
    """The same design with this safe hold on every input."""
    return replace(design, inputs=tuple(replace(signal, safe_hold=action) for signal in design.inputs))


class Rig:
    """One run of the period in virtual time.

    Args:
        design: of the plant.
        authority: full or observe.
        ended_cleanly: how the run before it ended.
        site: kind of site.
        worker: inline unless given.
        on: a rig whose plant and clock are taken over, as a restarted process finds them.
        seed: of the clock's origin.
    """

    def __init__(
        self,
        design: PlantDesign,
        *,
        authority: Authority = Authority.FULL,
        ended_cleanly: bool = True,
        site: SiteKind = SiteKind.BENCH,
        worker: Worker | None = None,
        on: Rig | None = None,
        seed: int = 3,
    ) -> None:
        self.design = design
        self.site = site
        self.clock: VirtualClock = VirtualClock(seed) if on is None else on.clock
        self.plant: DirectPlant = new_plant(design, self.clock) if on is None else on.plant
        tags = tags_of(design.plant, design.plant.sites["bench"])
        self.link = Tap(self.plant, tags, self.clock)
        self.worker = worker or InlineWorker()
        self.period = Period(design, tags, self.link, self.worker, self.clock)
        self.schedule, self.k = Schedule.aligned(self.clock, round(design.plant.period_s * NS), LEAD_NS)
        self.standing: Standing = first_standing(design, at_start(authority), self.k, ended_cleanly=ended_cleanly)
        self.history: list[Happened] = []
        self.answers: list[Answer] = []
        self.names = [section.name for section in design.plant.sections]
        self._asked: list[Asked] = []

    def ask(self, words: str) -> None:
        """Ask something at the start of the next period."""
        number = len(self.answers) + len(self._asked) + 1
        request = parse_request(words, self.design.plant)
        self._asked.append(Asked(number, self.clock.wall_ns(), "mira@bench-host", words, request))

    async def run(self, periods: int = 1) -> list[Happened]:
        """Run periods, each at its instant; returns what happened in them."""
        for _ in range(periods):
            self.clock.advance_to(max(self.schedule.due_ns(self.k), self.clock.monotonic_ns()))
            orders = apply_requests(self.design, self.site, self.standing, self._asked)
            self._asked = []
            if orders.slow_periods:
                self.worker.provoke_slow(orders.slow_periods)
            self.standing, happened = await self.period.run(
                self.k, self.schedule.due_ns(self.k), orders.standing, orders.asks
            )
            self.answers += settle(self.design.plant, orders, happened)
            self.history.append(happened)
            self.k += 1
        return self.history[-periods:]

    def skip(self, periods: int) -> None:
        """Let so many periods pass without running them."""
        self.k += periods

    def place(self, section: str) -> int:
        """Index of a section."""
        return self.names.index(section)

    def state(self, section: str) -> State:
        """State of a section after the last period."""
        return self.standing.holds[self.place(section)].state

    def states(self) -> set[State]:
        """States that occur after the last period."""
        return {hold.state for hold in self.standing.holds}

    def verdict(self, section: str) -> Verdict:
        """Verdict of a section's last period."""
        return self.history[-1].verdicts[self.place(section)]

    def verdicts(self) -> set[Verdict]:
        """Verdicts that occur in the last period."""
        return set(self.history[-1].verdicts)

    def quality(self, tag: str) -> Quality:
        """Quality of a signal in the last period."""
        return self.history[-1].admission.by_tag()[tag].quality

    def in_charge(self, section: str) -> bool:
        """Whether the panel has the section in our charge, now."""
        return self.plant.read_all()[f"{section}.in_charge"].value is True

    def told(self, section: str) -> float:
        """What the panel tells a section's pump now."""
        return told_by(self.plant)[f"{section}.pump"]

    def levels(self, last: int) -> Floats:
        """True-to-reading levels of the last periods, (last, p), as they were read."""
        tags = [signal.tag for signal in self.design.outputs]
        return np.array([[one.gathered.readings[tag].value for tag in tags] for one in self.history[-last:]], float)
