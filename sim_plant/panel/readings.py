"""What the panel shows to those who read it."""

from __future__ import annotations

from collections.abc import Mapping

from sim_plant.panel.state import PanelSettings, PanelState


def readings(settings: PanelSettings, state: PanelState) -> Mapping[str, float | int | bool | str]:
    """Every value of the panel by tag; a driven tag shows the actuator's command, never a value nobody committed."""
    if not settings.supervised:
        return state.commands
    own: dict[str, float | int | bool | str] = {
        "panel.heartbeat": state.heartbeat,
        "panel.permit": state.permit,
        "panel.clock": state.clock_ms,
        "panel.expires": state.expires_ms,
        "panel.period": state.accepted,
        "panel.accepted": state.accepted,
        "panel.refusal": state.refusal,
        "panel.tripped": state.tripped,
        "panel.clamped": state.clamped,
    }
    bits = {tag: state.in_charge(section) for tag, section in settings.section_of_bit.items()}
    return {**own, **bits, **state.commands}
