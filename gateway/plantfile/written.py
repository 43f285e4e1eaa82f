"""Tables laid over each other, each key remembering where it was written.

A `[[sections]]` table may replace single keys of its kind's signals and parameters; a mistake must still point at the
line that made it.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from gateway.plantfile.lines import Place
from gateway.plantfile.tables import PhysicsTable, SignalTable


@dataclass(frozen=True)
class WrittenSignal:
    """One signal as its kind and its section wrote it.

    Attributes:
        table: the keys, the section's before the kind's.
        places: where each key that was written stands.
        home: the table a missing key belongs to.
    """

    table: SignalTable
    places: Mapping[str, Place]
    home: Place

    @classmethod
    def of(cls, table: SignalTable, home: Place) -> WrittenSignal:
        """A signal written in one table only."""
        return cls(table, {key: (*home, key) for key in table.model_fields_set}, home)

    def under(self, over: WrittenSignal) -> WrittenSignal:
        """This signal with the keys of another one laid over it."""
        update = {key: getattr(over.table, key) for key in over.table.model_fields_set}
        return WrittenSignal(self.table.model_copy(update=update), {**self.places, **over.places}, self.home)

    def place(self, key: str, *inside: str) -> Place:
        """Where a key stands, or would stand if it were written."""
        return (*self.places.get(key, (*self.home, key)), *inside)


@dataclass(frozen=True)
class WrittenParameters:
    """Parameters of a physics as they were written: value and place by key."""

    values: Mapping[str, Any]
    places: Mapping[str, Place]
    home: Place

    @classmethod
    def of(cls, table: PhysicsTable, home: Place) -> WrittenParameters:
        """The parameters of one table."""
        values = table.parameters
        return cls(values, {key: (*home, key) for key in values}, home)

    def under(self, over: WrittenParameters) -> WrittenParameters:
        """These parameters with others laid over them."""
        return WrittenParameters({**self.values, **over.values}, {**self.places, **over.places}, self.home)

    def place(self, key: str) -> Place:
        """Where a key stands, or would stand if it were written."""
        return self.places.get(key, (*self.home, key))
