"""Every interlock fires at its limit, not one unit below, and drops enable in that very tick."""

from __future__ import annotations

import math

import pytest
from benches import RIG, Bench

from lodeboard import limits, states, trips
from lodeboard.interlocks import RULES, Interlocks
from lodeboard.sensors import Sensors
from lodestroke.rig import limits_values

V = limits_values(RIG)


def judge(values: dict[str, int], winding_mc: int = 22000, target_ma: int = 0):
    """The interlocks' verdict on sensor values, Pa and mA."""
    store = limits.Limits()
    for name, value in V.items():
        store.values[limits.INDEX[name]] = value
    store.relax()
    sensors = Sensors(store)
    sensors.load()
    for channel in (limits.CHAMBER, limits.OUTLET, limits.COIL_A):
        sensors.values[channel] = 0
    for name, value in values.items():
        sensors.values[limits.CHANNELS.index(name)] = value
    locks = Interlocks(store, sensors)
    return locks.judge(winding_mc, 0, target_ma, 0) or locks.slow, locks


# code, sensor values at `level` above (or below) what fires, further arguments; level in the limit's unit
CASES = [
    (trips.OUTLET_REVERSE, V["outlet_reverse_hard_pa"],
     lambda x: {"outlet": x - 1000, "chamber": -1000}, 1),
    (trips.INLET_REVERSE, V["inlet_reverse_hard_pa"],
     lambda x: {"chamber": x, "outlet": 0}, 1),
    (trips.CHAMBER_HIGH, V["chamber_high_hard_pa"],
     lambda x: {"chamber": x, "inlet": 1000, "outlet": 0}, 1),
    (trips.CHAMBER_LOW, V["chamber_low_hard_pa"],
     lambda x: {"chamber": x, "outlet": -1500}, -1),
    (trips.OUTLET_HIGH, V["outlet_high_hard_pa"],
     lambda x: {"outlet": x, "chamber": 1000}, 1),
    (trips.OUTLET_LOW, V["outlet_low_hard_pa"], lambda x: {"outlet": x, "chamber": 0}, -1),
    (trips.OVER_CURRENT, V["over_current_ma"], lambda x: {"coil_a": x, "outlet": 0}, 1),
    (trips.OVER_CURRENT, V["over_current_ma"], lambda x: {"coil_a": -x, "outlet": 0}, 1),
    (trips.OVER_CURRENT, V["over_current_ma"], lambda x: {"coil_b": x, "outlet": 0}, 1),
    (trips.OVER_CURRENT, V["over_current_ma"], lambda x: {"coil_b": -x, "outlet": 0}, 1),
]


@pytest.mark.parametrize(("code", "level", "make", "sign"), CASES)
def test_interlock_fires_at_its_limit_and_not_one_unit_below(code, level, make, sign):
    fired, locks = judge(make(level))
    assert fired == code
    assert locks.limit == level
    assert judge(make(level - sign))[0] == 0


def test_coil_temperature_fires_at_its_limit_and_not_one_millidegree_below():
    hard = V["hot_hard_mc"]
    assert judge({"outlet": 0}, hard)[0] == trips.COIL_HOT
    assert judge({"outlet": 0}, hard - 1)[0] == 0


@pytest.mark.parametrize(("field", "make", "sign"), [
    ("outlet_reverse_soft_pa", lambda x: {"outlet": x - 900, "chamber": -900}, 1),
    ("inlet_reverse_soft_pa", lambda x: {"chamber": x - 900, "inlet": -900, "outlet": 0}, 1),
    ("chamber_high_soft_pa", lambda x: {"chamber": x, "inlet": 1000, "outlet": 0}, 1),
    ("chamber_low_soft_pa", lambda x: {"chamber": x, "outlet": -1000}, -1),
    ("outlet_high_soft_pa", lambda x: {"outlet": x, "chamber": 1000}, 1),
])
def test_soft_level_holds_back_at_its_limit_and_not_one_unit_below(field, make, sign):
    assert judge(make(V[field]))[1].soft is True
    assert judge(make(V[field]))[0] == 0
    assert judge(make(V[field] - sign))[1].soft is False


