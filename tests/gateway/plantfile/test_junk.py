"""Whatever stands in a plant file, the answer is a plant or its mistakes, never another exception."""

import json
import tomllib
from typing import Any

from hypothesis import given, settings
from hypothesis import strategies as st

from gateway.plantfile.canonical import canonical
from gateway.plantfile.cautions import warnings_of
from tests.gateway.plantfile.rig import GOOD, mistakes_of, plant_of

RICH = GOOD.replace(
    'link = "opcua"', 'link = "opcua"\noverrides = { "oven-1.heater" = "X" }\npanel_address = "P/{signal}"'
).replace("price = 1", 'price = 1\ninstrument = { noise = 0.2, lag = "2 s" }\njump = "4 K/s"')

TEXTS = st.one_of(
    st.text(max_size=12),
    st.sampled_from(
        ["", "measured", "driven", "1 cm", "5 %", "-1 s", "1e308 %/s", "0 K", "{section}", "oven-1", "5 /", "%"]
    ),
)
JUNK = st.recursive(
    st.one_of(st.none(), st.booleans(), st.integers(), st.floats(), TEXTS),
    lambda inside: st.one_of(st.lists(inside, max_size=3), st.dictionaries(TEXTS, inside, max_size=3)),
    max_leaves=5,
)


def inline(value: Any) -> str:
    """Write a value as TOML in one line; None stands for an empty array."""
    if isinstance(value, dict):
        return "{" + ", ".join(f"{quoted(key)} = {inline(item)}" for key, item in value.items()) + "}"
    if isinstance(value, list):
        return "[" + ", ".join(inline(item) for item in value) + "]"
    if isinstance(value, float):
        return repr(value)
    return "[]" if value is None else quoted(value) if isinstance(value, str) else json.dumps(value)


def quoted(text: str) -> str:
    """Write a text as TOML."""
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007f")


def spoil(value: Any, data: st.DataObject) -> Any:
    """Put junk somewhere into a document: in place of a value, or beside it under a key of its own."""
    if not isinstance(value, dict | list) or not value or data.draw(st.integers(0, 4)) == 0:
        return data.draw(JUNK)
    if isinstance(value, list):
        at = data.draw(st.integers(0, len(value) - 1))
        return [*value[:at], spoil(value[at], data), *value[at + 1 :]]
    key = data.draw(st.sampled_from([*value, None]))
    if key is None:
        return {**value, data.draw(TEXTS): data.draw(JUNK)}
    return {**value, key: spoil(value[key], data)}


@settings(deadline=None, max_examples=100)
@given(data=st.data(), times=st.integers(1, 3))
def test_junk_gives_a_plant_or_mistakes(data: st.DataObject, times: int) -> None:
    """Law: junk anywhere in a right document reads as a plant that works, or raises mistakes that say where."""
    document = tomllib.loads(RICH)
    for _ in range(times):
        spoiled = spoil(document, data)
        document = spoiled if isinstance(spoiled, dict) else document
    text = "\n".join(f"{quoted(key)} = {inline(value)}" for key, value in document.items())
    mistakes = mistakes_of(text)
    assert all(mistake.allowed and str(mistake) for mistake in mistakes)
    if not mistakes:
        plant = plant_of(text)
        assert canonical(plant)
        assert all(warnings_of(plant))
