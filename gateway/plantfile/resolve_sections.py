"""`[kinds]` and `[[sections]]` to resolved sections: names unrolled, signals and parameters laid over their kind's."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

from gateway.plantfile.catalogue import Catalogue, PhysicsEntry
from gateway.plantfile.lines import Place
from gateway.plantfile.mistakes import Ledger, nearest
from gateway.plantfile.names import RESERVED, row_order
from gateway.plantfile.plant import Role, SectionSpec, Signal
from gateway.plantfile.resolve_parameters import find_misspelled, read_parameters
from gateway.plantfile.resolve_signal import read_signal
from gateway.plantfile.tables import Document, KindTable, SectionsTable, SignalTable
from gateway.plantfile.written import WrittenParameters, WrittenSignal


@dataclass(frozen=True)
class _Kind:
    """One kind, or a kind with one `[[sections]]` laid over it."""

    name: str
    physics: PhysicsEntry | None
    parameters: WrittenParameters
    signals: Mapping[str, WrittenSignal]

    def under(self, table: SectionsTable, place: Place) -> _Kind:
        signals = dict(self.signals)
        for name, over in _signals(table.signals, place).items():
            signals[name] = signals[name].under(over) if name in signals else over
        parameters = self.parameters.under(WrittenParameters.of(table, place))
        return replace(self, parameters=parameters, signals=signals)

    def resolve(self, ledger: Ledger, *, used: bool = True) -> SectionSpec:
        """Resolve to a section without a name; what nobody uses need not be complete."""
        signals: dict[str, Signal] = {}
        for name, written in self.signals.items():
            signal = read_signal(name, written, self.physics, ledger)
            if signal is not None:
                signals[name] = signal
        physics = self.physics
        if physics is None:
            return SectionSpec("", self.name, "", {}, ())
        parameters = read_parameters(self.parameters, physics, ledger)
        if used:
            self._require_inputs(physics, ledger)
        ordered = tuple(signals[name] for name in physics.slots if name in signals)
        return SectionSpec("", self.name, physics.name, parameters, ordered)

    def _require_inputs(self, physics: PhysicsEntry, ledger: Ledger) -> None:
        """Every input of the physics needs a driven signal; a misspelled one was noted already."""
        if any(name not in physics.slots for name in self.signals):
            return
        for name, slot in physics.slots.items():
            if Role.DRIVEN in slot.roles and name not in self.signals:
                ledger.add_missing(
                    ("kinds", self.name, "signals", name),
                    f"a driven signal, since a {physics.name} has this input and nobody else moves it",
                )


def read_sections(document: Document, catalogue: Catalogue, ledger: Ledger) -> tuple[SectionSpec, ...]:
    """Return all sections, a split row in one piece (`names.row_order`), signals in the order of their physics."""
    kinds = {name: _read_kind(name, table, catalogue, ledger) for name, table in (document.kinds or {}).items()}
    sections: list[SectionSpec] = []
    used: set[str] = set()
    for index, table in enumerate(document.sections or []):
        place: Place = ("sections", index)
        names = _check_names(table, place, {section.name for section in sections}, ledger)
        if table.kind is None:
            find_misspelled("kind", WrittenParameters.of(table, place), ledger)
        elif table.kind not in kinds and not ledger.spoiled(("kinds", table.kind)):
            allowed = f"a kind of this file: {', '.join(kinds) or 'there is none'}"
            ledger.add((*place, "kind"), table.kind, allowed, nearest(table.kind, kinds))
        kind = kinds.get(table.kind or "")
        if kind is None:
            sections.extend(SectionSpec(name, "", "", {}, ()) for name in names)
            continue
        used.add(kind.name)
        pattern = kind.under(table, place).resolve(ledger)
        sections.extend(_named(pattern, name) for name in names)
    for unused in (kind for name, kind in kinds.items() if name not in used):
        unused.resolve(ledger, used=False)
    return tuple(sections[index] for index in row_order([section.name for section in sections]))


def written_tags(document: Document) -> list[tuple[str, str]]:
    """Return section and name of every signal the file writes, right or wrong in itself."""
    kinds = document.kinds or {}
    tags: list[tuple[str, str]] = []
    for table in document.sections or []:
        kind = kinds.get(table.kind or "")
        signals = [*(kind.signals if kind else ()), *table.signals]
        tags += [(name, signal) for name in table.names or () for signal in dict.fromkeys(signals)]
    return tags


def _read_kind(name: str, table: KindTable, catalogue: Catalogue, ledger: Ledger) -> _Kind:
    place: Place = ("kinds", name)
    physics = catalogue.sections.get(table.physics or "")
    parameters = WrittenParameters.of(table, place)
    if table.physics is None:
        find_misspelled("physics", parameters, ledger)
    elif physics is None:
        allowed = f"a physics: {', '.join(catalogue.sections)}"
        ledger.add((*place, "physics"), table.physics, allowed, nearest(table.physics, catalogue.sections))
    return _Kind(
        name=name,
        physics=physics,
        parameters=parameters,
        signals=_signals(table.signals, place),
    )


def _signals(tables: Mapping[str, SignalTable], place: Place) -> dict[str, WrittenSignal]:
    return {name: WrittenSignal.of(table, (*place, "signals", name)) for name, table in tables.items()}


def _check_names(table: SectionsTable, place: Place, taken: set[str], ledger: Ledger) -> list[str]:
    """Return the names that are new, and note the others."""
    names: list[str] = []
    for name in table.names or ():
        if name in taken or name in names:
            ledger.add((*place, "names"), name, "a name no other section has")
        elif name in RESERVED:
            ledger.add((*place, "names"), name, f"any name but {', '.join(sorted(RESERVED))}, which tags use")
        else:
            names.append(name)
    return names


def _named(section: SectionSpec, name: str) -> SectionSpec:
    signals = tuple(replace(signal, section=name) for signal in section.signals)
    return replace(section, name=name, parameters=dict(section.parameters), signals=signals)
