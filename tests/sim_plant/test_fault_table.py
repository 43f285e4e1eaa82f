"""Faults in force: what they do to readings, actuators and consumers, and when they end."""

from __future__ import annotations

from math import isnan

import pytest

from sim_plant.fault_table import FaultTable, Reading
from sim_plant.faults import Device, parse
from sim_plant.status import ENGINEERING_UNITS_EXCEEDED, GOOD, NO_COMMUNICATION

HELD = Reading(12.5, GOOD)


def after(*lines: str, time_s: float = 10.0) -> FaultTable:
    """The table after these lines."""
    table = FaultTable()
    for line in lines:
        table = table.impose(parse(line), time_s, HELD)
    return table


def test_without_fault_everything_is_as_it_is() -> None:
    """An empty table touches nothing."""
    assert FaultTable().reading("t.level", Reading(3.0)) == Reading(3.0)
    assert FaultTable().actuator("t.pump", 3.0) == 3.0
    assert FaultTable().consumer("t.consumer", 3.0) == 3.0


def test_bias_adds_and_keeps_the_status() -> None:
    """A wrong transmitter doesn't know it."""
    reading = after("bias t.level -2").reading("t.level", Reading(3.0, ENGINEERING_UNITS_EXCEEDED))
    assert reading == Reading(1.0, ENGINEERING_UNITS_EXCEEDED)


def test_freeze_repeats_what_was_shown() -> None:
    """With good status: nothing but its stillness betrays it."""
    assert after("freeze t.level").reading("t.level", Reading(3.0)) == HELD


def test_dropout_has_no_value_and_a_bad_status() -> None:
    """Nothing is left to be used by accident."""
    assert after("dropout t.level").reading("t.level", Reading(3.0)) == Reading(None, NO_COMMUNICATION)


def test_nan_has_good_status() -> None:
    """The nasty one: only a look at the number itself finds it."""
    value, status = after("nan t.level").reading("t.level", Reading(3.0))
    assert value is not None
    assert isnan(value)
    assert status == GOOD


def test_stuck_actuator_stays_whatever_it_is_told() -> None:
    """At the position it had."""
    assert after("stuck t.pump").actuator("t.pump", 80.0) == 12.5


def test_set_consumer_overrides_its_profile_until_released() -> None:
    """`set` and `release` belong together."""
    assert after("set t.consumer 8").consumer("t.consumer", 3.0) == 8.0
    assert after("set t.consumer 8", "release t.consumer").consumer("t.consumer", 3.0) == 3.0


def test_other_signals_are_left_alone() -> None:
    """A fault has one signal."""
    assert after("dropout t.level").reading("s.level", Reading(3.0)) == Reading(3.0)


def test_newest_fault_of_a_device_replaces_the_older() -> None:
    """One fault at a time."""
    assert after("dropout t.level", "bias t.level 1").reading("t.level", Reading(3.0)) == Reading(4.0)


def test_clear_ends_a_transmitters_fault() -> None:
    """And an actuator's."""
    table = after("dropout t.level", "stuck t.pump", "clear t.level", "clear t.pump")
    assert table == FaultTable()


def test_clear_all_leaves_consumers_and_permit() -> None:
    """Those aren't faults of instruments."""
    table = after("dropout t.level", "stuck t.pump", "set t.consumer 8", "permit off for 5 s", "clear all")
    assert {device for device, _ in table.active} == {Device.CONSUMER, Device.PERMIT}


def test_measured_consumer_can_be_set_and_lose_its_transmitter() -> None:
    """One signal, two devices."""
    table = after("set t.consumer 8", "dropout t.consumer", "release t.consumer")
    assert table.reading("t.consumer", Reading(3.0)).status == NO_COMMUNICATION
    assert table.consumer("t.consumer", 3.0) == 3.0


@pytest.mark.parametrize(("time_s", "over"), [(29.99, False), (30.0, True)])
def test_timed_fault_ends_by_itself(time_s: float, over: bool) -> None:
    """After its duration, counted from when it was given."""
    table, ended = after("freeze t.level for 20 s", time_s=10.0).at(time_s)
    assert (table == FaultTable()) is over
    assert [str(fault) for fault in ended] == (["freeze t.level for 20 s"] if over else [])


def test_fault_without_duration_stays() -> None:
    """Until it is cleared."""
    table = after("freeze t.level")
    assert table.at(1e9) == (table, ())
