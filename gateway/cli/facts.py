"""Facts as one JSON object on one line, for machines that read what commands print."""

from __future__ import annotations

import json
from collections.abc import Mapping, Set
from math import isfinite


def json_text(facts: Mapping[str, object]) -> str:
    """Facts as JSON: a float that is no number becomes null, a key that is no text becomes its text."""
    return json.dumps(_plain(facts), allow_nan=False)


def _plain(value: object) -> object:
    if isinstance(value, float):
        return value if isfinite(value) else None
    if isinstance(value, Mapping):
        return {str(key): _plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple | Set):
        return [_plain(item) for item in value]
    return value
