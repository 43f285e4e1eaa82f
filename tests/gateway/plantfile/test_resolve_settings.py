"""Controller, hold, panel and bench."""

import pytest

from gateway.plantfile.plant import BenchSpec, ControllerSpec, Cutoffs, HoldSpec, PanelSpec, RowWeights
from tests.gateway.plantfile.rig import GOOD, edited, only_mistake, plant_of


def test_what_the_file_leaves_out_has_its_default() -> None:
    """The resolved types' own defaults, nowhere repeated."""
    plant = plant_of(GOOD)
    assert plant.controller == ControllerSpec(horizon=10, locality=1)
    assert (plant.cutoffs, plant.hold, plant.bench) == (Cutoffs(), HoldSpec(), BenchSpec())


def test_what_the_file_says_counts() -> None:
    """Every setting once."""
    settings = """\
locality = 3
rho = 0.7
relax = 1.2
weights = { output = 5, move = 2 }
tolerance = "0.5 %"
max_iterations = 90
wander = 0.2
[controller.cutoffs]
gather = 0.2
write = 0.8
[hold]
latch_after = 4
latch_window = 30
clear_for = 6
blind_after = 7
[bench]
seed = 9
substep = "20 ms"
"""
    plant = plant_of(edited("locality = 1\n", settings))
    assert plant.controller == ControllerSpec(10, 3, 0.7, 1.2, RowWeights(5.0, 1.0, 2.0), 0.005, 90, 0.2)
    assert plant.cutoffs == Cutoffs(0.2, 0.6, 0.8)
    assert plant.hold == HoldSpec(4, 30, 6, 7)
    assert plant.bench == BenchSpec(9, 0.02)


def test_a_panel_resolves_to_seconds() -> None:
    """Watchdog and window."""
    assert plant_of(GOOD).panel == PanelSpec(watchdog_s=2.0, window_s=0.5)


def test_a_plant_may_have_no_panel() -> None:
    """Legal; `warnings_of` says what it means."""
    assert plant_of(edited('[panel]\nwatchdog = "2 s"\nwindow = "500 ms"\n', "")).panel is None


@pytest.mark.parametrize(
    ("cutoffs"),
    ["gather = 0.6", "gather = 0.7", "write = 0.5", "gather = 0.2\nsynthesise = 0.95", "synthesise = 0.9\nwrite = 0.9"],
)
def test_cut_offs_that_do_not_follow_each_other_are_refused(cutoffs: str) -> None:
    """Among themselves and with the defaults of those not written."""
    text = edited("locality = 1", f"locality = 1\n[controller.cutoffs]\n{cutoffs}")
    assert only_mistake(text).place == "controller.cutoffs"


def test_a_wrong_cut_off_is_not_also_out_of_order() -> None:
    """One slip, one mistake."""
    text = edited("locality = 1", "locality = 1\n[controller.cutoffs]\nwrite = 5")
    assert only_mistake(text).place == "controller.cutoffs.write"


def test_more_misses_than_fit_into_the_window_are_refused() -> None:
    """The latch would never close."""
    assert only_mistake(edited("[panel]", "[hold]\nlatch_after = 21\n[panel]")).place == "hold.latch_after"


@pytest.mark.parametrize("watchdog", ["500 ms", "100 ms"])
def test_a_watchdog_no_longer_than_the_period_is_refused(watchdog: str) -> None:
    """The panel would trip between two heartbeats."""
    assert only_mistake(edited('watchdog = "2 s"', f'watchdog = "{watchdog}"')).place == "panel.watchdog"
