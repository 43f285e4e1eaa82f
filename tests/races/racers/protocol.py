"""What a racer is.

An `Entry` says who takes part and how it may be set up; `enter` sets it up for one contest, which is not timed; `solve`
is what happens every period, from the measurement to the first inputs, and is.
"""

from __future__ import annotations

import importlib
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from enum import Enum
from importlib.util import find_spec
from typing import Any, Protocol

from controllers.arrays import Floats
from controllers.plans import Measured
from controllers.rows import RowData
from tests.races.contest import Contest


class Family(Enum):
    """How a racer goes about it."""

    LOCALIZED = "localized"
    SPLITTING = "operator splitting"
    INTERIOR = "interior point"
    ACTIVE_SET = "active set"


@dataclass(frozen=True)
class Answer:
    """First inputs (m,) in the network's units, iterations, and whether the racer says it got there."""

    inputs: Floats
    iterations: int
    finished: bool


@dataclass(frozen=True)
class Setup:
    """How a racer is set: its own tolerance, and its other settings by name."""

    tolerance: float
    tuning: Mapping[str, Any] = field(default_factory=dict)

    def __str__(self) -> str:
        parts = [f"tolerance {self.tolerance:.0e}", *(f"{name} {value}" for name, value in self.tuning.items())]
        return ", ".join(parts)


class Racer(Protocol):
    """One racer in one contest; it remembers its last answer between periods."""

    def solve(self, measured: Measured, data: RowData) -> Answer:
        """Find the first inputs of one period."""

    def forget(self) -> None:
        """Drop the last answer: the next solve is cold."""


@dataclass(frozen=True)
class Entry:
    """Who takes part.

    Attributes:
        name: in tables.
        family: how it works.
        package: what must be installed.
        enter: sets the racer up for one contest, factorisation included.
        tolerances: loosest first.
        tunings: settings that a careful user would try.
        held_bytes: counts what it holds in memory; left out, the growth of the process is taken.
    """

    name: str
    family: Family
    package: str
    enter: Callable[[Contest, Setup], Racer]
    tolerances: tuple[float, ...]
    tunings: tuple[Mapping[str, Any], ...] = ({},)
    held_bytes: Callable[[Contest], int] | None = None


def installed(entry: Entry) -> bool:
    """Whether the racer's package is there."""
    return available(entry.package)


def available(package: str) -> bool:
    """Whether a package can be imported."""
    return find_spec(package) is not None


def load(package: str) -> Any:
    """Import a solver; most of them come without types."""
    return importlib.import_module(package)
