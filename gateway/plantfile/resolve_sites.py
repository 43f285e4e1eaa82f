"""`[sites.NAME]` to resolved sites; no two tags of one site may lead to the same address.

A value written to another signal's address moves the wrong valve, so every address of every site is looked at before
anything starts.
"""

from __future__ import annotations

from collections.abc import Sequence

from gateway.plantfile.lines import Place
from gateway.plantfile.mistakes import Ledger, nearest
from gateway.plantfile.plant import SiteKind, SiteSpec
from gateway.plantfile.resolve_sections import written_tags
from gateway.plantfile.tables import Document, SiteTable

PANEL_SIGNALS = ("heartbeat", "permit", "clock", "expires", "period", "accepted", "refusal", "tripped")
"""Signals of the panel itself, those of `gateway.tags`."""

SECTION_BITS = ("in_charge",)
"""What the panel keeps for every section, beside the section's own signals."""

CALL_TIMEOUT_PERIODS = 0.4
"""Deadline of one call on the wire when the file gives none, in periods (practice, no source)."""


def read_sites(document: Document, ledger: Ledger) -> dict[str, SiteSpec]:
    """Return all sites by name."""
    sites: dict[str, SiteSpec] = {}
    period_s = document.plant.period if document.plant else None
    tags = _tags(document, has_panel=document.panel is not None or ledger.spoiled(("panel",)))
    for name, table in document.sites.items():
        place: Place = ("sites", name)
        _check_overrides(table, place, tags, ledger)
        if table.call_timeout is not None and period_s is not None and table.call_timeout >= period_s:
            allowed = f"below the period, {period_s:g} s"
            ledger.add((*place, "call_timeout"), f"{table.call_timeout:g} s", allowed)
        site = _site(name, table, period_s)
        if site is not None:
            _check_addresses(site, place, tags, ledger)
            sites[name] = site
    return sites


def _tags(document: Document, has_panel: bool) -> list[tuple[str, str]]:
    """Section and signal of everything that has an address; the panel's own come under "panel"."""
    tags = written_tags(document)
    if has_panel:
        names = [name for sections in document.sections or [] for name in sections.names or ()]
        tags += [(name, bit) for name in names for bit in SECTION_BITS]
        tags += [("panel", signal) for signal in PANEL_SIGNALS]
    return tags


def _site(name: str, table: SiteTable, period_s: float | None) -> SiteSpec | None:
    kind = table.kind or (SiteKind.BENCH if name == "bench" else SiteKind.LIVE)
    if table.link is None or table.endpoint is None or table.namespace is None or table.address is None:
        return None
    timeout_s = table.call_timeout or CALL_TIMEOUT_PERIODS * (period_s or 0.0)
    return SiteSpec(
        name=name,
        kind=kind,
        link=table.link,
        endpoint=table.endpoint,
        namespace=table.namespace,
        address=table.address,
        panel_address=table.panel_address or table.address.replace("{section}", "panel"),
        overrides=dict(table.overrides),
        insecure=kind is SiteKind.BENCH if table.insecure is None else table.insecure,
        call_timeout_s=timeout_s,
    )


def _check_overrides(table: SiteTable, place: Place, tags: Sequence[tuple[str, str]], ledger: Ledger) -> None:
    """Every override must name a tag there is; nobody would notice one that does nothing."""
    known = {f"{section}.{signal}" for section, signal in tags}
    for tag in table.overrides:
        if tag not in known:
            ledger.add((*place, "overrides", tag), tag, "the tag of a signal, SECTION.SIGNAL", nearest(tag, known))


def _check_addresses(site: SiteSpec, place: Place, tags: Sequence[tuple[str, str]], ledger: Ledger) -> None:
    first: dict[str, str] = {}
    for section, signal in dict.fromkeys(tags):
        is_panel = section == "panel"
        address = site.panel_address_of(signal) if is_panel else site.address_of(section, signal)
        tag = f"{section}.{signal}"
        if address in first:
            by_override = tag in site.overrides or first[address] in site.overrides
            where = (*place, "overrides" if by_override else "panel_address" if is_panel else "address")
            ledger.add(where, address, f"an address for {tag} other than that of {first[address]}")
            return
        first[address] = tag
