"""Who drives a section's actuators: the transition table.

Every (charge, cause) pair stands here; there are no others. At power-up the panel keeps every actuator at its rest
value, where the plant stands still; its local action begins with the first loss of control, and from then on only
control can end it, by taking the section.
"""

from __future__ import annotations

from enum import StrEnum
from types import MappingProxyType


class Charge(StrEnum):
    """Who drives."""

    REST = "rest"
    """The panel, at the values found at power-up: nobody has taken the section yet."""
    CONTROL = "control"
    """Control: the in-charge bit is on."""
    LOCAL = "local"
    """The panel, by its local action."""


class Cause(StrEnum):
    """What can change the charge."""

    TAKE = "take"
    """Control writes the in-charge bit on; the guards (permit, trip) are checked before."""
    HAND_BACK = "hand_back"
    """Control writes the in-charge bit off."""
    TRIP = "trip"
    """The heartbeat stood still for too long."""
    PERMIT_OFF = "permit_off"
    """The permit was withdrawn."""


TRANSITIONS = MappingProxyType(
    {
        (Charge.REST, Cause.TAKE): Charge.CONTROL,
        (Charge.REST, Cause.HAND_BACK): Charge.REST,
        (Charge.REST, Cause.TRIP): Charge.LOCAL,
        (Charge.REST, Cause.PERMIT_OFF): Charge.LOCAL,
        (Charge.CONTROL, Cause.TAKE): Charge.CONTROL,
        (Charge.CONTROL, Cause.HAND_BACK): Charge.LOCAL,
        (Charge.CONTROL, Cause.TRIP): Charge.LOCAL,
        (Charge.CONTROL, Cause.PERMIT_OFF): Charge.LOCAL,
        (Charge.LOCAL, Cause.TAKE): Charge.CONTROL,
        (Charge.LOCAL, Cause.HAND_BACK): Charge.LOCAL,
        (Charge.LOCAL, Cause.TRIP): Charge.LOCAL,
        (Charge.LOCAL, Cause.PERMIT_OFF): Charge.LOCAL,
    }
)
