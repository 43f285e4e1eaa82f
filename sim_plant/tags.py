"""Every tag a simulated plant serves, with its type: what a server needs to lay out its address space.

Unmeasured disturbances have no tag: nobody can read them.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from typing import Final

from sim_plant.spec import IN_CHARGE, PANEL, Role, SimulatedPlantSpec


class TagType(StrEnum):
    """Type of a value on any wire."""

    DOUBLE = "double"
    BOOLEAN = "boolean"
    UINT32 = "uint32"
    UINT64 = "uint64"
    STRING = "string"


@dataclass(frozen=True)
class Tag:
    """One tag; `unit` and `span` only where it is a process value.

    Attributes:
        section: the section, or `PANEL`.
        name: within the section.
        type: of its value.
        writable: whether a client may write it.
    """

    section: str
    name: str
    type: TagType
    writable: bool = False
    unit: str = ""
    span: tuple[float, float] | None = None

    @property
    def tag(self) -> str:
        """Full name."""
        return f"{self.section}.{self.name}"


PANEL_TAGS: Final = (
    Tag(PANEL, "heartbeat", TagType.UINT32, writable=True),
    Tag(PANEL, "permit", TagType.BOOLEAN),
    Tag(PANEL, "clock", TagType.UINT64),
    Tag(PANEL, "expires", TagType.UINT64, writable=True),
    Tag(PANEL, "period", TagType.UINT64, writable=True),
    Tag(PANEL, "accepted", TagType.UINT64),
    Tag(PANEL, "refusal", TagType.STRING),
    Tag(PANEL, "tripped", TagType.BOOLEAN),
    Tag(PANEL, "clamped", TagType.UINT32),
)


def tags_of(spec: SimulatedPlantSpec) -> tuple[Tag, ...]:
    """All tags: signals section by section, and with a panel each section's in-charge bit and the panel's own."""
    tags: list[Tag] = []
    for section, _ in spec.sections:
        tags += [
            Tag(section, signal.name, TagType.DOUBLE, signal.role is Role.DRIVEN, signal.unit, signal.span)
            for signal in spec.signals
            if signal.section == section and signal.role is not Role.UNMEASURED_DISTURBANCE
        ]
        if spec.has_panel:
            tags.append(Tag(section, IN_CHARGE, TagType.BOOLEAN, writable=True))
    return (*tags, *PANEL_TAGS) if spec.has_panel else tuple(tags)
