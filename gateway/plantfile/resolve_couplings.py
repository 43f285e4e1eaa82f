"""`[[couplings]]` to resolved couplings: rows unrolled into neighbours, both ends known, parameters in SI."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise

from gateway.plantfile.catalogue import Catalogue
from gateway.plantfile.lines import Place
from gateway.plantfile.mistakes import Ledger, nearest
from gateway.plantfile.plant import CouplingSpec
from gateway.plantfile.resolve_parameters import find_misspelled, read_parameters
from gateway.plantfile.tables import CouplingsTable, Document
from gateway.plantfile.written import WrittenParameters


def read_couplings(
    document: Document, sections: Sequence[str], catalogue: Catalogue, ledger: Ledger
) -> tuple[CouplingSpec, ...]:
    """Return all couplings in file order, along a row from its first section to its last."""
    names_are_known = not any(ledger.spoiled(("sections", at, "names")) for at in range(len(document.sections or [])))
    couplings: list[CouplingSpec] = []
    for index, table in enumerate(document.couplings):
        place: Place = ("couplings", index)
        physics = catalogue.couplings.get(table.kind or "")
        parameters = WrittenParameters.of(table, place)
        if table.kind is None:
            find_misspelled("kind", parameters, ledger)
        elif physics is None:
            allowed = f"a coupling: {', '.join(catalogue.couplings)}"
            ledger.add((*place, "kind"), table.kind, allowed, nearest(table.kind, catalogue.couplings))
        values = read_parameters(parameters, physics, ledger) if physics else {}
        pairs = _pairs(table, place, sections if names_are_known else None, ledger)
        if physics is None:
            continue
        couplings.extend(CouplingSpec(one, other, physics.name, dict(values)) for one, other in pairs)
    return tuple(couplings)


def _pairs(
    table: CouplingsTable, place: Place, sections: Sequence[str] | None, ledger: Ledger
) -> list[tuple[str, str]]:
    """Return who is coupled with whom; `sections` is None when their names could not all be read."""
    if table.along is not None and table.between is not None:
        ledger.add((*place, "between"), list(table.between), "either along or between, not both")
    key = "between" if table.along is None else "along"
    names: tuple[str, ...] | None = table.between if table.along is None else table.along
    here = (*place, key)
    if names is None:
        if not ledger.spoiled((*place, "along")) and not ledger.spoiled((*place, "between")):
            ledger.add_missing((*place, "along"), 'along = "tank-{1..8}" or between = ["tank-1", "tank-5"]')
        return []
    if len(names) < 2:
        ledger.add(here, names[0], "two sections or more")
        return []
    if sections is not None:
        _check_known(names, here, sections, ledger)
    pairs = list(pairwise(names))
    for one, other in pairs:
        if one == other:
            ledger.add(here, [one, other], "two different sections; nothing is coupled to itself")
    return pairs


def _check_known(names: Sequence[str], place: Place, sections: Sequence[str], ledger: Ledger) -> None:
    known = set(sections)
    unknown = [name for name in names if name not in known]
    for name in unknown[:3]:
        ledger.add(place, name, "a section of this file", nearest(name, sections))
    if len(unknown) > 3:
        ledger.add(place, f"{len(unknown) - 3} more names", "sections of this file")
