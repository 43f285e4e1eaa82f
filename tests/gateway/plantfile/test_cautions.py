"""What is legal and may be regretted."""

import pytest

from gateway.plantfile.cautions import warnings_of
from tests.gateway.plantfile.rig import GOOD, edited, plant_of

PANEL = '[panel]\nwatchdog = "2 s"\nwindow = "500 ms"\n'
WALL = '[[couplings]]\nbetween = ["oven-2", "oven-1"]\nkind = "wall"\nconductance = "1 W/K"\n'


def test_the_rig_needs_no_warning() -> None:
    """Panel, rate and safe hold are all there."""
    assert warnings_of(plant_of(GOOD)) == []


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ('safe_hold = "keep"\n', "", "oven-1.heater, oven-2.heater, oven-3.heater: no safe_hold"),
        ('rate = "20 %/s"\n', "", "oven-1.heater, oven-2.heater, oven-3.heater: no rate"),
        ('"keep"', '{ ramp_to = 10, at = "30 %/s" }', "faster than its rate"),
        (PANEL, "", "site bench: no [panel]"),
        ('window = "500 ms"', 'window = "400 ms"', "inputs expire after 0.4 s"),
        ("[sites.bench]", "[sites.live]\ninsecure = true", "site live: insecure"),
        ("[sites.bench]", f"{WALL}[sites.bench]", "oven-1 and oven-2: coupled 2 times"),
    ],
)
def test_what_is_unsafe_is_said(old: str, new: str, words: str) -> None:
    """One sentence for each, those of several sections joined; nothing else."""
    (warning,) = warnings_of(plant_of(edited(old, new)))
    assert words in warning


def test_handing_back_without_a_panel_is_said() -> None:
    """Nobody is there to take it."""
    text = edited(PANEL, "", edited('safe_hold = "keep"', 'safe_hold = "hand_back"'))
    assert any("handed back" in warning for warning in warnings_of(plant_of(text)))


def test_an_insecure_bench_is_no_news() -> None:
    """It is simulated."""
    assert warnings_of(plant_of(edited('link = "opcua"', 'link = "opcua"\ninsecure = true'))) == []
