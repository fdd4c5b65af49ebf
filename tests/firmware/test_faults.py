"""What must still hold when two things go wrong at once, when a run is long, or when memory fails."""

from __future__ import annotations

import binascii
import struct

import pytest
from benches import FOREVER, RIG, Bench, records
from i30 import I30
from test_board import journal

from lodeboard import limits, program, states, trips
from lodeboard.cycles import Cycles
from lodeboard.rings import CELLS, Journal
from lodeboard.wire import messages
from lodestroke.rig import limits_values

V = limits_values(RIG)
TRIP_FIELDS = next(fields for code, _, _, fields in messages.UP if code == 0x92)


def running(changes: dict[str, int] | None = None, rows=FOREVER) -> Bench:
    bench = Bench(rows, changes=changes)
    bench.go()
    bench.ticks(100)
    assert bench.hal.last_drive[2] == 1
    return bench


def record(bench: Bench) -> dict[str, int]:
    """The trip record that is latched."""
    return dict(zip(TRIP_FIELDS, struct.unpack("<IHBBBIiiB", bench.board.trip_body), strict=True))


def heat(bench: Bench) -> None:
    bench.board.thermal_a.winding_mcq = (V["hot_hard_mc"] + 2000) << 10
    bench.board.thermal_a.winding_mc = V["hot_hard_mc"] + 2000


def open_cutout(bench: Bench) -> None:
    bench.hal.input_bits |= 2


def spoil_limits(bench: Bench) -> None:
    bench.board.limits.at = limits.INDEX["tail_ticks"]
    bench.board.limits.values[bench.board.limits.at] ^= 1 << 10


def spoil_program(bench: Bench) -> None:
    bench.board.program.a_ma[bench.board.program.at] ^= 1 << 4


def come_late(bench: Bench) -> None:
    bench.hal.idle(V["late_us"])


AT_ONCE = [(open_cutout, trips.CUTOUT_OPEN), (spoil_limits, trips.LIMITS_CORRUPT),
           (spoil_program, trips.PROGRAM_CORRUPT), (come_late, trips.TICK_LATE)]


@pytest.mark.parametrize(("fault", "code"), AT_ONCE)
def test_category_0_cause_drops_enable_at_once_though_a_hot_coil_asks_for_a_ramp(fault, code):
    bench = running()
    heat(bench)
    fault(bench)
    bench.ticks(1)
    assert bench.board.trip_code == code
    assert bench.hal.last_drive == (0, 0, 0)


@pytest.mark.parametrize(("fault", "code"), AT_ONCE)
def test_category_0_cause_cuts_the_ramp_of_a_coil_that_stays_hot(fault, code):
    bench = running({"ramp_ma": 1})
    heat(bench)
    bench.ticks(3)
    assert bench.board.trip_code == trips.COIL_HOT
    assert bench.hal.last_drive[2] == 1
    fault(bench)
    bench.ticks(1)
    assert bench.hal.last_drive == (0, 0, 0)
    assert bench.board.trip_code == trips.COIL_HOT


def test_silent_host_is_reported_in_milliseconds_whatever_the_tick():
    bench = running({"silence_ms": 40, "tick_us": 4000})
    while bench.state == "running":
        bench.wiggle()
        bench.loop.step()
    assert record(bench)["value"] == record(bench)["limit"] == 40


@pytest.mark.parametrize("name", ["outlet_reverse_hard_pa", "chamber_low_hard_pa", "target_max_ma"])
def test_limit_in_force_that_loosens_by_itself_is_found_within_a_lap(name):
    bench = running()
    at = limits.INDEX[name]
    bench.board.limits.active[at] += -(1 << 12) if at in limits.LOWER_BOUNDS else 1 << 12
    bench.ticks(limits.N_FIELDS)
    assert bench.board.trip_code == trips.LIMITS_CORRUPT
    assert record(bench)["value"] == at


def test_nested_step_limit_never_loosens_the_one_around_it():
    high = limits.INDEX["outlet_high_hard_pa"]
    rows = [(program.LIMIT, high, 0, 0, 0, 1500), (program.LIMIT, high, 0, 0, 0, 2000),
            (program.SEG, 0, 0, 0, 0, 30), (program.END, 0, 2, 0, 0, 0)]
    bench = Bench(rows)
    bench.go()
    bench.ticks(10)
    assert bench.board.limits.active[high] == 1500


