"""The one law of the panel, against an adversary that sends anything in any order.

No input reaches an actuator unless its set was in charge, in window and newer. The oracle below says so in its own
words: it looks at the request and at what the panel showed before it, and asks whether the change of an actuator can
be justified.
"""

from __future__ import annotations

from math import inf, isfinite, nan

from hypothesis import settings
from hypothesis import strategies as st
from hypothesis.stateful import RuleBasedStateMachine, invariant, rule

from sim_plant.panel import PanelState, tick
from tests.sim_plant.panel.bench import SETTINGS, Panel

WINDOW_MS = 400
INPUTS = st.one_of(st.floats(-20.0, 120.0), st.sampled_from([nan, inf, -inf, 50, True, None]))
ENTRIES = st.one_of(
    st.tuples(st.sampled_from(["tank-1.pump", "tank-2.pump"]), INPUTS),
    st.tuples(st.just("panel.expires in"), st.integers(-300, 600)),
    st.tuples(st.just("panel.period"), st.integers(0, 12)),
    st.tuples(st.just("panel.heartbeat"), st.integers(0, 3)),
    st.tuples(st.sampled_from(["tank-1.in_charge", "tank-2.in_charge"]), st.booleans()),
)
COMMITS = st.builds(
    lambda valid_ms, period: [("panel.expires in", valid_ms), ("panel.period", period)],
    st.integers(-100, 500),
    st.integers(0, 12),
)
SETS = st.builds(
    lambda one, other, commit: [("tank-1.pump", one), ("tank-2.pump", other), *commit],
    st.floats(0.0, 100.0),
    INPUTS,
    COMMITS,
)
REQUESTS = st.one_of(
    st.lists(ENTRIES, max_size=8), SETS, st.builds(list.__add__, SETS, SETS), st.builds(list.__add__, SETS, COMMITS)
)
Request = list[tuple[str, object]]


def can_be_justified(before: PanelState, request: Request, tag: str, command: float) -> bool:
    """Whether some set in the request may have put this actuator to this command."""
    section = tag.partition(".")[0]
    start = 0
    for end, (name, period) in enumerate(request):
        if name != "panel.period":
            continue
        members, start = request[start:end], end + 1
        expires = [value for name, value in members if name == "panel.expires"]
        values = [value for name, value in members if name == tag]
        if (
            before.permit
            and held_by_control(before, request[:end], section)
            and expires
            and isinstance(expires[-1], int)
            and 0 <= expires[-1] - before.clock_ms <= WINDOW_MS
            and isinstance(period, int)
            and (before.restart or period > before.accepted)
            and values
            and all(isinstance(value, float) and isfinite(value) for value in values)
            and isinstance(values[-1], float)
            and command == min(max(values[-1], 0.0), 100.0)
        ):
            return True
    return False


def held_by_control(before: PanelState, earlier: Request, section: str) -> bool:
    """Whether the section is in charge of control after these entries of a request."""
    held, tripped = before.in_charge(section), before.tripped
    for name, value in earlier:
        if name == "panel.heartbeat":
            tripped = tripped and value == before.heartbeat
        elif name == f"{section}.in_charge":
            held = bool(value) and (held or not tripped)
    return held


class Adversary(RuleBasedStateMachine):
    """Waits, withdraws the permit, and sends requests of every kind."""

    def __init__(self) -> None:
        super().__init__()
        self.panel = Panel()
        self.panel.wait(10_000)

    def dated(self, name: str, value: object) -> tuple[str, object]:
        """Turn a validity from now on into an instant of the panel's clock."""
        if name == "panel.expires in" and isinstance(value, int):
            return "panel.expires", self.panel.now_ms + value
        return name, value

    @rule(ms=st.integers(0, 1500))
    def wait(self, ms: int) -> None:
        """Time passes, and only time."""
        held = {section for section in SETTINGS.sections if self.panel.state.in_charge(section)}
        before = self.panel.state.commands
        self.panel.wait(ms)
        still = {section for section in held if self.panel.state.in_charge(section)}
        for point in SETTINGS.points:
            if point.section in still:
                assert self.panel.state.commands[point.tag] == before[point.tag]

    @rule(on=st.booleans())
    def permit(self, on: bool) -> None:
        """The site withdraws or gives the permit."""
        self.panel.permit(on)

    @rule()
    def take_both(self) -> None:
        """A decent client does what it must to be in charge."""
        beat = ("panel.heartbeat", self.panel.state.heartbeat + 1)
        self.panel.send(beat, ("tank-1.in_charge", True), ("tank-2.in_charge", True))

    @rule(entries=REQUESTS)
    def request(self, entries: list[tuple[str, object]]) -> None:
        """Whatever arrives, every change of an actuator has its set."""
        request = [self.dated(name, value) for name, value in entries]
        before, _ = tick(SETTINGS, self.panel.state, self.panel.now_ms)
        outcomes = self.panel.send(*request)
        after = self.panel.state
        assert len(outcomes) == len(request)
        for tag, command in after.commands.items():
            assert command == before.commands[tag] or can_be_justified(before, request, tag, command)
        periods = [value for name, value in request if name == "panel.period"]
        assert after.accepted == before.accepted or after.accepted in periods
        assert after.accepted >= before.accepted or before.restart

    @invariant()
    def commands_stay_in_their_span(self) -> None:
        """Whoever asked for whatever."""
        for point in SETTINGS.points:
            assert point.low <= self.panel.state.commands[point.tag] <= point.high

    @invariant()
    def nobody_drives_without_permit_or_while_tripped(self) -> None:
        """The bits say so."""
        state = self.panel.state
        assert not state.control_present or (state.permit and not state.tripped)


TestAdversary = Adversary.TestCase
TestAdversary.settings = settings(max_examples=150, stateful_step_count=25, deadline=None)


def test_the_oracle_can_say_no() -> None:
    """An oracle that justified everything would prove nothing."""
    panel = Panel()
    panel.wait(10_000)
    panel.take("tank-1")
    request: Request = [("tank-1.pump", 50.0), ("panel.expires", panel.now_ms), ("panel.period", 1)]
    assert can_be_justified(panel.state, request, "tank-1.pump", 50.0)
    assert not can_be_justified(panel.state, request, "tank-1.pump", 51.0)
    assert not can_be_justified(panel.state, request[:1], "tank-1.pump", 50.0)
    assert not can_be_justified(panel.state, request, "tank-2.pump", 50.0)
