"""How every command ends."""

from __future__ import annotations

from enum import IntEnum


class ExitCode(IntEnum):
    """Exit codes of all commands."""

    DONE = 0
    CRITERIA_FAILED = 1
    WRONG_CALL = 2
    UNREACHABLE = 3
    HELD = 4
    OUR_FAULT = 70
