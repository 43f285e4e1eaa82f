"""What one section's period was worth: one word per section and period (runtime, section 3).

Several things can go wrong in one period. The verdict is then the cause nearest to the start of the pipeline, because
what comes after it is a consequence: a severed link explains a blind section, a blind section explains anything else.
"""

from __future__ import annotations

from collections.abc import Iterable
from enum import StrEnum


class Verdict(StrEnum):
    """What one section's period was worth."""

    ON_TIME = "on_time"
    LATE = "late"
    UNCONVERGED = "unconverged"
    BLIND = "blind"
    REFUSED = "refused"
    UNWRITTEN = "unwritten"
    BARRED = "barred"
    SEVERED = "severed"

    @property
    def is_miss(self) -> bool:
        """Whether the period counts against the section."""
        return self is not Verdict.ON_TIME

    @property
    def sentence(self) -> str:
        """One sentence for a person who reads it at night."""
        return _SENTENCES[self]


_SENTENCES = {
    Verdict.ON_TIME: "The inputs were ready, checked and acknowledged in time.",
    Verdict.LATE: "The inputs were not ready at the cut-off and were thrown away.",
    Verdict.UNCONVERGED: "The synthesis did not agree with itself within tolerance; its inputs were thrown away.",
    Verdict.BLIND: "Too many periods without a usable measurement; the estimate is no longer trusted.",
    Verdict.REFUSED: "The last check before the wire refused the inputs; they were not written.",
    Verdict.UNWRITTEN: "The write failed or was not acknowledged; what the plant has is unknown until it is read back.",
    Verdict.BARRED: "The panel's permit is off, or its server is not running.",
    Verdict.SEVERED: "The link to this section, or to a neighbour it depends on, is gone.",
}

CAUSE_ORDER = (
    Verdict.SEVERED,
    Verdict.BARRED,
    Verdict.BLIND,
    Verdict.LATE,
    Verdict.UNCONVERGED,
    Verdict.REFUSED,
    Verdict.UNWRITTEN,
    Verdict.ON_TIME,
)
"""Which verdict stands when several apply: the first in this list."""


def first_cause(found: Iterable[Verdict]) -> Verdict:
    """Return the one verdict of a period in which all of these apply; `on_time` when none does."""
    return min(found, key=CAUSE_ORDER.index, default=Verdict.ON_TIME)
