"""The canonical bytes: what changes them, and what does not."""

import json
import tomllib
from dataclasses import replace
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gateway.plantfile.canonical import canonical
from tests.gateway.plantfile.rig import GOOD, edited, plant_of

RICH = edited(
    "price = 1",
    'price = 1\ninstrument = { noise = 0.2, lag = "2 s" }',
    edited('link = "opcua"', 'link = "opcua"\noverrides = { "oven-1.heater" = "X", "oven-2.heater" = "Y" }'),
)


def bytes_of(text: str) -> bytes:
    """Canonical bytes of a text."""
    return canonical(plant_of(text))


def inline(value: Any) -> str:
    """Write a value as TOML in one line."""
    if isinstance(value, dict):
        return "{" + ", ".join(f"{json.dumps(key)} = {inline(item)}" for key, item in value.items()) + "}"
    if isinstance(value, list):
        return "[" + ", ".join(inline(item) for item in value) + "]"
    return json.dumps(value)


def shuffled(value: Any, data: st.DataObject) -> Any:
    """The same document with the keys of every table in any order."""
    if isinstance(value, dict):
        return {key: shuffled(value[key], data) for key in data.draw(st.permutations(list(value)))}
    return [shuffled(item, data) for item in value] if isinstance(value, list) else value


@settings(deadline=None)
@given(data=st.data())
def test_the_order_of_keys_does_not_matter(data: st.DataObject) -> None:
    """Law: any order of the keys of any table, written all inline, gives the same bytes."""
    document = shuffled(tomllib.loads(RICH), data)
    text = "\n".join(f"{key} = {inline(value)}" for key, value in document.items())
    assert bytes_of(text) == bytes_of(RICH)


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ("[plant]", "# a comment\n\n[plant]"),
        ("span = [0, 400]", "span = [ 0.0,\n 4e2 ]"),
        ('period = "500 ms"', 'period = "0.5 s"'),
        ('loss = "5 W/K"', 'loss = "0.005 kW/K"'),
        ('rate = "20 %/s"', "rate = 20"),
        ("target = 200", 'target = "473.15 K"'),
        ("span = [0, 100]", "span = [-0.0, 100]"),
        ('names = "oven-{1..3}"', 'names = "oven-{1,2,3}"'),
        ("locality = 1", "locality = 1\nrho = 0.3"),
    ],
)
def test_the_way_of_writing_does_not_matter(old: str, new: str) -> None:
    """Comments, number formats, units of writing, forms of names, a default said out loud."""
    assert bytes_of(edited(old, new)) == bytes_of(GOOD)


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ('name = "Rig"', 'name = "Other"'),
        ("[panel]", '[bench]\nseed = 7\nsubstep = "20 ms"\n[panel]'),
        ("price = 1", "price = 1\nnoise = 0\ninstrument = { noise = 1 }"),
    ],
)
def test_what_the_controller_never_sees_does_not_matter(old: str, new: str) -> None:
    """The label, and what only the simulated plant has."""
    assert bytes_of(edited(old, new)) == bytes_of(GOOD)


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ('period = "500 ms"', 'period = "501 ms"'),
        ("horizon = 10", "horizon = 11"),
        ("locality = 1", "locality = 2"),
        ("locality = 1", "locality = 1\nweights = { move = 2 }"),
        ("locality = 1", "locality = 1\n[controller.cutoffs]\ngather = 0.2"),
        ("[panel]", "[hold]\nclear_for = 6\n[panel]"),
        ('watchdog = "2 s"', 'watchdog = "3 s"'),
        ('loss = "5 W/K"', 'loss = "5.000000001 W/K"'),
        ("soft = [50, 350]", "soft = [50, 349]"),
        ("target = 200", "target = 201"),
        ("price = 1", "price = 2"),
        ("price = 1", "price = 1\nnoise = 1"),
        ("price = 1", "price = 1\njump = 1"),
        ("hard = [0, 90]", "hard = [0, 91]"),
        ('rate = "20 %/s"', 'rate = "21 %/s"'),
        ('safe_hold = "keep"', 'safe_hold = "hand_back"'),
        ('names = "oven-{1..3}"', 'names = "oven-{1..4}"'),
        ('along = "oven-{1..3}"', 'along = "oven-{1..2}"'),
        ('conductance = "4 W/K"', 'conductance = "5 W/K"'),
        ("127.0.0.1", "127.0.0.2"),
        ("urn:example:rig", "urn:example:rig2"),
        ("{section}/{signal}", "{section}.{signal}"),
        ('link = "opcua"', 'link = "opcua"\noverrides = { "oven-1.heater" = "X" }'),
        ('link = "opcua"', 'link = "opcua"\nkind = "live"'),
    ],
)
def test_what_changes_the_control_or_the_wires_changes_the_bytes(old: str, new: str) -> None:
    """Period, design, limits, prices, holds, panel, physics, addresses."""
    assert bytes_of(edited(old, new)) != bytes_of(GOOD)


def test_a_field_nobody_thought_of_counts() -> None:
    """Everything is in unless it is named as left out: tried with a field of the plant that is in no list."""
    plant = plant_of(GOOD)
    section = replace(plant.sections[0], parameters={**plant.sections[0].parameters, "new": 1.0})
    assert canonical(replace(plant, sections=(section, *plant.sections[1:]))) != canonical(plant)


def test_the_bytes_are_ascii_json() -> None:
    """So that another program can make them too."""
    assert json.loads(bytes_of(GOOD).decode("ascii"))["plant"]["period_s"] == 0.5
