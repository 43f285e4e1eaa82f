"""What one period hands to the next: replaced whole, never edited, so that nothing is ever half applied."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from controllers import Estimate, Iterate
from controllers.arrays import Bools, Floats
from gateway.admit import AdmitMemory
from gateway.authority import AuthorityState
from gateway.hold import SectionHold


@dataclass(frozen=True)
class Standing:
    """State of the whole gateway between two periods.

    Attributes:
        holds: per section.
        authority: of the whole gateway.
        targets: measured signal's tag -> target, engineering units.
        admission: what the judging of readings remembers.
        blind: names of the sections whose estimate was not trusted.
        estimate: of the last period, None before the first.
        iterate: of the last period's solve, None when it did not come in time.
        last: per input (m,), what it was told last, engineering units; NaN while nobody knows: before it was ever read,
            and after a write that was not answered until it is read back.
        acting: per input (m,), what it is taken to do for the estimate's sake: the last that was known of it.
        known: measured disturbances of the last period (r,), scaled.
        charge_expected: per section (N,), whether the panel should show it in our charge.
        sent: counter of the last set sent and who had values in it, None when none is open.
        heartbeat: last heartbeat written.
    """

    holds: tuple[SectionHold, ...]
    authority: AuthorityState
    targets: Mapping[str, float]
    admission: AdmitMemory
    blind: frozenset[str]
    estimate: Estimate | None
    iterate: Iterate | None
    last: Floats
    acting: Floats
    known: Floats
    charge_expected: Bools
    sent: SentSet | None
    heartbeat: int


@dataclass(frozen=True)
class SentSet:
    """One set of inputs that went out.

    Attributes:
        k: its counter.
        sections: per section (N,), whether it had values in it.
        refused: per section (N,), whether these were answered, and not taken.
    """

    k: int
    sections: Bools
    refused: Bools
