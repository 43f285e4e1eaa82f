"""Engineering units against UNECE Recommendation 20 and OPC 10000-8."""

from __future__ import annotations

import pytest

from sim_plant.servers.units import OTHERS, UNECE, engineering_units, unit_id


def test_unit_id_is_the_packed_code() -> None:
    """The standard's own rule (OPC 10000-8, 5.6.3), on the code of the degree of angle: DD is 17476."""
    assert unit_id("DD") == 17476
    assert unit_id("C81") == 4405297


@pytest.mark.parametrize(
    ("text", "code", "symbol"),
    [
        ("cm", "CMT", "cm"),
        ("%", "P1", "%"),
        ("cm^3/s", "2J", "cm³/s"),
        ("cm**3/s", "2J", "cm³/s"),
        ("cm³ / s", "2J", "cm³/s"),
        ("degC", "CEL", "°C"),
        ("kW", "KWT", "kW"),
        ("N", "NEW", "N"),
        ("m/s", "MTS", "m/s"),
    ],
)
def test_spellings_of_plant_files_find_their_code(text: str, code: str, symbol: str) -> None:
    """Codes of UNECE Recommendation 20."""
    unit = engineering_units(text)
    assert unit.NamespaceUri == UNECE
    assert unit.UnitId == int.from_bytes(code.encode(), "big")
    assert unit.DisplayName.Text == symbol


def test_unit_without_a_code_says_so() -> None:
    """UnitId −1 in a namespace of our own, the text kept as it was written (OPC 10000-8, 5.6.3)."""
    unit = engineering_units("furlong/fortnight")
    assert (unit.NamespaceUri, unit.UnitId, unit.DisplayName.Text) == (OTHERS, -1, "furlong/fortnight")
