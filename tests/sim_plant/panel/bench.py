"""A small panel and the few words its tests need: two sections, watchdog 1000 ms, window 400 ms."""

from __future__ import annotations

from sim_plant.panel import (
    DrivenPoint,
    EventKind,
    LocalAction,
    Outcome,
    PanelSettings,
    PanelState,
    Written,
    power_up,
    readings,
    set_permit,
    tick,
    write,
)

SETTINGS = PanelSettings(
    points=(
        DrivenPoint("tank-1.pump", "tank-1", 0.0, 100.0, 40.0, LocalAction(to=0.0, rate_per_s=10.0)),
        DrivenPoint("tank-2.pump", "tank-2", 0.0, 100.0, 60.0),
    ),
    sections=("tank-1", "tank-2"),
    watchdog_ms=1000,
    window_ms=400,
)


class Panel:
    """The pure panel with its state carried along, as a test would tell the story."""

    def __init__(self) -> None:
        self.state: PanelState = power_up(SETTINGS)
        self.events: list[EventKind] = []
        self.now_ms = 0

    def wait(self, ms: int) -> None:
        """Let time pass."""
        self.now_ms += ms
        self.state, events = tick(SETTINGS, self.state, self.now_ms)
        self.events += [event.kind for event in events]

    def send(self, *values: tuple[str, object]) -> tuple[Outcome, ...]:
        """Send one request."""
        written: Written = write(SETTINGS, self.state, values, self.now_ms)
        self.state = written.state
        self.events += [event.kind for event in written.events]
        return written.outcomes

    def send_set(self, period: int, *inputs: tuple[str, object], valid_ms: int = 400) -> tuple[Outcome, ...]:
        """Send a set of inputs that is valid for this long from now."""
        return self.send(*inputs, ("panel.expires", self.now_ms + valid_ms), ("panel.period", period))

    def take(self, *sections: str) -> None:
        """Take sections, with a heartbeat that moves."""
        beat = ("panel.heartbeat", self.state.heartbeat + 1)
        outcomes = self.send(beat, *((f"{section}.in_charge", True) for section in sections))
        assert set(outcomes) == {Outcome.TAKEN}

    def permit(self, on: bool) -> None:
        """Give or withdraw the permit."""
        self.state, events = set_permit(SETTINGS, self.state, on, self.now_ms)
        self.events += [event.kind for event in events]

    def shows(self, tag: str) -> float | int | bool | str:
        """What a reader of this tag sees."""
        return readings(SETTINGS, self.state)[tag]
