"""The canonical bytes of a plant: equal for two files exactly when the controller does the same to the same signals.

Formatting, comments, the order of keys and units of writing have gone with the reading already. What is left out here
is named in `_LEFT_OUT` with its reason; anything else counts, also a field added tomorrow.
"""

from __future__ import annotations

import json
from dataclasses import asdict
from typing import Any

from gateway.plantfile.plant import Plant

FORM = 1
"""Raised whenever the same plant would give other bytes."""

_LEFT_OUT = {
    "name": "a label",
    "bench": "only the simulated plant has it",
}
_LEFT_OUT_OF_SIGNALS = {
    "instrument": "only the simulated plant has it; what the estimator is told of it is `noise`",
    "profile": "only the simulated plant has it",
}


def canonical(plant: Plant) -> bytes:
    """Return the bytes to hash: JSON in ASCII, keys sorted, shortest exact floats, infinities as `Infinity`."""
    content: dict[str, Any] = asdict(plant)
    for key in _LEFT_OUT:
        del content[key]
    for section in content["sections"]:
        for signal in section["signals"]:
            for key in _LEFT_OUT_OF_SIGNALS:
                del signal[key]
    return json.dumps({"form": FORM, "plant": _unsigned_zeros(content)}, sort_keys=True, separators=(",", ":")).encode()


def _unsigned_zeros(value: Any) -> Any:
    """-0.0 and 0.0 are the same number and must be the same bytes."""
    if isinstance(value, dict):
        return {key: _unsigned_zeros(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_unsigned_zeros(item) for item in value]
    return 0.0 if isinstance(value, float) and value == 0.0 else value
