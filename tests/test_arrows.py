"""The arrows of the house: who may import whom."""

from __future__ import annotations

import ast
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent
FORBIDDEN = {"controllers": {"gateway", "sim_plant"}, "sim_plant": {"gateway", "controllers"}}


def imported(path: Path) -> set[str]:
    """Top-level packages a file imports."""
    names: set[str] = set()
    for node in ast.walk(ast.parse(path.read_text())):
        if isinstance(node, ast.Import):
            names |= {alias.name.split(".")[0] for alias in node.names}
        elif isinstance(node, ast.ImportFrom) and node.module is not None:
            names.add(node.module.split(".")[0])
    return names


@pytest.mark.parametrize("package", FORBIDDEN)
def test_no_arrow_points_back(package: str) -> None:
    """`controllers` and `sim_plant` know neither each other nor the gateway."""
    files = list((ROOT / package).rglob("*.py"))
    assert files
    wrong = {str(path): bad for path in files if (bad := imported(path) & FORBIDDEN[package])}
    assert not wrong


def test_numerics_have_no_clock_and_no_input_or_output() -> None:
    """`controllers` imports nothing that tells the time, opens a file or a socket, or logs."""
    banned = {"time", "datetime", "logging", "socket", "asyncio", "pathlib", "os", "sqlite3", "threading"}
    wrong = {str(path): bad for path in (ROOT / "controllers").rglob("*.py") if (bad := imported(path) & banned)}
    assert not wrong
