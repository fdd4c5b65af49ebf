"""Counts to units, and what makes a channel implausible: at its bound, not one count or tick before."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from lodeboard import limits, trips
from lodeboard.interlocks import Interlocks
from lodeboard.sensors import Sensors

CHAMBER, SUPPLY = limits.CHAMBER, limits.SUPPLY


def sensors(**fields: int) -> Sensors:
    """A chamber sensor of two units a count from -1000 up, sound from 100 to 900 counts, and a supply."""
    store = limits.Limits()
    plain = {"chamber_present": 1, "chamber_gain": 512, "chamber_shift": 8, "chamber_offset": -1000,
             "chamber_low_counts": 100, "chamber_high_counts": 900, "sensor_bad_ticks": 3,
             "supply_offset": 24_000, "inlet_offset": -250}
    for name, value in (plain | fields).items():
        store.values[limits.INDEX[name]] = value
    made = Sensors(store)
    made.load()
    return made


def feed(made: Sensors, *counts: int) -> list[int]:
    """The verdict on each count in turn."""
    verdicts = []
    for count in counts:
        made.counts[CHAMBER] = count
        verdicts.append(made.convert())
    return verdicts


@given(st.integers(100, 900))
def test_counts_become_units_by_gain_shift_and_offset(count):
    made = sensors()
    assert feed(made, count) == [0]
    assert made.values[CHAMBER] == 2 * count - 1000


def test_absent_channel_stays_at_its_stated_value():
    made = sensors()
    made.counts[limits.INLET] = 777
    feed(made, 500)
    assert made.values[limits.INLET] == -250
    assert made.values[SUPPLY] == 24_000


@pytest.mark.parametrize(("good", "bad"), [(100, 99), (900, 901)])
def test_range_is_left_one_count_beyond_its_bound_for_as_many_ticks(good, bad):
    made = sensors()
    assert feed(made, good, good, good, good) == [0] * 4
    held = made.values[CHAMBER]
    assert feed(made, bad, bad) == [0, 0]
    assert made.any_bad()
    assert made.values[CHAMBER] == held
    assert feed(made, good, bad, bad) == [0, 0, 0]            # one good reading starts the count anew
    assert feed(made, bad) == [trips.SENSOR_RANGE]
    assert (made.channel, made.value, made.limit) == (CHAMBER, bad, good)


def test_stuck_counts_the_ticks_without_one_count_of_change():
    made = sensors(chamber_stuck_ticks=4)
    assert feed(made, 500, 500, 500, 500) == [0] * 4          # three ticks without change
    assert feed(made, 501, 501, 501, 501) == [0] * 4
    assert feed(made, 501) == [trips.SENSOR_STUCK]
    assert (made.channel, made.value, made.limit) == (CHAMBER, 501, 4)


@pytest.mark.parametrize("sign", [1, -1])
def test_jump_trips_at_its_bound_either_way_and_not_a_count_before(sign):
    made = sensors(chamber_jump=100)
    assert feed(made, 500, 500 + sign * 49) == [0, 0]         # 98 units
    assert feed(made, 500 - sign) == [trips.SENSOR_JUMP]      # 100 units
    assert (made.channel, made.value, made.limit) == (CHAMBER, 100, 100)


def test_first_reading_after_arming_is_no_jump_and_stillness_is_not_watched_unasked():
    made = sensors(chamber_jump=2)
    assert feed(made, 900) == [0]
    assert feed(sensors(), *[500] * 1000) == [0] * 1000


def test_first_of_two_implausible_channels_is_the_one_that_is_told():
    made = sensors(chamber_stuck_ticks=1, outlet_present=1, outlet_gain=256, outlet_shift=8,
                   outlet_low_counts=100, outlet_high_counts=900, sensor_bad_ticks=1)
    made.counts[limits.OUTLET] = 500
    assert feed(made, 500) == [0]
    made.counts[limits.OUTLET] = 0
    assert feed(made, 500) == [trips.SENSOR_STUCK]
    assert made.channel == CHAMBER


def test_low_supply_asks_for_a_ramp_at_its_bound_and_not_a_millivolt_above():
    made = sensors(supply_low_mv=20_000)
    store = made.limits
    for name in limits.FIELDS[limits.FIRST_STEP_LIMIT : limits.LAST_STEP_LIMIT + 1]:
        at = limits.INDEX[name]
        if name != "supply_low_mv":
            store.values[at] = -1_000_000 if at in limits.LOWER_BOUNDS else 1_000_000
    store.relax()
    locks = Interlocks(store, made)
    for supply_mv, slow in ((20_001, 0), (20_000, trips.SUPPLY_LOW), (0, trips.SUPPLY_LOW)):
        made.values[SUPPLY] = supply_mv
        assert locks.judge(0, 0, 0, 0) == 0
        assert locks.slow == slow
    assert (locks.channel, locks.limit) == (SUPPLY, 20_000)
