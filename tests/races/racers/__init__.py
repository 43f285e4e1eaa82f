"""Who takes part."""

from __future__ import annotations

from tests.races.racers import clarabel, highs, osqp, ours, piqp, scs
from tests.races.racers.protocol import Entry

OURS: Entry = ours.ENTRY
OTHERS: tuple[Entry, ...] = (osqp.ENTRY, scs.ENTRY, piqp.ENTRY, clarabel.ENTRY, highs.ENTRY)
ENTRIES: dict[str, Entry] = {entry.name: entry for entry in (OURS, *OTHERS)}
"""All of them, ours first."""
