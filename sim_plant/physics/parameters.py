"""How a physics describes its parameters, so that a plant file can be checked without knowing the physics.

A kind of section or coupling is a frozen dataclass whose every field is a number made by `parameter`. Nothing else may
be a field: many sections of one kind are stacked into one by making an array of each field (`sim_plant.stacking`).
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import MISSING, dataclass, field, fields
from math import inf
from typing import Any

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[Any]
"""float64, or complex128 while a derivative is taken by complex steps."""

Floats = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Parameter:
    """One parameter: its SI unit ("" for none), its default (None when it must be given), and what it is."""

    name: str
    unit: str
    default: float | None
    description: str


def parameter(unit: str, description: str, default: float | None = None) -> Any:
    """Declare a field of a physics dataclass together with its unit and meaning."""
    metadata = {"unit": unit, "description": description}
    return field(metadata=metadata) if default is None else field(default=default, metadata=metadata)


def parameters_of(kind: type) -> tuple[Parameter, ...]:
    """List the parameters of a physics class, in the order of its fields."""
    return tuple(
        Parameter(
            name=item.name,
            unit=item.metadata["unit"],
            default=None if item.default is MISSING else item.default,
            description=item.metadata["description"],
        )
        for item in fields(kind)
    )


def require_positive(physics: object, names: Iterable[str]) -> None:
    """Check that these parameters, numbers or stacked arrays, are above zero and finite.

    Raises:
        ValueError: names the parameter, its value and what is allowed.
    """
    for name in names:
        _require(physics, name, lambda value: value > 0, "a positive, finite number")


def require_between(physics: object, name: str, low: float, high: float = inf) -> None:
    """Check that this parameter, a number or a stacked array, is finite and from `low` to `high`, both included.

    Raises:
        ValueError: names the parameter, its value and what is allowed.
    """
    wanted = f"a finite number from {low:g}" + ("" if high == inf else f" to {high:g}")
    _require(physics, name, lambda value: (value >= low) & (value <= high), wanted)


def _require(physics: object, name: str, allows: Any, wanted: str) -> None:
    value = np.asarray(getattr(physics, name), dtype=np.float64)
    if not (np.isfinite(value) & allows(value)).all():
        raise ValueError(f"{type(physics).__name__.lower()} {name} is {value}; give {wanted}")
