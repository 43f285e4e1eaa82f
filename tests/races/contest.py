"""What all racers of one race share: the plant, its rows, its program, its design, made once."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from controllers.arrays import Floats
from controllers.plans import Measured
from controllers.quantities import Of
from controllers.rows import RowData, RowTable
from controllers.synthesis import Design
from tests.races.plants import LOCALITY, PLANTS, Plant
from tests.races.program import Program


@dataclass(frozen=True)
class Contest:
    """One plant over one horizon."""

    plant: Plant
    horizon: int
    locality: int

    @classmethod
    def build(cls, kind: str, size: int, horizon: int, *, seed: int = 1, alike: bool = False) -> Contest:
        """Generate a plant and set up the contest about it."""
        return cls(PLANTS[kind](size, seed, alike=alike), horizon, LOCALITY[kind])

    @property
    def size(self) -> int:
        """Number of sections N."""
        return self.plant.network.size

    @cached_property
    def table(self) -> RowTable:
        """Rows of all quantities."""
        return RowTable.build(self.plant.network, self.plant.quantities, self.horizon)

    @cached_property
    def usual(self) -> RowData:
        """The rows' numbers before anybody changed a target."""
        return self.table.data()

    @cached_property
    def program(self) -> Program:
        """The whole-plant quadratic program."""
        return Program.build(self.table, self.usual)

    @cached_property
    def design(self) -> Design:
        """The localized design."""
        return Design.build(self.plant.network, self.plant.quantities, horizon=self.horizon, locality=self.locality)

    @cached_property
    def input_span(self) -> Floats:
        """Span of every input, (m,); every section of these plants has one input quantity per input."""
        return self.table.span[[self.table.rows_of(q.name).start for q in self.table.quantities if q.of is Of.INPUT]]

    def error_spans(self, inputs: Floats, truth: Floats) -> float:
        """Largest error of the first inputs, in spans."""
        return float(abs((inputs - truth) / self.input_span).max())

    def next_state(self, measured: Measured, inputs: Floats) -> Floats:
        """State one period later, (n,)."""
        net = self.plant.network
        return np.asarray(net.a @ measured.x + net.b @ inputs + net.e @ measured.w)