def test_account_of_a_day_long_cycle_stays_small_and_its_mean_exact():
    cycles = Cycles(Journal())
    cycles.start(0)
    cycles.begin(0)
    total = 0
    pressures = [101_325 + 17 * k for k in range(-40, 41)]
    for _ in range(300):
        for chamber in pressures:
            cycles.step(I30(chamber), I30(-chamber), I30(0), I30(0), I30(900), False)
            total += chamber
    n = 300 * len(pressures)
    cycles.close(2200, 1)
    form, fields = next((f, names) for code, _, f, names in messages.UP if code == 0x90)
    body = dict(zip(fields, struct.unpack_from(form, cycles.journal.rows, 64 + 2), strict=True))
    assert body["chamber_mean_pa"] == total // n
    assert body["outlet_mean_pa"] == -total // n
    assert body["duration_ticks"] == n


def test_a_run_that_lost_cycles_says_so_before_its_end_entry():
    rows = [(program.LOOP, 0, 0, 0, 0, 100), (program.CYCLE, 0, 0, 0, 0, 0),
            (program.SEG, 0, 1, 500, 0, 5), (program.SEG, 0, 1, 0, 0, 5),
            (program.NEXT, 0, 0, 0, 0, 0), (program.CLOSE, 0, 0, 0, 0, 0),
            (program.END, 0, 2, 0, 0, 0)]
    bench = Bench(rows)
    bench.go()
    bench.ticks(1300)
    entries = journal(bench)
    assert [code for code, _ in entries[-2:]] == [0x94, 0x93]
    kept = [fields["cycle"] for code, fields in entries if code == 0x90]
    gap = entries[-2][1]
    assert kept + list(range(gap["first_cycle"], gap["last_cycle"] + 1)) == list(range(1, 101))


def test_arming_waits_for_the_host_to_save_before_entries_could_be_overwritten():
    bench = Bench()
    board = bench.board
    refused = 0
    for _ in range(2 * CELLS):
        result = bench.arm()
        if result == messages.BUSY:
            refused += 1
            board.journal.keep_until(board.journal.newest)
            continue
        assert result == messages.OK
        assert board.go(5, 0, 0) == 0
        bench.hal.input_bits = 2
        bench.ticks(300)
        bench.hal.input_bits = 0
        assert board.journal.newest - board.journal.saved <= CELLS
        assert board.clear(board.trip_code, board.trip_serial) == 0
        bench.ticks(1)
    assert refused


def test_time_that_arming_itself_takes_is_no_late_tick():
    bench = Bench()
    hal = bench.hal

    def slow_guards() -> bool:
        hal.idle(2 * V["late_us"])           # a deadman is watched coming round; garbage is collected
        return True

    hal.start_guards = slow_guards
    assert bench.arm() == 0
    bench.ticks(5)
    assert bench.state == "armed"


def test_resume_rises_gently_to_where_the_program_stood():
    bench = running()
    bench.board.simple("pause")
    bench.ticks(100)
    assert bench.board.tick.target_a_ma == 0
    bench.board.simple("resume")
    targets = []
    for _ in range(300):
        bench.ticks(1)
        targets.append(bench.board.tick.target_a_ma)
    assert targets[0] <= 1000 * V["fold_rise_q8"] // 256 + 1
    assert targets == sorted(targets)
    assert targets[-1] == 1000


def test_go_behind_its_own_last_cycle_is_refused():
    bench = Bench()
    assert bench.arm() == 0
    assert bench.board.go(5, 20, 20) == messages.OUT_OF_BOUNDS
    assert bench.state == "armed"
    assert bench.board.go(5, 20, 21) == messages.OK


@pytest.mark.parametrize(("name", "value"), [
    ("tick_us", 0), ("tick_us", 10_000_000), ("ramp_ma", 0), ("chamber_shift", -1),
    ("outlet_reverse_hard_pa", 1 << 30),
])
def test_limits_that_no_board_could_run_on_are_not_sealed(name, value):
    bench = Bench()
    assert bench.arm() == 0
    assert bench.board.simple("disarm") == 0
    data = struct.pack(f"<{limits.N_FIELDS}i", *(value if field == name else V[field]
                                                for field in limits.FIELDS))
    store = bench.board.limits
    for at in range(0, len(data), 32):
        assert store.blob.put(at, data[at : at + 32], len(data[at : at + 32]))
    assert not store.seal(len(data), binascii.crc32(data), bench.fingerprint)
    assert bench.arm() == messages.NO_LIMITS
    bench.ticks(5)                             # what was in force before still converts
    assert bench.state == "safe"


_SEG = (program.SEG, 0, 0, 100, 0, 5)
_LOOP = (program.LOOP, 0, 0, 0, 0, 3)
_NEXT = (program.NEXT, 0, 0, 0, 0, 0)
_END = (program.END, 0, 0, 0, 0, 0)


