"""Which tags a site's link carries: every signal of the plant file, and the panel's own."""

from __future__ import annotations

from gateway.plantfile.plant import Plant, Role, SiteSpec
from gateway.signals import DataType, Tag

PANEL_READ = {
    "permit": DataType.BOOLEAN,
    "tripped": DataType.BOOLEAN,
    "clock": DataType.COUNTER,
    "accepted": DataType.COUNTER,
    "refusal": DataType.TEXT,
}
PANEL_WRITTEN = {"heartbeat": DataType.COUNTER, "expires": DataType.COUNTER, "period": DataType.COUNTER}
IN_CHARGE = "in_charge"


def panel_tag(name: str) -> str:
    """Name of one of the panel's own tags."""
    return f"panel.{name}"


def in_charge_tag(section: str) -> str:
    """Name of a section's in-charge bit."""
    return f"{section}.{IN_CHARGE}"


def tags_of(plant: Plant, site: SiteSpec) -> tuple[Tag, ...]:
    """All tags of a site, measured signals first; only driven signals and the panel's inputs are writable."""
    tags = [
        Tag(signal.tag, site.address_of(signal.section, signal.name), writable=role is Role.DRIVEN)
        for role in (Role.MEASURED, Role.MEASURED_DISTURBANCE, Role.DRIVEN)
        for signal in plant.signals(role)
    ]
    if plant.panel is None:
        return tuple(tags)
    tags += [
        Tag(in_charge_tag(section.name), site.address_of(section.name, IN_CHARGE), DataType.BOOLEAN, writable=True)
        for section in plant.sections
    ]
    tags += [Tag(panel_tag(name), site.panel_address_of(name), kind) for name, kind in PANEL_READ.items()]
    tags += [
        Tag(panel_tag(name), site.panel_address_of(name), kind, writable=True) for name, kind in PANEL_WRITTEN.items()
    ]
    return tuple(tags)