@pytest.mark.parametrize("which", [0, 1])
def test_either_winding_holds_back_and_trips_at_its_own_temperature(which):
    def at(winding_mc: int) -> Interlocks:
        _, locks = judge({"outlet": 0})
        both = [22000, 22000]
        both[which] = winding_mc
        assert locks.judge(*both, 0, 0) == 0
        return locks

    assert at(V["hot_soft_mc"] - 1).soft is False
    assert at(V["hot_soft_mc"]).soft is True
    assert at(V["hot_hard_mc"] - 1).slow == 0
    hot = at(V["hot_hard_mc"])
    assert (hot.slow, hot.channel) == (trips.COIL_HOT, (limits.COIL_A, limits.COIL_B)[which])


@pytest.mark.parametrize("sign", [1, -1])
@pytest.mark.parametrize("coil", ["coil_a", "coil_b"])
def test_coil_counts_as_open_below_half_its_target_and_from_its_least_target_on(coil, sign):
    def counted(target_ma: int, current_ma: int) -> int:
        _, locks = judge({"outlet": 0, coil: sign * current_ma})
        targets = (sign * target_ma, 0) if coil == "coil_a" else (0, sign * target_ma)
        locks.judge(22000, 22000, *targets)
        return locks.open_ticks_a + locks.open_ticks_b

    least = V["coil_open_ma"]
    assert counted(least, 0) == 1
    assert counted(least - 1, 0) == 0
    assert counted(1000, 499) == 1
    assert counted(1000, 500) == 0


def test_coil_open_needs_its_ticks():
    _, locks = judge({"outlet": 0}, target_ma=0)
    verdicts = [locks.judge(22000, 22000, 1000, 0) for _ in range(V["coil_open_ticks"])]
    assert verdicts[-1] == trips.COIL_OPEN
    assert set(verdicts[:-1]) == {0}


def test_every_rule_of_the_table_names_fields_that_exist_and_a_code_of_the_trips():
    for code, watches, soft, hard in RULES:
        assert code in trips.TABLE
        assert watches
        assert hard in limits.INDEX
        assert not soft or soft in limits.INDEX


def test_interlock_trips_an_armed_board_that_does_not_run_yet():
    bench = Bench()
    assert bench.arm() == 0
    bench.ticks(5)
    bench.see(outlet=1000, chamber=-1400)
    bench.ticks(1)
    assert bench.board.trip_code == trips.OUTLET_REVERSE
    assert bench.hal.last_drive == (0, 0, 0)


@pytest.mark.parametrize("values", [
    {"outlet": 1000, "chamber": -1400},
    {"chamber": 5000, "outlet": 5000},
])
def test_category_0_trip_drops_enable_in_the_tick_that_saw_it(values):
    bench = Bench()
    bench.go()
    bench.ticks(100)
    assert bench.hal.last_drive[2] == 1
    bench.see(**values)
    bench.loop.step()
    assert bench.hal.last_drive == (0, 0, 0)
    assert bench.state == "tripped"


def test_over_current_drops_enable_in_the_tick_that_saw_it():
    bench = Bench()
    bench.go()
    bench.ticks(100)
    bench.see(coil_a=V["over_current_ma"])
    bench.loop.step()
    assert bench.hal.last_drive == (0, 0, 0)
    assert bench.board.trip_code == trips.OVER_CURRENT


def test_sensor_out_of_range_trips_after_its_ticks_and_the_last_good_value_stands_in():
    bench = Bench()
    bench.go()
    bench.ticks(100)
    good = bench.board.sensors.values[limits.CHAMBER]
    for _ in range(V["sensor_bad_ticks"] - 1):
        bench.board.heard()
        bench.wiggle()
        bench.hal.counts[limits.CHAMBER] = 0
        bench.loop.step()
        assert bench.state == "running"
        assert abs(bench.board.sensors.values[limits.CHAMBER] - good) <= 3
    bench.hal.counts[limits.CHAMBER] = 0
    bench.loop.step()
    assert bench.board.trip_code == trips.SENSOR_RANGE
    assert bench.hal.last_drive == (0, 0, 0)


def test_stuck_sensor_trips_after_its_ticks():
    bench = Bench()
    bench.go()
    bench.ticks(100)
    for _ in range(V["outlet_stuck_ticks"] + 1):
        bench.board.heard()
        frozen = bench.hal.counts[limits.OUTLET]
        bench.wiggle()
        bench.hal.counts[limits.OUTLET] = frozen
        bench.loop.step()
    assert bench.board.trip_code == trips.SENSOR_STUCK
    assert bench.board.trip_body[7] == limits.OUTLET


