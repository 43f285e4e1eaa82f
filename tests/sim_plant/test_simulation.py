"""The plant as one: scans, actuators, faults and panel together, and its determinism."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pytest

from sim_plant.faults import FaultError, parse
from sim_plant.notes import Note
from sim_plant.panel import Outcome
from sim_plant.simulation import NS, Simulation, SimulationState
from sim_plant.spec import SimulatedPlantSpec
from sim_plant.status import GOOD, NO_COMMUNICATION
from tests.sim_plant.rows import LEVEL_M, OUTFLOW_M3_S, PROFILE, REST_PERCENT, TRANSMITTER, row


class Bench:
    """A simulation with its state carried along."""

    def __init__(self, spec: SimulatedPlantSpec) -> None:
        self.simulation = Simulation(spec)
        self.state: SimulationState = self.simulation.start()
        self.notes: list[Note] = []

    @property
    def now_ns(self) -> int:
        """Plant time of the last scan."""
        return self.simulation.time_ns(self.state)

    def run(self, seconds: float) -> None:
        """Scan for this long."""
        for _ in range(round(seconds * NS / self.simulation.step_ns)):
            self.state, notes = self.simulation.step(self.state)
            self.notes += notes

    def write(self, *values: tuple[str, object]) -> tuple[Outcome, ...]:
        """Send one request now."""
        self.state, outcomes, notes = self.simulation.write(self.state, values, self.now_ns)
        self.notes += notes
        return outcomes

    def drive(self, period: int, *inputs: tuple[str, object]) -> tuple[Outcome, ...]:
        """Send a heartbeat and a valid set now."""
        expires = self.now_ns // 1_000_000 + 300
        return self.write(("panel.heartbeat", period), *inputs, ("panel.expires", expires), ("panel.period", period))

    def provoke(self, line: str) -> None:
        """Give a line of fault now."""
        self.state, notes = self.simulation.provoke(self.state, parse(line), self.now_ns)
        self.notes += notes

    def shows(self, tag: str) -> float | int | bool | str | None:
        """What a reader of this tag sees now."""
        return self.simulation.read(self.state, self.now_ns)[tag].value

    def truth(self) -> Mapping[str, float]:
        """What nobody can read."""
        return self.simulation.truth(self.state)

    def said(self, logger: str) -> list[str]:
        """Sentences for this logger."""
        return [note.text for note in self.notes if note.logger == f"sim_plant.{logger}"]


def test_equilibrium_stands_still() -> None:
    """Started at rest with quiet instruments, nothing moves by a micrometre in a minute."""
    bench = Bench(row())
    bench.run(60.0)
    for name in ("tank-1", "tank-2", "tank-3"):
        assert bench.truth()[f"{name}.level"] == pytest.approx(100 * LEVEL_M, abs=1e-4)


def test_same_seed_and_requests_same_numbers() -> None:
    """Bit for bit, with noise, consumers, faults and inputs."""

    def day(seed: int) -> list[object]:
        bench = Bench(row(TRANSMITTER, PROFILE, seed=seed))
        bench.write(("tank-1.in_charge", True))
        trace: list[object] = []
        for period in range(1, 60):
            bench.drive(period, ("tank-1.pump", 40.0 + period))
            if period == 30:
                bench.provoke("bias tank-2.level 3 for 5 s")
            bench.run(0.5)
            trace.append(dict(bench.simulation.read(bench.state, bench.now_ns)))
        return trace

    assert day(7) == day(7)
    assert day(7) != day(8)


def test_state_is_all_there_is() -> None:
    """Two futures of one kept state are the same future: nothing hides in the simulation."""
    bench = Bench(row(TRANSMITTER, PROFILE))
    bench.run(10.0)
    kept = bench.state
    bench.run(20.0)
    first = bench.truth()
    bench.state = kept
    bench.run(20.0)
    assert bench.truth() == first


def test_accepted_input_reaches_the_actuator_at_the_next_scan() -> None:
    """Not before: the time already gone is never integrated with an input that came later."""
    bench = Bench(row())
    bench.write(("tank-1.in_charge", True))
    assert bench.drive(1, ("tank-1.pump", 90.0))[1] is Outcome.TAKEN
    assert bench.shows("tank-1.pump") == 90.0
    assert bench.truth()["tank-1.pump"] == pytest.approx(REST_PERCENT)
    bench.run(0.05)
    assert bench.truth()["tank-1.pump"] == 90.0
    assert bench.truth()["tank-1.level"] == pytest.approx(100 * LEVEL_M, abs=1e-9)


def test_more_pump_raises_the_level() -> None:
    """Commands arrive at the physics in the right place and unit: a pump with a lag of 2 s, and a volume balance."""
    bench = Bench(row(couplings=()))
    bench.write(("tank-1.in_charge", True))
    bench.drive(1, ("tank-1.pump", 100.0))
    bench.run(1.0)
    # Pump flow rises as q0 + dq (1 - e^(-t/2)) from the first scan on; the outlet hardly changes within a second.
    lead_s, lag_s = 0.95, 2.0
    extra_m3 = (70e-6 - OUTFLOW_M3_S) * (lead_s - lag_s * (1 - np.exp(-lead_s / lag_s)))
    assert bench.truth()["tank-1.level"] == pytest.approx(100 * (LEVEL_M + extra_m3 / 40e-4), abs=2e-3)
    assert bench.truth()["tank-2.level"] == pytest.approx(100 * LEVEL_M, abs=1e-6)


def test_stuck_actuator_stays_and_the_panel_does_not_know() -> None:
    """The driven tag shows the command, only the plant shows that nothing moves."""
    bench = Bench(row())
    bench.write(("tank-1.in_charge", True))
    bench.provoke("stuck tank-1.pump")
    bench.drive(1, ("tank-1.pump", 90.0))
    bench.run(0.5)
    assert bench.shows("tank-1.pump") == 90.0
    assert bench.truth()["tank-1.pump"] == pytest.approx(REST_PERCENT)


def test_cleared_actuator_follows_again() -> None:
    """From the next scan on."""
    bench = Bench(row())
    bench.write(("tank-1.in_charge", True))
    bench.provoke("stuck tank-1.pump")
    bench.drive(1, ("tank-1.pump", 90.0))
    bench.run(0.5)
    bench.provoke("clear tank-1.pump")
    bench.run(0.05)
    assert bench.truth()["tank-1.pump"] == 90.0


def test_frozen_transmitter_repeats_while_the_plant_moves() -> None:
    """And shows the plant again when the fault is over."""
    bench = Bench(row())
    bench.run(1.0)
    bench.provoke("freeze tank-1.level for 5 s")
    bench.provoke("set tank-2.consumer 20")
    before = bench.shows("tank-1.level")
    bench.run(4.0)
    assert bench.shows("tank-1.level") == before
    assert bench.truth()["tank-1.level"] < 100 * LEVEL_M - 1e-3
    bench.run(1.0)
    assert bench.shows("tank-1.level") == pytest.approx(bench.truth()["tank-1.level"])
    assert bench.said("faults")[-1] == "'freeze tank-1.level for 5 s' is over"


def test_dropout_shows_no_value_with_a_bad_status() -> None:
    """From the next scan on; the neighbours go on."""
    bench = Bench(row())
    bench.provoke("dropout tank-1.level")
    bench.run(0.05)
    samples = bench.simulation.read(bench.state, bench.now_ns)
    assert samples["tank-1.level"][:2] == (None, NO_COMMUNICATION)
    assert samples["tank-2.level"].status == GOOD


def test_measured_consumer_is_seen_by_its_transmitter() -> None:
    """A disturbance has a reading like any level."""
    bench = Bench(row())
    bench.provoke("set tank-3.consumer 8")
    bench.run(0.1)
    assert bench.shows("tank-3.consumer") == pytest.approx(8.0)
    bench.provoke("release tank-3.consumer")
    bench.run(0.1)
    assert bench.shows("tank-3.consumer") == 0.0


def test_unmeasured_consumer_draws_but_has_no_tag() -> None:
    """The level falls and nobody says why."""
    bench = Bench(row())
    bench.provoke("set tank-2.consumer 10")
    bench.run(5.0)
    assert bench.truth()["tank-2.level"] < 100 * LEVEL_M - 0.5
    with pytest.raises(KeyError):
        bench.shows("tank-2.consumer")


def test_watchdog_trip_reaches_the_actuators() -> None:
    """Heartbeat gone: local action ramps the pumps down, level follows."""
    bench = Bench(row())
    bench.write(("panel.heartbeat", 1), ("tank-1.in_charge", True))
    bench.run(1.5 + 2.0)
    assert bench.shows("panel.tripped") is True
    assert bench.truth()["tank-1.pump"] == pytest.approx(REST_PERCENT - 20.0)
    assert any(text.startswith("tripped: heartbeat 1 unchanged for 1500 ms") for text in bench.said("panel"))


def test_reader_sees_a_trip_before_the_next_scan() -> None:
    """What the panel shows is of the reader's instant, not of the last scan."""
    bench = Bench(row())
    bench.write(("panel.heartbeat", 1), ("tank-1.in_charge", True))
    bench.run(1.45)
    assert bench.simulation.read(bench.state, round(1.499 * NS))["panel.tripped"].value is False
    assert bench.simulation.read(bench.state, round(1.5 * NS))["panel.tripped"].value is True


