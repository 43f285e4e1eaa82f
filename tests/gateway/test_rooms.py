"""The list of rooms in the head of `gateway`: complete, and true about who stands on whom."""

from __future__ import annotations

import ast
from pathlib import Path

import gateway

FOLDER = Path(gateway.__file__).parent


def floors() -> dict[str, int]:
    """Room -> line of the list it stands on."""
    assert gateway.__doc__ is not None
    listed = [line for line in gateway.__doc__.splitlines() if line.startswith("    ")]
    return {room: floor for floor, line in enumerate(listed) for room in line.split("  ")[2].split(", ")}


def rooms() -> dict[str, list[Path]]:
    """Room -> its files."""
    found: dict[str, list[Path]] = {}
    for path in FOLDER.rglob("*.py"):
        inside = path.relative_to(FOLDER)
        if inside != Path("__init__.py"):
            found.setdefault(inside.parts[0].removesuffix(".py"), []).append(path)
    return found


def imported(path: Path) -> set[str]:
    """Rooms a file imports."""
    names: set[str] = set()
    for node in ast.walk(ast.parse(path.read_text())):
        if isinstance(node, ast.ImportFrom) and node.module is not None:
            if node.module == "gateway":
                names |= {alias.name for alias in node.names}
            elif node.module.startswith("gateway."):
                names.add(node.module.split(".")[1])
    return names


def test_the_list_names_every_room() -> None:
    """A new room is missed at once, and so is one that is gone."""
    assert set(floors()) == set(rooms())


def test_no_room_stands_on_one_below_it() -> None:
    """Whoever reads from the top never needs a room that is still to come."""
    floor = floors()
    wrong = {
        (room, other)
        for room, paths in rooms().items()
        for path in paths
        for other in imported(path)
        if floor[other] > floor[room]
    }
    assert not wrong
