"""Three tanks in a row with a consumer, and journals of invented runs of them whose numbers are known."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace
from pathlib import Path

from gateway.hold import State
from gateway.journal import (
    Event,
    Journal,
    Layout,
    Outcome,
    PeriodRecord,
    RunEnd,
    RunStart,
    SectionRow,
    SignalRow,
    Timing,
)
from gateway.plantfile.plant import Plant, Profile, Role, Scale, SectionSpec, Signal
from gateway.signals import Quality
from gateway.verdict import Verdict
from tests.gateway.plants import row_of_tanks

WALL_NS = 1_735_786_800_000_000_000
"""2025-01-02 03:00:00 UTC."""

RUN = "20250102-030000-test"
FIRST_K = 100


def row_plant(count: int = 3) -> Plant:
    """Tanks with a target of 20 cm in a soft band; the second has a measured consumer, the first an unmeasured one."""
    plant = row_of_tanks(count)
    return replace(plant, sections=tuple(_with_target(section) for section in plant.sections))


def _with_target(section: SectionSpec) -> SectionSpec:
    signals = [_aimed(signal) for signal in section.signals]
    if section.name == "tank-1":
        signals.append(
            Signal(
                section.name,
                "consumer",
                Role.UNMEASURED_DISTURBANCE,
                "cm^3/s",
                Scale(1e-6),
                (0.0, 20.0),
                profile=Profile(0.0, 8.0, 90.0, 45.0),
            )
        )
    return replace(section, signals=tuple(signals))


def _aimed(signal: Signal) -> Signal:
    if signal.role is Role.MEASURED:
        return replace(signal, target=20.0, price=1.0, soft=(4.0, 36.0), soft_price=5.0)
    if signal.role is Role.MEASURED_DISTURBANCE:
        return replace(signal, profile=Profile(0.0, 6.0, 60.0, 60.0))
    return signal


def reading(value: float | None, quality: Quality = Quality.GOOD) -> SignalRow:
    """A reading of a quality."""
    return SignalRow(value, 0, WALL_NS, WALL_NS, quality)


def section_row(
    value: float | None,
    *,
    state: State = State.DRIVING,
    verdict: Verdict = Verdict.ON_TIME,
    written: float = 48.0,
    quality: Quality = Quality.GOOD,
    more: Sequence[SignalRow] = (),
) -> SectionRow:
    """One tank's period."""
    return SectionRow(state, verdict, (reading(value, quality), *more), (), (written,), (written,))


def tanks(*rows: SectionRow) -> tuple[SectionRow, ...]:
    """Rows of three tanks; the second one's consumer is added where it is missing."""
    return tuple(
        row if i != 1 or len(row.measured) == 2 else replace_measured(row, (*row.measured, reading(0.0)))
        for i, row in enumerate(rows)
    )


def replace_measured(row: SectionRow, measured: tuple[SignalRow, ...]) -> SectionRow:
    """The same row with other readings."""
    return SectionRow(row.state, row.verdict, measured, row.estimates, row.wanted, row.written)


def period(
    number: int, sections: Sequence[SectionRow], *, total_us: int | None = 9000, slack_us: int | None = 440_000
) -> PeriodRecord:
    """Period `number` of the run, counted from zero."""
    k = FIRST_K + number
    return PeriodRecord(
        k=k,
        due_ns=WALL_NS + number * 500_000_000,
        timing=Timing(100, 800, 90, 2100, 900, total_us),
        iterations=10,
        worst_residual_spans=1e-3,
        slack_us=slack_us,
        sections=tuple(sections),
    )


def quiet_period(number: int, level_cm: float = 20.0) -> PeriodRecord:
    """A period in which all three tanks drive at one level."""
    return period(number, tanks(*(section_row(level_cm) for _ in range(3))))


def transition(
    at_s: float,
    section: str,
    before: State,
    after: State,
    *,
    cause: str = "late",
    misses: int = 1,
    k: int | None = None,
) -> Event:
    """The event of a section that changed its state."""
    waits = " It waits for a rearm." if after is State.HOLDING else ""
    return Event(
        wall_ns=WALL_NS + round(at_s * 1e9),
        kind="transition",
        sentence=f"{section} goes from {before} to {after}: {cause}. Because.{waits}",
        k=FIRST_K + round(at_s / 0.5) if k is None else k,
        section=section,
        detail={"before": before, "after": after, "cause": cause, "misses": misses},
    )


def applied(words: str, k: int, state: str = "applied") -> Outcome:
    """The answer to a request."""
    return Outcome(wall_ns=WALL_NS, request=1, asked_ns=WALL_NS, who="mira@host", words=words, state=state, k=k)


def write_journal(
    path: Path,
    plant: Plant,
    periods: Sequence[PeriodRecord],
    *,
    events: Sequence[Event] = (),
    outcomes: Sequence[Outcome] = (),
    how: RunEnd | None = RunEnd.COMPLETED,
    while_open: Callable[[], None] = lambda: None,
) -> Path:
    """Write a run into a journal; `how` None leaves it open until `while_open` has been called."""
    start = RunStart(
        id=RUN,
        started_ns=WALL_NS,
        plant=plant.name,
        fingerprint="ab" * 8,
        versions={},
        host="host",
        site="bench",
        layout=Layout.of(plant),
        canonical=b"{}",
    )
    journal = Journal.open(path, start, alarm=lambda _: None, wall_ns=lambda: WALL_NS)
    for record in periods:
        journal.put_period(record)
    for event in events:
        journal.put_event(event)
    for outcome in outcomes:
        journal.put_outcome(outcome)
    assert journal.flush(30.0), "the journal of the test could not be written"
    while_open()
    journal.close(WALL_NS, how or RunEnd.COMPLETED)
    return path