def test_timed_permit_comes_back_by_itself() -> None:
    """Off at once, on again after its time; sections wait to be taken."""
    bench = Bench(row())
    bench.write(("tank-1.in_charge", True))
    bench.provoke("permit off for 2 s")
    assert bench.shows("panel.permit") is False
    bench.run(1.95)
    assert bench.shows("panel.permit") is False
    bench.run(0.05)
    assert bench.shows("panel.permit") is True
    assert bench.shows("tank-1.in_charge") is False


def test_measured_signal_cannot_be_written() -> None:
    """It exists, so it is read-only and not unknown."""
    bench = Bench(row())
    assert bench.write(("tank-1.level", 5.0), ("tank-9.level", 5.0)) == (Outcome.READ_ONLY, Outcome.UNKNOWN)


def test_overflow_is_told_once() -> None:
    """A tank that runs over its rim is news when it begins, not at every scan."""
    bench = Bench(row(couplings=(), x0=(0.379, OUTFLOW_M3_S, LEVEL_M, OUTFLOW_M3_S, LEVEL_M, OUTFLOW_M3_S)))
    bench.write(("tank-1.in_charge", True))
    for period in range(1, 21):
        bench.drive(period, ("tank-1.pump", 100.0))
        bench.run(0.5)
    assert bench.state.plant.spilled_m3[0] > 0.0
    assert bench.said("plant") == ["tank-1 runs over its rim"]


