"""Following a run through its journal while it is being written: what a watcher knows, and what is new.

Read-only and polled. `Followed` is everything known so far; `follow` returns the next one. Sums grow with every period;
of the periods themselves only the last `TAIL` are kept.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path

from gateway.journal import Event, JournalReader, Outcome, PeriodRecord, RunRecord, StorageMissingError

TAIL = 120
"""Periods kept for the strip of work."""


@dataclass(frozen=True)
class Followed:
    """What is known of a run so far.

    Attributes:
        run: the run; None until it is in the journal.
        periods: the last periods, oldest first.
        first_ns: due instant of the first period, Unix nanoseconds.
        count: periods so far.
        misses: section-periods missed, per section.
        events: what was told since the last look.
        outcomes: requests answered since the last look.
        targets: targets that people changed, by tag.
        event_seq, outcome_seq: where to go on reading.
    """

    run: RunRecord | None = None
    periods: tuple[PeriodRecord, ...] = ()
    first_ns: int | None = None
    count: int = 0
    misses: tuple[int, ...] = ()
    events: tuple[Event, ...] = ()
    outcomes: tuple[Outcome, ...] = ()
    targets: Mapping[str, float] = field(default_factory=dict)
    event_seq: int = 0
    outcome_seq: int = 0

    @property
    def last(self) -> PeriodRecord | None:
        """The newest period."""
        return self.periods[-1] if self.periods else None

    def since_start_s(self, wall_ns: int) -> float:
        """Seconds from the first period to an instant; zero before the first period."""
        return 0.0 if self.first_ns is None else max(0.0, (wall_ns - self.first_ns) / 1e9)


def open_when_there(path: Path) -> JournalReader | None:
    """Open a journal; None while its writer has not made it yet."""
    try:
        return JournalReader(path)
    except StorageMissingError:
        return None


def follow(reader: JournalReader, before: Followed) -> Followed:
    """Read what was committed since the last look, of the newest run.

    Raises:
        StorageDamagedError: the journal cannot be read.
    """
    runs = reader.runs()
    if not runs:
        return before
    if before.run is None or before.run.id != runs[-1].id:
        before = Followed(misses=(0,) * len(runs[-1].layout.sections))
    run = runs[-1]
    span = reader.span(run.id)
    fresh: tuple[PeriodRecord, ...] = ()
    if span is not None:
        start = span[0] if before.last is None else before.last.k + 1
        fresh = tuple(reader.periods(run.id, start, span[1] + 1))
    events = reader.events(run.id, before.event_seq)
    outcomes = reader.outcomes(run.id, before.outcome_seq)
    misses = list(before.misses)
    for period in fresh:
        for i, section in enumerate(period.sections):
            misses[i] += section.verdict.is_miss
    return replace(
        before,
        run=run,
        periods=(*before.periods, *fresh)[-TAIL:],
        first_ns=fresh[0].due_ns if before.first_ns is None and fresh else before.first_ns,
        count=before.count + len(fresh),
        misses=tuple(misses),
        events=events,
        outcomes=outcomes,
        targets=targets_after(before.targets, outcomes),
        event_seq=events[-1].seq if events else before.event_seq,
        outcome_seq=outcomes[-1].seq if outcomes else before.outcome_seq,
    )


def targets_after(before: Mapping[str, float], outcomes: tuple[Outcome, ...]) -> Mapping[str, float]:
    """Targets after these requests were answered: `target TAG VALUE` where it was applied."""
    after = dict(before)
    for outcome in outcomes:
        words = outcome.words.split()
        if outcome.state == "applied" and len(words) >= 3 and words[0] == "target":
            after[words[1]] = float(words[2])
    return after
