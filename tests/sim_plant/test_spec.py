"""A specification that can't be simulated is refused by field, value and fix."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pytest

from sim_plant.panel import LocalAction
from sim_plant.spec import Role, Scale, SimulatedSignal, SpecError
from sim_plant.tags import tags_of
from tests.sim_plant.rows import PROFILE, TANK, row

SPEC = row()


def test_role_may_be_text() -> None:
    """The gateway's roles are its own; their text is enough."""
    signal = SimulatedSignal("tank-1", "level", "measured", "cm", (0.0, 40.0))  # type: ignore[arg-type]
    assert signal.role is Role.MEASURED


@pytest.mark.parametrize("factor", [0.0, float("nan"), float("inf")])
def test_scale_must_be_invertible(factor: float) -> None:
    """A factor of zero can't be undone."""
    with pytest.raises(SpecError, match="scale factor="):
        Scale(factor=factor)


@pytest.mark.parametrize("span", [(1.0, 1.0), (2.0, 1.0), (0.0, float("inf"))])
def test_span_must_be_finite(span: tuple[float, float]) -> None:
    """EURange and saturation need it."""
    with pytest.raises(SpecError, match=r"tank-1\.level span="):
        SimulatedSignal("tank-1", "level", Role.MEASURED, "cm", span)


def test_profile_on_something_that_is_no_disturbance() -> None:
    """Only consumers switch."""
    with pytest.raises(SpecError, match=r"tank-1\.level profile: only a disturbance"):
        SimulatedSignal("tank-1", "level", Role.MEASURED, "cm", (0.0, 40.0), profile=PROFILE)


def test_local_action_on_something_that_is_not_driven() -> None:
    """Only actuators have one."""
    with pytest.raises(SpecError, match=r"tank-1\.level local: only a driven"):
        SimulatedSignal("tank-1", "level", Role.MEASURED, "cm", (0.0, 40.0), local=LocalAction(0.0, 1.0))


def test_signal_of_an_unknown_section() -> None:
    """Lists the sections there are."""
    stranger = replace(SPEC.signals[0], section="tank-9")
    with pytest.raises(SpecError, match=r"tank-9\.level: there is no section 'tank-9'; known: \['tank-1'"):
        replace(SPEC, signals=(*SPEC.signals, stranger))


def test_signal_the_physics_does_not_have() -> None:
    """Lists the names of that role."""
    stranger = replace(SPEC.signals[0], name="depth")
    with pytest.raises(SpecError, match=r"no measured 'depth'; known: \['level'\]"):
        replace(SPEC, signals=(*SPEC.signals, stranger))


def test_input_nobody_drives() -> None:
    """Every input needs its driven signal."""
    signals = tuple(signal for signal in SPEC.signals if signal.tag != "tank-2.pump")
    with pytest.raises(SpecError, match=r"signals lack \['tank-2\.pump'\]"):
        replace(SPEC, signals=signals)


def test_two_signals_with_one_tag() -> None:
    """Tags are addresses."""
    with pytest.raises(SpecError, match=r"signals has \['tank-1\.level'\] more than once"):
        replace(SPEC, signals=(*SPEC.signals, SPEC.signals[0]))


def test_two_sections_with_one_name() -> None:
    """Names are addresses, too."""
    with pytest.raises(SpecError, match=r"sections has \['tank-1'\] more than once"):
        replace(SPEC, sections=(*SPEC.sections, ("tank-1", TANK)), x0=(*SPEC.x0, 0.2, 3e-5))


def test_section_named_like_the_panel() -> None:
    """Its tags would collide with the panel's."""
    with pytest.raises(SpecError, match="'panel' belongs to the panel"):
        replace(SPEC, sections=(*SPEC.sections, ("panel", TANK)))


@pytest.mark.parametrize("x0", [SPEC.x0[:-1], (*SPEC.x0[:-1], float("nan"))])
def test_start_state_of_the_wrong_length_or_not_finite(x0: tuple[float, ...]) -> None:
    """Says how many numbers are wanted."""
    with pytest.raises(SpecError, match="must be 6 finite ones"):
        replace(SPEC, x0=x0)


@pytest.mark.parametrize("field", ["watchdog_s", "window_s", "step_s", "substep_s"])
@pytest.mark.parametrize("value", [0.0, -1.0, float("nan"), float("inf")])
def test_times_must_be_positive(field: str, value: float) -> None:
    """At least a millisecond, the grain of the panel's clock."""
    changes: dict[str, Any] = {field: value}
    with pytest.raises(SpecError, match=f"{field}={value}: must be finite and at least a millisecond"):
        replace(SPEC, **changes)


def test_half_a_panel() -> None:
    """A watchdog without a window, or the other way round, is no panel."""
    with pytest.raises(SpecError, match="give both or none"):
        replace(SPEC, watchdog_s=None)


def test_tags_leave_out_what_nobody_can_read() -> None:
    """The unmeasured consumer has no tag, the measured one has."""
    tags = {tag.tag for tag in tags_of(SPEC)}
    assert "tank-2.consumer" not in tags
    assert {"tank-3.consumer", "tank-1.in_charge", "panel.clamped"} <= tags


def test_only_inputs_bits_and_the_panels_entries_are_writable() -> None:
    """Everything else is for reading."""
    writable = {tag.tag for tag in tags_of(SPEC) if tag.writable}
    assert writable == {
        *(f"tank-{i}.{name}" for i in (1, 2, 3) for name in ("pump", "in_charge")),
        "panel.heartbeat",
        "panel.expires",
        "panel.period",
    }


def test_plant_without_panel_has_no_tags_of_one() -> None:
    """Nothing to read that isn't there."""
    tags = {tag.tag for tag in tags_of(replace(SPEC, watchdog_s=None, window_s=None))}
    assert not any(tag.startswith("panel.") or tag.endswith(".in_charge") for tag in tags)
