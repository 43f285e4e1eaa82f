"""From the text of a plant file to its tables: syntax, keys and single values checked, every mistake noted.

pydantic finds the wrong keys and values, this module says them in our words, takes them out and validates the rest,
so that whatever is right can still be checked for what only shows between values.
"""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterator, Mapping
from typing import Any, get_args, get_origin

from pydantic import ValidationError
from pydantic_core import ErrorDetails

from gateway.plantfile.fields import REFUSED
from gateway.plantfile.lines import Lines, Place
from gateway.plantfile.mistakes import Ledger, Mistake, PlantFileError, shown
from gateway.plantfile.tables import Document, Table

_ALLOWED = {
    "model_type": "a table",
    "dict_type": "a table",
    "list_type": "an array of tables",
}
"""What pydantic's own errors mean here; every other check is ours."""


def parse(text: str, source: str) -> tuple[Document, Ledger]:
    """Read the text of a plant file into tables, and note what is wrong with its keys and single values.

    Raises:
        PlantFileError: the text is no TOML, so nothing in it can be looked at.
    """
    try:
        data = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise PlantFileError(source, (_syntax_mistake(text, error),)) from error
    except (ValueError, RecursionError) as error:  # numbers of thousands of digits, brackets thousands deep
        raise PlantFileError(source, (Mistake("", None, "what no plant needs", f"TOML ({error})"),)) from error
    ledger = Ledger(Lines.of(text))
    document = _validated(data, ledger)
    for place, allowed in _missing(document, ()):
        ledger.add_missing(place, allowed)
    return document, ledger


def _syntax_mistake(text: str, error: tomllib.TOMLDecodeError) -> Mistake:
    """The decoder gives line and column in its message only (3.11 to 3.13)."""
    found = re.search(r"^(.*?) \(at (?:line (\d+), column \d+|end of document)\)$", str(error), re.DOTALL)
    reason = found[1] if found else str(error)
    lines = text.rstrip("\n").split("\n")
    line = int(found[2]) if found and found[2] else len(lines)
    return Mistake("", line, shown(lines[min(line, len(lines)) - 1].strip()), f"TOML ({reason})")


def _validated(data: dict[str, Any], ledger: Ledger) -> Document:
    """Validate, note the errors, take out what was wrong, until what is left is right."""
    while True:
        try:
            return Document.model_validate(data)
        except ValidationError as error:
            details = error.errors(include_url=False)
        for detail in details:
            _note(detail, ledger)
        for detail in details:
            data = _without(data, detail["loc"])


def _note(detail: ErrorDetails, ledger: Ledger) -> None:
    place: Place = detail["loc"]
    if detail["type"] == "extra_forbidden":
        ledger.add_unknown(place, _table_at(place[:-1]).model_fields)
    elif detail["type"] == REFUSED:
        ledger.add(place, detail["input"], detail["ctx"]["allowed"], detail["ctx"]["suggestion"])
    else:
        ledger.add(place, detail["input"], _ALLOWED.get(detail["type"], detail["msg"]))


def _without(data: dict[str, Any], place: Place) -> dict[str, Any]:
    """Return the data without the value at a place; an array goes as a whole when an element of it is wrong."""
    while isinstance(place[-1], int):
        place = place[:-1]
    kept = {key: value for key, value in data.items() if key != place[0]}
    inside = data.get(str(place[0]))
    if len(place) > 1 and isinstance(inside, list):
        index, rest = place[1], place[2:]
        kept[str(place[0])] = [_without(item, rest) if at == index else item for at, item in enumerate(inside)]
    elif len(place) > 1 and isinstance(inside, dict):
        kept[str(place[0])] = _without(inside, place[1:])
    return kept


def _table_at(place: Place) -> type[Table]:
    """The table model that a place belongs to."""
    table: type[Table] = Document
    steps = iter(place)
    for step in steps:
        annotation = table.model_fields[str(step)].annotation
        inner = _table_in(annotation)
        if inner is None:
            break
        table = inner
        if _is_collection(annotation):
            next(steps, None)
    return table


def _table_in(annotation: Any) -> type[Table] | None:
    if isinstance(annotation, type) and issubclass(annotation, Table):
        return annotation
    return next((table for part in get_args(annotation) if (table := _table_in(part)) is not None), None)


def _is_collection(annotation: Any) -> bool:
    return get_origin(annotation) in (dict, list) or any(_is_collection(part) for part in get_args(annotation))


def _missing(table: Table, place: Place) -> Iterator[tuple[Place, str]]:
    """Every required key that a table or one inside it lacks, with what may stand there."""
    for key, allowed in table.required.items():
        if not getattr(table, key) and getattr(table, key) != 0:
            yield (*place, key), allowed
    for key, value in table:
        inside: Mapping[str | int, object] = {}
        if isinstance(value, Table):
            yield from _missing(value, (*place, key))
        elif isinstance(value, dict):
            inside = value
        elif isinstance(value, list):
            inside = dict(enumerate(value))
        for step, item in inside.items():
            if isinstance(item, Table):
                yield from _missing(item, (*place, key, step))