@pytest.mark.parametrize("rows", [
    [_LOOP, _SEG, _END],                                    # no NEXT
    [_SEG, _NEXT, _END],                                    # no LOOP
    [_SEG, _LOOP, _NEXT, _END],                             # a turn that takes no time
    [_LOOP, _LOOP, _NEXT, _SEG, _NEXT, _END],
    [_LOOP] * 7 + [_SEG] + [_NEXT] * 7 + [_END],            # too deep
    [(program.LIMIT, limits.INDEX["tick_us"], 0, 0, 0, 5), _SEG, _END],
    [(program.LIMIT, limits.INDEX["target_max_ma"], 0, 0, 0, -5), _SEG, _END],
])
def test_program_that_the_sequencer_could_not_run_is_not_sealed(rows):
    bench = Bench()
    data = records(rows)
    bench.board.program.blob.put(0, data, len(data))
    assert not bench.board.program.seal(len(data), binascii.crc32(data), bench.fingerprint)


def two_coils(**more: int) -> dict[str, int]:
    """The rig's limits with a second coil and its sensor, like the first."""
    fields = ("present", "gain", "shift", "offset", "low_counts", "high_counts")
    return {f"coil_b_{field}": V[f"coil_a_{field}"] for field in fields} | more


BOTH = [(program.SEG, 0, 1, 0, 1000, 50), (program.SEG, 0, 1, 0, 1000, 400_000),
        (program.END, 0, 2, 0, 0, 0)]


def follow_b(bench: Bench, n: int) -> None:
    for _ in range(n):
        bench.board.heard()
        bench.wiggle()
        bench.see(coil_b=bench.board.tick.target_b_ma)
        bench.loop.step()


def two_coil_bench(**more: int) -> Bench:
    bench = Bench(BOTH, changes=two_coils(**more))
    bench.see(coil_b=0)
    bench.go()
    follow_b(bench, 100)
    assert bench.state == "running"
    return bench


def test_second_coil_that_gets_hot_trips_by_its_own_estimate():
    bench = two_coil_bench(hot_hard_mc=V["ambient_mc"] + 3000, hot_soft_mc=V["ambient_mc"] + 2900)
    follow_b(bench, 20_000)
    assert bench.board.trip_code == trips.COIL_HOT
    assert record(bench)["channel"] == limits.COIL_B


def test_second_coil_that_opens_trips():
    bench = two_coil_bench()
    bench.see(coil_b=0)
    bench.ticks(V["coil_open_ticks"])
    assert bench.board.trip_code == trips.COIL_OPEN
    assert record(bench)["channel"] == limits.COIL_B


def test_target_for_a_coil_without_a_sensor_trips_as_an_open_coil():
    bench = Bench(BOTH)
    bench.go()
    bench.ticks(60 + V["coil_open_ticks"])
    assert bench.board.trip_code == trips.COIL_OPEN
    assert bench.board.state == states.TRIPPED


def test_coil_that_opens_under_negative_current_trips():
    rows = [(program.SEG, 0, 1, -1000, 0, 50), (program.SEG, 0, 1, -1000, 0, 400_000),
            (program.END, 0, 2, 0, 0, 0)]
    bench = running({"duty_min_q15": -V["duty_max_q15"]}, rows)
    for _ in range(V["coil_open_ticks"]):
        bench.board.heard()
        bench.wiggle()
        bench.see(coil_a=0)
        bench.loop.step()
    assert bench.board.trip_code == trips.COIL_OPEN


@pytest.mark.parametrize("name", ["limits", "program"])
def test_a_byte_put_after_sealing_breaks_the_seal(name):
    bench = Bench()
    blob = getattr(bench.board, name).blob
    assert blob.put(0, bytes(blob.data[:1]), 1)
    assert bench.arm() == {"limits": messages.NO_LIMITS, "program": messages.NO_PROGRAM}[name]


def test_bytes_that_do_not_fit_are_refused_and_store_nothing():
    blob = limits.Blob(40)
    assert blob.put(8, b"\x11" * 32, 32)
    before = bytes(blob.data)
    assert not blob.put(9, b"\x22" * 32, 32)           # beyond the end
    assert not blob.put(0, b"\x22" * 8, 9)             # more than was sent
    assert bytes(blob.data) == before


def test_worst_gap_is_that_of_this_run():
    bench = Bench()
    bench.ticks(5)

    def slow_guards() -> bool:
        bench.hal.idle(20_000)                         # while arming: nobody's concern
        return True

    bench.hal.start_guards = slow_guards
    bench.go()
    bench.ticks(20)
    bench.hal.idle(4000)
    bench.ticks(20)
    assert bench.board.worst_gap_us == 5000
