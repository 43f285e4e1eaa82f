"""Status codes that the simulated plant gives its values: OPC 10000-6, Annex A.2 (names and numbers of status codes).

Their meaning for automation data is that of OPC 10000-4, 7.39 and of OPC 10000-8, 6.3.
"""

from __future__ import annotations

from types import MappingProxyType
from typing import Final

from sim_plant.panel import Outcome

GOOD: Final = 0x00000000
ENGINEERING_UNITS_EXCEEDED: Final = 0x40940000
"""UncertainEngineeringUnitsExceeded: the instrument is saturated beyond its range."""
NO_COMMUNICATION: Final = 0x80310000
"""BadNoCommunication: the data source does not answer and there is no last known value."""

NODE_ID_UNKNOWN: Final = 0x80340000
NOT_WRITABLE: Final = 0x803B0000
OUT_OF_RANGE: Final = 0x803C0000
WRITE_NOT_SUPPORTED: Final = 0x80730000
TYPE_MISMATCH: Final = 0x80740000
SEQUENCE_NUMBER_INVALID: Final = 0x80880000
INVALID_TIMESTAMP: Final = 0x80230000
INVALID_STATE: Final = 0x80AF0000

OF_OUTCOME = MappingProxyType(
    {
        Outcome.TAKEN: GOOD,
        Outcome.UNKNOWN: NODE_ID_UNKNOWN,
        Outcome.READ_ONLY: NOT_WRITABLE,
        Outcome.WRONG_TYPE: TYPE_MISMATCH,
        Outcome.NOT_FINITE: OUT_OF_RANGE,
        Outcome.NO_PERMIT: INVALID_STATE,
        Outcome.TRIPPED: INVALID_STATE,
        Outcome.NOT_IN_CHARGE: INVALID_STATE,
        Outcome.UNCOMMITTED: INVALID_STATE,
        Outcome.SPOILED: INVALID_STATE,
        Outcome.NO_EXPIRY: INVALID_STATE,
        Outcome.EXPIRED: INVALID_TIMESTAMP,
        Outcome.TOO_FAR: INVALID_TIMESTAMP,
        Outcome.REPLAYED: SEQUENCE_NUMBER_INVALID,
    }
)
"""What a client is told about a written value. A value that took no effect is never answered with Good."""