def test_turbulent_tube_is_told() -> None:
    """Where the laminar law ends, the plant says that it computes beyond it."""
    bench = Bench(row(x0=(0.35, OUTFLOW_M3_S, LEVEL_M, OUTFLOW_M3_S, LEVEL_M, OUTFLOW_M3_S)))
    bench.run(0.1)
    assert bench.said("plant") == ["the flow between tank-1 and tank-2 left the range of its law"]


@pytest.mark.parametrize(
    ("line", "says"),
    [
        ("freeze tank-1.levl", r"'tank-1\.levl' is no signal of this plant.*nearest: 'tank-1\.level'"),
        ("stuck tank-1.level", r"'tank-1\.level' has no actuator.*nearest: 'tank-1"),
        ("bias tank-2.consumer 1", r"'tank-2\.consumer' has no transmitter"),
        ("set tank-1.pump 1", r"'tank-1\.pump' has no consumer"),
    ],
)
def test_fault_that_does_not_fit_the_plant(line: str, says: str) -> None:
    """Names what the signal lacks and the nearest one that has it."""
    with pytest.raises(FaultError, match=says):
        Bench(row()).provoke(line)


def test_plant_without_panel_passes_values_on() -> None:
    """Each value is taken at once, clamped to its span; there is no permit to give."""
    bench = Bench(row(watchdog_s=None, window_s=None))
    outcomes = bench.write(("tank-1.pump", 120.0), ("tank-2.pump", 30.0), ("panel.period", 1))
    assert outcomes == (Outcome.TAKEN, Outcome.TAKEN, Outcome.UNKNOWN)
    bench.run(60.0)
    assert bench.truth()["tank-1.pump"] == 100.0
    assert bench.truth()["tank-2.pump"] == 30.0
    with pytest.raises(FaultError, match="this plant has no panel"):
        bench.provoke("permit off")
