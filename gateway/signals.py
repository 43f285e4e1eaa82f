"""Signals at the edge: tags, raw readings as a link hands them over, and the quality each is given."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum


class Quality(StrEnum):
    """What one value is worth in one period."""

    GOOD = "good"
    UNCERTAIN = "uncertain"
    BAD = "bad"
    STALE = "stale"
    FROZEN = "frozen"
    OUT_OF_RANGE = "out_of_range"
    JUMPED = "jumped"
    NOT_FINITE = "not_finite"
    MISSING = "missing"

    @property
    def usable(self) -> bool:
        """Whether the estimator may use the value."""
        return self in (Quality.GOOD, Quality.UNCERTAIN)


class DataType(StrEnum):
    """Type of a value on the wire."""

    FLOAT = "float"
    BOOLEAN = "boolean"
    COUNTER = "counter"
    TEXT = "text"


@dataclass(frozen=True)
class Tag:
    """One address of one site, `name` as in logs ("tank-3.level", "panel.heartbeat", "tank-3.in_charge")."""

    name: str
    address: str
    data_type: DataType = DataType.FLOAT
    writable: bool = False


@dataclass(frozen=True, slots=True)
class Reading:
    """One value as it came: never judged, never converted.

    Attributes:
        value: whatever the peer sent, None when it sent nothing.
        status: 32-bit status code of the peer (OPC 10000-4, 7.39), 0 for good.
        source_ns: the peer's source timestamp, Unix nanoseconds, None when absent.
        server_ns: the peer's server timestamp, Unix nanoseconds, None when absent.
    """

    value: object
    status: int = 0
    source_ns: int | None = None
    server_ns: int | None = None


MISSING = Reading(value=None, status=0x80000000)
"""What stands for a value that did not arrive before the cut-off (severity bad)."""
