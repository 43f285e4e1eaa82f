"""Status codes are those of the standard, and no refusal looks like a success."""

from __future__ import annotations

import pytest
from asyncua.ua.status_codes import StatusCodes

from sim_plant import status
from sim_plant.panel import Outcome


@pytest.mark.parametrize(
    ("code", "name"),
    [
        (status.GOOD, "Good"),
        (status.ENGINEERING_UNITS_EXCEEDED, "UncertainEngineeringUnitsExceeded"),
        (status.NO_COMMUNICATION, "BadNoCommunication"),
        (status.NODE_ID_UNKNOWN, "BadNodeIdUnknown"),
        (status.NOT_WRITABLE, "BadNotWritable"),
        (status.OUT_OF_RANGE, "BadOutOfRange"),
        (status.WRITE_NOT_SUPPORTED, "BadWriteNotSupported"),
        (status.TYPE_MISMATCH, "BadTypeMismatch"),
        (status.SEQUENCE_NUMBER_INVALID, "BadSequenceNumberInvalid"),
        (status.INVALID_TIMESTAMP, "BadInvalidTimestamp"),
        (status.INVALID_STATE, "BadInvalidState"),
    ],
)
def test_code_is_that_of_the_standard(code: int, name: str) -> None:
    """Against the library's table, generated from the OPC Foundation's list of status codes (OPC 10000-6, A.2)."""
    assert code == getattr(StatusCodes, name)


def test_every_outcome_has_a_code_and_only_taken_is_good() -> None:
    """Severity stands in the two top bits (OPC 10000-4, 7.39.1): 00 good, 01 uncertain, 10 bad."""
    assert set(status.OF_OUTCOME) == set(Outcome)
    severities = {outcome: code >> 30 for outcome, code in status.OF_OUTCOME.items()}
    assert severities.pop(Outcome.TAKEN) == 0
    assert set(severities.values()) == {2}
