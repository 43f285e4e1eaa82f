"""Records for the journal's tests: two tanks, one panel signal, numbers that tell where they came from."""

from __future__ import annotations

from math import nan

import msgspec

from gateway.hold import State
from gateway.journal import (
    Event,
    Layout,
    Outcome,
    PeriodRecord,
    RunStart,
    SectionLayout,
    SectionRow,
    SignalRow,
    Timing,
)
from gateway.signals import Quality
from gateway.verdict import Verdict

WALL_NS = 1_735_786_800_000_000_000
"""2025-01-02 03:00:00 UTC."""

LAYOUT = Layout(
    sections=(
        SectionLayout("tank-1", measured=("level",), driven=("pump",), estimated=("level", "pump_flow", "consumer")),
        SectionLayout("tank-2", measured=("level", "consumer"), driven=("pump",), estimated=("level", "pump_flow")),
    ),
    panel=("permit",),
)


def wall_ns() -> int:
    """A wall clock that stands still."""
    return WALL_NS


def run(id_: str = "20250102-030000-test") -> RunStart:
    """A run of the two tanks."""
    return RunStart(
        id=id_,
        started_ns=WALL_NS,
        plant="Two Tanks",
        fingerprint="ab" * 32,
        versions={"lengthsman": "0.1.0", "python": "3.11"},
        host="bench-host",
        site="bench",
        layout=LAYOUT,
        canonical=b'{"name": "Two Tanks"}',
    )


def reading(value: float | str | None, quality: Quality = Quality.GOOD) -> SignalRow:
    """A reading with both timestamps."""
    return SignalRow(value, 0 if quality is Quality.GOOD else 0x80000000, WALL_NS, WALL_NS + 1, quality)


def period(k: int) -> PeriodRecord:
    """Period k: tank-1 drives, tank-2 is frozen with a dropped-out transmitter."""
    return PeriodRecord(
        k=k,
        due_ns=WALL_NS + k * 500_000_000,
        timing=Timing(120, 800, 90, 2100, 900, 4200),
        iterations=17,
        worst_residual_spans=1.5e-3,
        slack_us=441_000,
        sections=(
            SectionRow(
                State.DRIVING, Verdict.ON_TIME, (reading(20.25 + k),), (0.2025, 3.4e-5, 1e-7), (48.5,), (48.25,)
            ),
            SectionRow(
                State.FROZEN,
                Verdict.BLIND,
                (reading(None, Quality.MISSING), reading(0.1)),
                (0.2, 3.3e-5),
                (50.0,),
                (49.0,),
            ),
        ),
        panel=(SignalRow(True, 0, None, WALL_NS, Quality.GOOD),),
    )


def large_period(k: int) -> PeriodRecord:
    """A period too large for the room that is left on any page, so that it needs pages of its own."""
    return msgspec.structs.replace(period(k), panel=(reading("x" * 9000),))


def unrecordable_period(k: int) -> PeriodRecord:
    """A period no disk would take: an object where a number belongs."""
    row = SectionRow(State.DRIVING, Verdict.ON_TIME, (), (object(),), (nan,), ())  # type: ignore[arg-type]
    return PeriodRecord(
        k=k,
        due_ns=WALL_NS,
        timing=Timing(0),
        iterations=None,
        worst_residual_spans=None,
        slack_us=None,
        sections=(row, row),
    )


def event(number: int, k: int | None = None) -> Event:
    """An event that can be told from others by its number."""
    return Event(
        wall_ns=WALL_NS + number,
        kind="transition",
        sentence=f"Event {number}.",
        k=k,
        section="tank-2",
        detail={"number": number, "before": "driving", "slack_ms": 441.0},
    )


def outcome(number: int) -> Outcome:
    """The answer to one request."""
    return Outcome(
        wall_ns=WALL_NS + 5,
        request=number,
        asked_ns=WALL_NS,
        who="mira@bench-host",
        words="hold tank-2",
        state="applied",
        k=7,
    )