def test_jumping_sensor_trips_at_its_bound():
    bench = Bench(changes={"chamber_jump": 500})
    bench.go()
    bench.ticks(10)
    bench.see(chamber=490)
    bench.ticks(1)
    assert bench.state == "running"
    bench.see(chamber=1000)
    bench.loop.step()
    assert bench.board.trip_code == trips.SENSOR_JUMP


def test_silent_host_trips_with_a_ramp_and_enable_drops_at_its_end():
    bench = Bench(changes={"silence_ms": 40})
    bench.go()
    bench.ticks(200)
    steps = 0
    while bench.hal.last_drive[2]:
        bench.wiggle()
        bench.loop.step()
        steps += 1
        assert steps < 200
    assert bench.board.trip_code == trips.HOST_SILENT
    # the last tick with a host counts as the first silent one; the ramp starts in the tick that trips
    assert steps == 39 + math.ceil(1000 / V["ramp_ma"]) - 1


@pytest.mark.parametrize(("bits", "code"), [(1, trips.STOP_INPUT), (2, trips.CUTOUT_OPEN)])
def test_inputs_trip(bits, code):
    bench = Bench()
    bench.go()
    bench.ticks(100)
    bench.hal.input_bits = bits
    bench.ticks(1)
    assert bench.board.trip_code == code
    assert bench.hal.last_drive[2] == (1 if trips.TABLE[code][1] == 1 else 0)


def test_late_tick_trips_at_its_limit_and_not_a_microsecond_below():
    for late_us, state in ((V["late_us"] - 1, "running"), (V["late_us"], "tripped")):
        bench = Bench()
        bench.go()
        bench.ticks(20)
        bench.hal.idle(late_us)
        bench.ticks(1)
        assert bench.state == state
        assert bench.board.late_ticks >= late_us // 1000


@pytest.mark.parametrize("store", ["limits", "program"])
def test_corruption_is_found_within_a_lap(store):
    bench = Bench()
    bench.go()
    bench.ticks(50)
    if store == "limits":
        bench.board.limits.values[limits.INDEX["outlet_reverse_hard_pa"]] ^= 1 << 20
        code, lap = trips.LIMITS_CORRUPT, limits.N_FIELDS
    else:
        bench.board.program.a_ma[1] ^= 1 << 4
        code, lap = trips.PROGRAM_CORRUPT, bench.board.program.count
    bench.ticks(lap)
    assert bench.board.trip_code == code


def test_first_cause_stays_when_others_follow():
    bench = Bench()
    bench.go()
    bench.ticks(100)
    bench.see(outlet=2600, chamber=1500)
    bench.loop.step()
    first = bytes(bench.board.trip_body)
    bench.see(chamber=-4000)
    bench.ticks(5)
    assert bench.board.trip_code == trips.OUTLET_HIGH
    assert bytes(bench.board.trip_body) == first


def test_category_0_condition_cuts_a_ramp_short_and_the_first_cause_stays():
    bench = Bench(changes={"ramp_ma": 1})
    bench.go()
    bench.ticks(200)
    bench.hal.input_bits = 1
    bench.ticks(1)
    assert bench.hal.last_drive[2] == 1
    bench.hal.input_bits = 0
    bench.see(outlet=1000, chamber=-1400)
    bench.loop.step()
    assert bench.hal.last_drive == (0, 0, 0)
    assert bench.board.trip_code == trips.STOP_INPUT


def test_soft_level_folds_the_target_back_no_further_than_its_floor_and_lets_it_rise_again():
    bench = Bench()
    bench.go()
    bench.ticks(100)
    assert bench.board.tick.target_a_ma == 1000
    bench.see(outlet=1000, chamber=-900)
    bench.ticks(60)
    assert bench.board.tick.target_a_ma == (1000 * V["fold_min_q8"]) >> 8
    assert bench.state == "running"
    bench.see(outlet=400, chamber=0)
    bench.ticks(400)
    assert bench.board.tick.target_a_ma == 1000


def test_states_energised_are_those_in_which_a_program_may_drive():
    assert states.RUNNING in states.ENERGISED
    assert states.SAFE not in states.ENERGISED
    assert states.TRIPPED not in states.ENERGISED
