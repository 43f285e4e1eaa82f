"""The plant in process, on virtual time."""

from __future__ import annotations

import logging

import pytest

from gateway.clock import VirtualClock
from sim_plant.direct import DirectPlant
from sim_plant.faults import FaultError
from sim_plant.status import GOOD, INVALID_STATE, INVALID_TIMESTAMP, NOT_WRITABLE, SEQUENCE_NUMBER_INVALID
from tests.sim_plant.rows import PROFILE, REST_PERCENT, TRANSMITTER, row

SECOND_NS = 1_000_000_000


@pytest.fixture
def clock() -> VirtualClock:
    """A clock whose two origins are far apart."""
    return VirtualClock(seed=11)


def panel_clock_ms(plant: DirectPlant) -> int:
    """The panel's clock as control reads it."""
    value = plant.read_all()["panel.clock"].value
    assert isinstance(value, int)
    return value


def test_reads_every_tag_and_only_those(clock: VirtualClock) -> None:
    """The same tags as on any wire."""
    plant = DirectPlant(row(), clock)
    assert set(plant.read_all()) == {tag.tag for tag in plant.tags}


def test_late_caller_finds_the_plant_a_punctual_one_would(clock: VirtualClock) -> None:
    """Scans are counted by the clock, not by calls."""
    punctual, late = DirectPlant(row(TRANSMITTER, PROFILE), clock), DirectPlant(row(TRANSMITTER, PROFILE), clock)
    for _ in range(100):
        clock.advance_to(clock.monotonic_ns() + SECOND_NS // 3)
        punctual.catch_up()
    assert late.read_all() == punctual.read_all()


def test_readings_carry_the_wall_time_of_their_scan(clock: VirtualClock) -> None:
    """The panel's values that of the read; 20 ms after a scan they differ by 20 ms."""
    plant = DirectPlant(row(), clock)
    clock.advance_to(clock.monotonic_ns() + SECOND_NS + 20_000_000)
    values = plant.read_all()
    assert values["tank-1.level"].source_time_ns == clock.wall_ns() - 20_000_000
    assert values["panel.clock"].source_time_ns == clock.wall_ns()


def test_panel_clock_counts_milliseconds_of_the_injected_clock(clock: VirtualClock) -> None:
    """Between scans too, and untouched by a stepped wall clock."""
    plant = DirectPlant(row(), clock)
    clock.advance_to(clock.monotonic_ns() + 1_234_567_890)
    clock.step_wall(-3600 * SECOND_NS)
    assert panel_clock_ms(plant) == 1234


def test_write_answers_with_a_status_for_each_value(clock: VirtualClock) -> None:
    """In the order of the list."""
    plant = DirectPlant(row(), clock)
    assert plant.write([("tank-1.level", 1.0), ("tank-1.in_charge", True), ("tank-1.pump", 50.0)]) == (
        NOT_WRITABLE,
        GOOD,
        INVALID_STATE,
    )


def test_request_delayed_past_its_expiry_is_refused(clock: VirtualClock) -> None:
    """As when a stopped process wakes up with a full socket: the clock has moved, no scan has run."""
    plant = DirectPlant(row(), clock)
    plant.write([("panel.heartbeat", 1), ("tank-1.in_charge", True)])
    request = [("tank-1.pump", 90.0), ("panel.expires", panel_clock_ms(plant) + 300), ("panel.period", 1)]
    clock.spend(301_000_000)
    assert plant.write(request) == (INVALID_TIMESTAMP, GOOD, INVALID_TIMESTAMP)
    assert plant.read_all()["tank-1.pump"].value == pytest.approx(REST_PERCENT)


def test_replayed_request_is_refused(clock: VirtualClock) -> None:
    """Sent twice, taken once."""
    plant = DirectPlant(row(), clock)
    plant.write([("panel.heartbeat", 1), ("tank-1.in_charge", True)])
    request = [("tank-1.pump", 90.0), ("panel.expires", panel_clock_ms(plant) + 300), ("panel.period", 1)]
    assert plant.write(request) == (GOOD, GOOD, GOOD)
    assert plant.write(request) == (SEQUENCE_NUMBER_INVALID, GOOD, SEQUENCE_NUMBER_INVALID)


def test_long_gap_is_not_integrated_but_the_panel_notices(clock: VirtualClock) -> None:
    """A bench that slept for an hour wakes with a tripped panel and the levels it had."""
    plant = DirectPlant(row(), clock, longest_gap_s=10.0)
    plant.write([("panel.heartbeat", 1), ("tank-1.in_charge", True)])
    clock.spend(3600 * SECOND_NS)
    assert plant.catch_up() == 1
    assert plant.read_all()["panel.tripped"].value is True
    assert plant.truth()["tank-1.level"] == pytest.approx(20.0, abs=1e-6)
    assert plant.next_scan_ns() > clock.monotonic_ns()


def test_gap_up_to_the_limit_is_integrated(clock: VirtualClock) -> None:
    """Scan by scan."""
    plant = DirectPlant(row(), clock, longest_gap_s=10.0)
    clock.spend(10 * SECOND_NS)
    assert plant.catch_up() == 200


def test_next_scan_is_an_absolute_instant(clock: VirtualClock) -> None:
    """Origin plus whole steps, however late the last one was done."""
    plant = DirectPlant(row(), clock)
    origin_ns = clock.monotonic_ns()
    clock.spend(137_000_000)
    plant.catch_up()
    assert plant.next_scan_ns() == origin_ns + 150_000_000


def test_provoke_answers_with_what_it_did(clock: VirtualClock) -> None:
    """And a wrong line changes nothing."""
    plant = DirectPlant(row(), clock)
    assert plant.provoke("bias tank-1.level 2") == "provoked: 'bias tank-1.level 2'"
    with pytest.raises(FaultError):
        plant.provoke("bias tank-1.level")
    clock.advance_to(clock.monotonic_ns() + 50_000_000)
    assert plant.read_all()["tank-1.level"].value == pytest.approx(22.0)


def test_spilled_volume_is_told_by_section(clock: VirtualClock) -> None:
    """Nothing spills at rest."""
    assert DirectPlant(row(), clock).spilled_m3() == {"tank-1": 0.0, "tank-2": 0.0, "tank-3": 0.0}


def test_log_tells_faults_permits_trips_and_refusals(clock: VirtualClock, caplog: pytest.LogCaptureFixture) -> None:
    """One sentence each; a refusal that repeats itself is told once, and so is its end."""
    caplog.set_level(logging.INFO, logger="sim_plant")
    plant = DirectPlant(row(), clock)
    plant.provoke("freeze tank-1.level")
    plant.provoke("permit off")
    for _ in range(3):
        plant.write([("panel.period", 1)])
    plant.provoke("permit on")
    plant.write([("panel.heartbeat", 1), ("tank-1.in_charge", True)])
    plant.write([("panel.expires", panel_clock_ms(plant)), ("panel.period", 2)])
    clock.advance_to(clock.monotonic_ns() + 2 * SECOND_NS)
    plant.catch_up()
    assert [(record.name, record.getMessage()) for record in caplog.records] == [
        ("sim_plant.faults", "provoked: 'freeze tank-1.level'"),
        ("sim_plant.faults", "provoked: 'permit off'"),
        ("sim_plant.panel", "permit off: all sections taken back to local action, sets are refused"),
        ("sim_plant.panel", "set 1 refused: permit is off"),
        ("sim_plant.faults", "provoked: 'permit on'"),
        ("sim_plant.panel", "permit on: control may take sections again"),
        ("sim_plant.panel", "tank-1 taken by control"),
        ("sim_plant.panel", "set 2 accepted, after 3 refused in a row"),
        (
            "sim_plant.panel",
            "tripped: heartbeat 1 unchanged for 1500 ms; all sections taken back, "
            "local action runs until control takes them again",
        ),
    ]
