"""What time alone does to the panel: the watchdog runs out, local actions ramp. And the permit, which is the site's.

The result doesn't depend on how often the panel is asked: a tick over a long stretch trips at the very instant the
watchdog runs out and ramps from there, so `tick(a → c)` equals `tick(a → b)` then `tick(b → c)`.
"""

from __future__ import annotations

from dataclasses import replace

from sim_plant.panel.charge import Cause, Charge
from sim_plant.panel.state import EventKind, PanelEvent, PanelSettings, PanelState


def tick(settings: PanelSettings, state: PanelState, clock_ms: int) -> tuple[PanelState, tuple[PanelEvent, ...]]:
    """Move the panel's clock.

    Raises:
        ValueError: the clock would run backwards.
    """
    if clock_ms < state.clock_ms:
        raise ValueError(f"panel clock_ms={clock_ms}: already at {state.clock_ms}, it must never run backwards")
    if settings.watchdog_ms is None or not state.control_present:
        return _ramp(settings, state, clock_ms), ()
    runs_out_ms = state.still_since_ms + settings.watchdog_ms
    if clock_ms < runs_out_ms:
        return _ramp(settings, state, clock_ms), ()
    tripped = replace(_ramp(settings, state, runs_out_ms), tripped=True, restart=True).after(Cause.TRIP, state.charge)
    event = PanelEvent(
        EventKind.TRIPPED,
        f"tripped: heartbeat {state.heartbeat} unchanged for {settings.watchdog_ms} ms; "
        "all sections taken back, local action runs until control takes them again",
    )
    return _ramp(settings, tripped, clock_ms), (event,)


def set_permit(
    settings: PanelSettings, state: PanelState, on: bool, clock_ms: int
) -> tuple[PanelState, tuple[PanelEvent, ...]]:
    """Give or withdraw the permit at this instant; withdrawn, every section goes to its local action.

    Raises:
        ValueError: the clock would run backwards.
    """
    state, events = tick(settings, state, clock_ms)
    if on == state.permit:
        return state, events
    changed = replace(state, permit=on)
    if on:
        return changed, (*events, PanelEvent(EventKind.PERMIT, "permit on: control may take sections again"))
    text = "permit off: all sections taken back to local action, sets are refused"
    return changed.after(Cause.PERMIT_OFF, state.charge), (*events, PanelEvent(EventKind.PERMIT, text))


def _ramp(settings: PanelSettings, state: PanelState, clock_ms: int) -> PanelState:
    """Let local actions run up to this instant."""
    elapsed_s = (clock_ms - state.clock_ms) / 1000
    ramped = {
        point.tag: point.local.after(state.commands[point.tag], elapsed_s)
        for point in settings.points
        if state.charge[point.section] is Charge.LOCAL
    }
    commands = {**state.commands, **ramped} if ramped else state.commands
    return replace(state, clock_ms=clock_ms, commands=commands)
