"""The simulated plant in this process: the same tags as over any wire, moved by an injected clock.

Nothing runs in the background. Whoever reads or writes first brings the plant up to the clock's instant, scan by scan,
so that a virtual clock makes virtual hours cheap and a late caller finds exactly the plant a punctual one would have.
The servers put this object on a wire.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import NamedTuple, Protocol

from sim_plant.faults import parse
from sim_plant.notes import Note, of_plant
from sim_plant.panel import Outcome
from sim_plant.simulation import NS, Sample, Simulation
from sim_plant.spec import SimulatedPlantSpec
from sim_plant.status import OF_OUTCOME
from sim_plant.tags import Tag, tags_of


class Clock(Protocol):
    """The time a plant is given; the gateway's clocks fit."""

    def monotonic_ns(self) -> int:
        """Nanoseconds that never step."""

    def wall_ns(self) -> int:
        """Unix nanoseconds, for labels only."""

    async def sleep_until(self, instant_ns: int) -> None:
        """Return at or just after this monotonic instant."""


class TagValue(NamedTuple):
    """What a reader gets: value (None when there is none), status code, Unix nanoseconds of the sample."""

    value: float | int | bool | str | None
    status: int
    source_time_ns: int


class DirectPlant:
    """A running plant; its time zero is the instant it is built.

    Args:
        spec: what to simulate.
        clock: the injected clock.
        longest_gap_s: a gap between two calls that is longer than this is not integrated; the physics stand still for
            it while panel and faults see the time go by. For real time, where a process may be stopped for hours.
    """

    def __init__(self, spec: SimulatedPlantSpec, clock: Clock, *, longest_gap_s: float | None = None) -> None:
        self.spec = spec
        self.tags: tuple[Tag, ...] = tags_of(spec)
        self._simulation = Simulation(spec)
        self._state = self._simulation.start()
        self._clock = clock
        self._origin_ns = clock.monotonic_ns()
        self._longest_gap_ns = None if longest_gap_s is None else round(longest_gap_s * NS)

    def next_scan_ns(self) -> int:
        """Monotonic instant of the next scan: origin + n Δt, so that lateness never adds up."""
        return self._origin_ns + self._simulation.time_ns(self._state) + self._simulation.step_ns

    def catch_up(self) -> int:
        """Do every scan that is due; returns how many were done."""
        behind = (self._now_ns() - self._simulation.time_ns(self._state)) // self._simulation.step_ns
        gap_ns = behind * self._simulation.step_ns
        if self._longest_gap_ns is not None and gap_ns > self._longest_gap_ns and behind > 1:
            gap_s = gap_ns / NS
            of_plant(f"nobody moved the plant for {gap_s:.1f} s: its physics stood still meanwhile").log()
            self._state, behind = self._simulation.skip(self._state, behind - 1), 1
        for _ in range(behind):
            self._state, notes = self._simulation.step(self._state)
            _log(notes)
        return behind

    def read_all(self) -> Mapping[str, TagValue]:
        """Every tag, now."""
        self.catch_up()
        now_ns = self._now_ns()
        wall_ns = self._clock.wall_ns()
        samples = self._simulation.read(self._state, now_ns)
        return {tag: _dated(sample, wall_ns - now_ns) for tag, sample in samples.items()}

    def write(self, values: Sequence[tuple[str, object]]) -> tuple[int, ...]:
        """Hand one request to the panel, in the order of the list; returns a status code for each value."""
        return tuple(OF_OUTCOME[outcome] for outcome in self.write_outcomes(values))

    def write_outcomes(self, values: Sequence[tuple[str, object]]) -> tuple[Outcome, ...]:
        """Like `write`, in the panel's own words."""
        self.catch_up()
        self._state, outcomes, notes = self._simulation.write(self._state, values, self._now_ns())
        _log(notes)
        return outcomes

    def provoke(self, line: str) -> str:
        """Take one line of `sim_plant.faults`; returns the sentence that says what it did.

        Raises:
            FaultError: the line can't be understood or doesn't fit the plant.
        """
        fault = parse(line)
        self.catch_up()
        self._state, notes = self._simulation.provoke(self._state, fault, self._now_ns())
        _log(notes)
        return notes[0].text

    def truth(self) -> Mapping[str, float]:
        """What nobody can read over a wire: true values and real positions, in signal units."""
        self.catch_up()
        return self._simulation.truth(self._state)

    def spilled_m3(self) -> Mapping[str, float]:
        """Volume lost over the rim since the start, by section."""
        self.catch_up()
        names = (name for name, _ in self.spec.sections)
        return dict(zip(names, self._state.plant.spilled_m3.tolist(), strict=True))

    def _now_ns(self) -> int:
        """Plant time."""
        return self._clock.monotonic_ns() - self._origin_ns


def _dated(sample: Sample, to_wall_ns: int) -> TagValue:
    return TagValue(sample.value, sample.status, sample.time_ns + to_wall_ns)


def _log(notes: Sequence[Note]) -> None:
    for note in notes:
        note.log()
