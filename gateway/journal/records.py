"""What the journal holds, as frozen data: the same objects are put in and read back.

Structures marked `array_like` are stored as MessagePack arrays in the order of their fields, so that order is part of
the schema: change it together with `schema.VERSION`.
"""

from __future__ import annotations

from collections.abc import Mapping
from datetime import UTC, datetime
from enum import StrEnum
from typing import Self

import msgspec

from gateway.hold import State
from gateway.plantfile.plant import Plant, Role
from gateway.sentences import Notice
from gateway.signals import Quality, Reading
from gateway.verdict import Verdict

Value = float | int | bool | str | None
"""A value as a peer sent it; types no signal can have are kept as their `repr`."""

MAX_TEXT = 200
"""Longest text kept of a value, in characters: a peer must not be able to fill the disk."""

_INT64 = range(-(2**63), 2**63)


def new_run_id(wall_ns: int, suffix: str) -> str:
    """Return an identifier that sorts by start and reads as one: "20250102-030405-7f3a".

    Args:
        wall_ns: start of the run, Unix nanoseconds.
        suffix: what tells apart runs that start in the same second: random on a real run, the seed on a soak.
    """
    return f"{datetime.fromtimestamp(wall_ns // 10**9, UTC):%Y%m%d-%H%M%S}-{suffix}"


class SectionLayout(msgspec.Struct, frozen=True):
    """Names of one section's numbers, in the order in which every period of the run gives them."""

    section: str
    measured: tuple[str, ...]
    driven: tuple[str, ...]
    estimated: tuple[str, ...] = ()


class Layout(msgspec.Struct, frozen=True):
    """Names of all numbers of a period record; one per run."""

    sections: tuple[SectionLayout, ...]
    panel: tuple[str, ...] = ()

    @classmethod
    def of(
        cls, plant: Plant, *, estimated: Mapping[str, tuple[str, ...]] | None = None, panel: tuple[str, ...] = ()
    ) -> Layout:
        """Layout of a plant: sections and signals in file order, measured disturbances after measured signals.

        Args:
            plant: the resolved plant file.
            estimated: section -> names of what its observer estimates; a section left out has none.
            panel: names of the panel signals recorded each period.
        """
        names = estimated or {}
        return cls(
            sections=tuple(
                SectionLayout(
                    section=section.name,
                    measured=tuple(
                        signal.name
                        for role in (Role.MEASURED, Role.MEASURED_DISTURBANCE)
                        for signal in section.signals_of(role)
                    ),
                    driven=tuple(signal.name for signal in section.signals_of(Role.DRIVEN)),
                    estimated=names.get(section.name, ()),
                )
                for section in plant.sections
            ),
            panel=panel,
        )

    def place(self, section: str) -> int:
        """Index of a section in `PeriodRecord.sections`.

        Raises:
            KeyError: the run had no section of this name.
        """
        for index, row in enumerate(self.sections):
            if row.section == section:
                return index
        raise KeyError(section)


class RunEnd(StrEnum):
    """How a run ended that ended in order; one that was killed has no end at all."""

    COMPLETED = "completed"
    """Its time was up, or its criteria were."""
    STOPPED = "stopped"
    """A person or the supervisor asked it to stop."""
    HELD = "held"
    """In order, but with sections latched on hold: no end of a run takes the place of a rearm."""
    FAILED = "failed"
    """Our fault: it shut down in order after an error."""

    @property
    def clean(self) -> bool:
        """Whether the next run may start as if nothing had happened."""
        return self not in (RunEnd.HELD, RunEnd.FAILED)


class RunStart(msgspec.Struct, frozen=True, kw_only=True):
    """What is known of a run when it starts."""

    id: str
    started_ns: int
    plant: str
    fingerprint: str
    versions: dict[str, str]
    host: str
    site: str
    layout: Layout
    canonical: bytes


class RunRecord(RunStart, frozen=True, kw_only=True):
    """One run as the journal tells it; `ended_ns` and `how` are None while it runs and when it never ended."""

    ended_ns: int | None
    how: RunEnd | None


class Timing(msgspec.Struct, frozen=True):
    """Microseconds one period spent, by phase; None for a phase that did not run.

    `start_us` is the lateness of the start against the due instant.
    """

    start_us: int
    gather_us: int | None = None
    estimate_us: int | None = None
    synthesise_us: int | None = None
    write_us: int | None = None
    total_us: int | None = None


