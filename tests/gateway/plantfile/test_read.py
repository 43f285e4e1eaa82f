"""Reading the file itself."""

from pathlib import Path

import pytest

from gateway.plantfile.mistakes import PlantFileError
from gateway.plantfile.read import read_plant
from tests.gateway.plantfile.rig import CATALOGUE, GOOD, plant_of


def test_a_file_is_its_text(tmp_path: Path) -> None:
    """Nothing but its text counts."""
    path = tmp_path / "rig.toml"
    path.write_text(GOOD, encoding="utf-8")
    assert read_plant(path, CATALOGUE) == plant_of(GOOD)


def test_a_byte_order_mark_means_nothing(tmp_path: Path) -> None:
    """Some editors write one."""
    path = tmp_path / "rig.toml"
    path.write_bytes(b"\xef\xbb\xbf" + GOOD.encode())
    assert read_plant(path, CATALOGUE) == plant_of(GOOD)


def test_a_file_that_is_not_there_is_a_mistake(tmp_path: Path) -> None:
    """With the path that was tried."""
    with pytest.raises(PlantFileError, match=r"(?s)gone\.toml.*No such file"):
        read_plant(tmp_path / "gone.toml", CATALOGUE)


def test_a_directory_is_a_mistake(tmp_path: Path) -> None:
    """It can't be read either."""
    with pytest.raises(PlantFileError, match="directory"):
        read_plant(tmp_path, CATALOGUE)


def test_a_file_that_is_not_utf_8_is_a_mistake_with_its_line(tmp_path: Path) -> None:
    """And the byte that gave it away."""
    path = tmp_path / "rig.toml"
    path.write_bytes(b'[plant]\nname = "Br\xfccke"\n')
    with pytest.raises(PlantFileError) as caught:
        read_plant(path, CATALOGUE)
    (mistake,) = caught.value.mistakes
    assert (mistake.line, mistake.read, mistake.allowed) == (2, "byte 0xfc", "text in UTF-8")


def test_the_error_names_the_file(tmp_path: Path) -> None:
    """And carries its mistakes."""
    path = tmp_path / "empty.toml"
    path.touch()
    with pytest.raises(PlantFileError) as caught:
        read_plant(path, CATALOGUE)
    assert str(caught.value).startswith(f"empty.toml: {len(caught.value.mistakes)} mistakes\n")
