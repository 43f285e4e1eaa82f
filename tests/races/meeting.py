"""A whole meeting: all cases one after the other, smallest first, and everything measured in them."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field
from time import perf_counter

from tests.races.calibrate import Calibrated, Patience, Retired, calibrate, verify
from tests.races.contest import Contest
from tests.races.course import Stretch, course
from tests.races.limits import RowCost, row_cost
from tests.races.published import Curve, curves
from tests.races.race import Entrant, Lap, race
from tests.races.racers.protocol import Entry, installed
from tests.races.section import Section, one_section

CALIBRATED_AT = 30
PUBLISHED_UP_TO = 30


@dataclass(frozen=True)
class Programme:
    """What is to be raced.

    Attributes:
        kinds: plants.
        sizes: N.
        horizons: T.
        accuracies: largest error of first inputs, in spans.
        most_steps: cases with N T above this are left out.
        periods: length of a course.
        repeats: how often it is run.
        alike: whether all sections of a plant are alike.
        patience: what is too slow.
        building_s: a design that would take longer to build is not built.
        published: whether the published form is timed, too.
    """

    kinds: tuple[str, ...] = ("zones", "masses")
    sizes: tuple[int, ...] = (30, 100, 300, 1000)
    horizons: tuple[int, ...] = (10,)
    accuracies: tuple[float, ...] = (1e-3,)
    most_steps: int = 10_000
    periods: int = 10
    repeats: int = 3
    alike: bool = False
    patience: Patience = field(default_factory=Patience)
    building_s: float = 120.0
    published: bool = True


@dataclass(frozen=True)
class Case:
    """One race: a plant, a horizon, an accuracy."""

    kind: str
    size: int
    horizon: int
    accuracy: float


@dataclass(frozen=True)
class Result:
    """Everything measured in one case."""

    case: Case
    laps: tuple[Lap, ...]
    setups: dict[str, str]
    memory_bytes: dict[str, int]
    retired: tuple[Retired, ...]
    building_s: float
    row_cost: RowCost | None
    section: Section | None
    curves: tuple[Curve, ...]


def hold(programme: Programme, entries: Sequence[Entry], say: Callable[[str], None]) -> Iterator[Result]:
    """Run the programme case by case."""
    absent = tuple(
        Retired(entry.name, f"{entry.package} is not installed") for entry in entries if not installed(entry)
    )
    present = [entry for entry in entries if installed(entry)]
    for kind in programme.kinds:
        for horizon in programme.horizons:
            sizes = [size for size in sorted(programme.sizes) if size * horizon <= programme.most_steps]
            if not sizes:
                continue
            small = _Small.build(kind, horizon, programme)
            for accuracy in programme.accuracies:
                calibrated = [(entry, small.calibrate(entry, accuracy, programme.patience, say)) for entry in present]
                for size in sizes:
                    case = Case(kind, size, horizon, accuracy)
                    say(f"{kind}, N = {size}, T = {horizon}, to {accuracy:g} of span")
                    yield _run(case, calibrated, absent, small, programme)


@dataclass(frozen=True)
class _Small:
    """The contest that racers are calibrated on."""

    contest: Contest
    stretches: tuple[Stretch, ...]
    building_s: float

    @classmethod
    def build(cls, kind: str, horizon: int, programme: Programme) -> _Small:
        size = min(CALIBRATED_AT, max(programme.sizes))
        contest = Contest.build(kind, size, horizon, seed=2, alike=programme.alike)
        building_s = _build(contest)
        return cls(contest, course(contest, programme.periods, seed=8), building_s)

    def calibrate(
        self, entry: Entry, accuracy: float, patience: Patience, say: Callable[[str], None]
    ) -> tuple[Calibrated, ...] | Retired:
        found = calibrate(self.contest, entry, self.stretches, accuracy, patience)
        say(f"  {entry.name}: {found.reason if isinstance(found, Retired) else found[0].setup}")
        return found


def _build(contest: Contest) -> float:
    start = perf_counter()
    _ = contest.design
    return perf_counter() - start


def _run(
    case: Case,
    calibrated: Sequence[tuple[Entry, tuple[Calibrated, ...] | Retired]],
    absent: tuple[Retired, ...],
    small: _Small,
    programme: Programme,
) -> Result:
    grown = case.size / small.contest.size
    contest = Contest.build(case.kind, case.size, case.horizon, alike=programme.alike)
    building_s = small.building_s * (1.0 if programme.alike else grown)
    built = building_s <= programme.building_s
    if built:
        building_s = _build(contest)
    stretches = course(contest, programme.periods)
    entrants: list[Entrant] = []
    retired = list(absent)
    for entry, found in calibrated:
        ready = _ready(contest, entry, found, stretches, case, grown, programme, built)
        if isinstance(ready, Retired):
            retired.append(ready)
        else:
            entrants.append(ready)
    laps = race(contest, entrants, stretches, programme.repeats) if entrants else []
    published = built and programme.published and case.size <= PUBLISHED_UP_TO
    return Result(
        case=case,
        laps=tuple(laps),
        setups={entrant.entry.name: str(entrant.setup) for entrant in entrants},
        memory_bytes={entrant.entry.name: entrant.memory_bytes for entrant in entrants},
        retired=tuple(retired),
        building_s=building_s,
        row_cost=row_cost(contest, stretches[:4], programme.repeats) if built else None,
        section=one_section(contest.design, case.size // 2) if built else None,
        curves=tuple(curves(contest, stretches[0], case.accuracy)) if published else (),
    )


def _ready(
    contest: Contest,
    entry: Entry,
    found: tuple[Calibrated, ...] | Retired,
    stretches: Sequence[Stretch],
    case: Case,
    grown: float,
    programme: Programme,
    built: bool,
) -> Entrant | Retired:
    if isinstance(found, Retired):
        return found
    if entry.package == "controllers" and not built:
        return Retired(entry.name, f"its design would take more than {programme.building_s:.0f} s to build")
    expected_s = found[0].period_s * grown
    if expected_s > programme.patience.period_s:
        return Retired(entry.name, f"would take some {expected_s:.0f} s for one period")
    return verify(contest, entry, found, stretches, case.accuracy, programme.patience)