class SignalRow(msgspec.Struct, frozen=True, array_like=True):
    """One reading as it came, and the quality it was given (fields as `gateway.signals.Reading`)."""

    value: Value
    status: int
    source_ns: int | None
    server_ns: int | None
    quality: Quality

    @classmethod
    def of(cls, reading: Reading, quality: Quality) -> Self:
        """Row of a reading, whatever the peer sent: a foreign type becomes text, long text is cut."""
        return cls(_recordable(reading.value), reading.status, reading.source_ns, reading.server_ns, quality)


class SectionRow(msgspec.Struct, frozen=True, array_like=True):
    """One section's period. Lengths as the run's layout says; NaN stands for "none".

    Attributes:
        state: state after the period.
        verdict: what the period was worth.
        measured: readings in engineering units, raw.
        estimates: states, then disturbances, SI.
        wanted: inputs the synthesis gave, engineering units.
        written: inputs that went to the plant, engineering units.
    """

    state: State
    verdict: Verdict
    measured: tuple[SignalRow, ...]
    estimates: tuple[float, ...] = ()
    wanted: tuple[float, ...] = ()
    written: tuple[float, ...] = ()


class PeriodRecord(msgspec.Struct, frozen=True, kw_only=True):
    """One period of the whole plant.

    Attributes:
        k: index of the period.
        due_ns: wall-clock label of its due instant, Unix nanoseconds.
        timing: where the time went.
        iterations: rounds of the synthesis; None when it did not run.
        worst_residual_spans: largest residual of any section; None when there is none.
        slack_us: budget left when the last write was acknowledged; None when nothing was.
        sections: one row per section of the run's layout.
        panel: one reading per panel signal of the layout.
    """

    k: int
    due_ns: int
    timing: Timing
    iterations: int | None
    worst_residual_spans: float | None
    slack_us: int | None
    sections: tuple[SectionRow, ...]
    panel: tuple[SignalRow, ...] = ()


class Event(msgspec.Struct, frozen=True, kw_only=True):
    """Something that happened. `seq` is given by the journal and grows; 0 before that."""

    wall_ns: int
    kind: str
    sentence: str
    k: int | None = None
    section: str | None = None
    detail: dict[str, object] = {}
    seq: int = 0

    @classmethod
    def of(cls, notice: Notice, wall_ns: int, k: int | None = None) -> Self:
        """Event of a notice, so that log and journal use the same words."""
        return cls(
            wall_ns=wall_ns,
            kind=str(notice.kind),
            sentence=notice.sentence,
            k=k,
            section=notice.section,
            detail=dict(notice.detail),
        )


class Outcome(msgspec.Struct, frozen=True, kw_only=True):
    """What became of one request: who asked what and when, and the answer (state "applied" or "refused")."""

    wall_ns: int
    request: int
    asked_ns: int
    who: str
    words: str
    state: str
    reason: str = ""
    k: int | None = None
    seq: int = 0


class Loss(msgspec.Struct, frozen=True, kw_only=True):
    """Records of one sort that could not be kept, told as soon as the journal could be written again.

    Attributes:
        what: "period", "event" or "outcome".
        cause: why, in a few words.
        count: how many.
        first_k, last_k: least and greatest period among them; None when they named none.
        first_ns, last_ns: least and greatest wall-clock label among them, Unix nanoseconds.
        wall_ns: when the loss was recorded; 0 before that.
    """

    what: str
    cause: str
    count: int
    first_k: int | None
    last_k: int | None
    first_ns: int
    last_ns: int
    wall_ns: int = 0
    seq: int = 0


def whole(text: str) -> str:
    """The text without half characters (surrogates, as in odd file names), which neither JSON nor SQLite takes."""
    return text.encode("utf-8", "replace").decode()


def _recordable(value: object) -> Value:
    if value is None or isinstance(value, bool):
        return value
    if isinstance(value, int):
        return int(value) if value in _INT64 else repr(value)[:MAX_TEXT]
    if isinstance(value, float):
        return float(value)
    return whole(value if isinstance(value, str) else repr(value))[:MAX_TEXT]
