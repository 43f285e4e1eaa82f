"""Quantities: everything that is priced or limited, with its usual numbers.

A **quantity** is a linear functional of one section's outputs, states, inputs or moves. Over a horizon of T steps it
becomes T rows (`controllers.rows`): outputs and states at t = 1..T, inputs and moves at t = 0..T−1, a move being
u_t − u_{t−1} with u_{−1} what was written last.

What several sections share, a common supply say, is one quantity with further **terms**, in other sections or of
another kind; row k adds up every term at its own step k, so that a state at t = k + 1 meets an input at t = k. All
sections of a quantity must lie in each other's locality: its price is everybody's business, and reaches nobody else.
A hard limit on a sum holds for the plan; for the inputs applied it holds to within the residual of the solve.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum
from math import inf

import numpy as np

from controllers.exceptions import RowError


class Of(Enum):
    """What a quantity is a functional of."""

    OUTPUT = "output"
    STATE = "state"
    INPUT = "input"
    MOVE = "move"

    @property
    def ahead(self) -> bool:
        """Whether its steps are t = 1..T (outputs, states) rather than t = 0..T−1 (inputs, moves)."""
        return self in (Of.OUTPUT, Of.STATE)


@dataclass(frozen=True)
class Term:
    """One section's part of a quantity: coefficients `mix` over its outputs, states, inputs or moves."""

    section: str
    of: Of
    mix: tuple[float, ...] = (1.0,)


@dataclass(frozen=True)
class Quantity:
    """One priced or limited quantity and its usual numbers, all in the network's units.

    Attributes:
        name: how it is addressed, unique in a table.
        section: the section it belongs to.
        of: outputs, states, inputs or moves of that section.
        mix: coefficients over them; (1.0,) is the first.
        span: engineering range; rows are scaled by it.
        weight: weight of its rows in the norm of the split; a matter of speed only, never of the optimum.
        price: q, per span squared; one number or one per step.
        target: c.
        soft: [a, b], and `soft_price` s.
        hard: [lo, hi].
        plus: what else is added to it, in this section or in others nearby.
    """

    name: str
    section: str
    of: Of
    mix: tuple[float, ...] = (1.0,)
    span: float = 1.0
    weight: float = 1.0
    price: float | tuple[float, ...] = 0.0
    target: float = 0.0
    soft: tuple[float, float] = (-inf, inf)
    soft_price: float = 0.0
    hard: tuple[float, float] = (-inf, inf)
    plus: tuple[Term, ...] = ()

    @property
    def terms(self) -> tuple[Term, ...]:
        """All that is added up, its own section's term first."""
        return (Term(self.section, self.of, self.mix), *self.plus)

    def __post_init__(self) -> None:
        prices = np.atleast_1d(np.asarray(self.price, dtype=float))
        problems = (
            *(
                (
                    not np.isfinite(term.mix).all() or not any(term.mix),
                    f"mix is {term.mix}" + (f" in section {term.section!r}" if term.section != self.section else ""),
                    "give finite coefficients, not all zero",
                )
                for term in self.terms
            ),
            (not 0 < self.span < inf, f"span is {self.span}", "give a positive, finite span"),
            (not 0 < self.weight < inf, f"weight is {self.weight}", "give a positive, finite weight"),
            (not (np.isfinite(prices).all() and (prices >= 0).all()), f"price is {self.price}", "give zero or more"),
            (not np.isfinite(self.target), f"target is {self.target}", "give a finite target"),
            (not 0 <= self.soft_price < inf, f"soft_price is {self.soft_price}", "give zero or more"),
            (not self.soft[0] <= self.soft[1], f"soft band is {self.soft}", "give (lower, upper) with lower <= upper"),
            (
                not self.hard[0] <= self.hard[1],
                f"hard limits are {self.hard}",
                "give (lower, upper) with lower <= upper",
            ),
        )
        for wrong, read, fix in problems:
            if wrong:
                raise RowError(f"quantity {self.name!r}: {read}; {fix}")
