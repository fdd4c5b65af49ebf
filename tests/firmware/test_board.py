"""States, commands, the latch and the end of a run, on a fake Hal."""

from __future__ import annotations

import struct

import pytest
from benches import Bench

from lodeboard import program, states, trips
from lodeboard.board import Board
from lodeboard.wire import messages

HOST_EVENTS = ("arm", "go", "pause", "resume", "stop", "disarm", "clear", "maintain")


def bench_in(state: str) -> Bench:
    """A board brought into a state by lawful commands."""
    bench = Bench()
    if state == "safe":
        return bench
    if state == "maintenance":
        assert bench.board.maintain() == 0
        return bench
    assert bench.arm() == 0
    if state == "armed":
        return bench
    assert bench.board.go(5, 0, 0) == 0
    bench.ticks(100)
    if state == "paused":
        assert bench.board.simple("pause") == 0
    elif state == "stopping":
        assert bench.board.simple("stop") == 0
    elif state == "tripped":
        bench.see(outlet=1000, chamber=-1400)
        bench.ticks(1)
    assert bench.state == state
    return bench


def ask(bench: Bench, event: str) -> int:
    """A host's command, as the service passes it on."""
    board = bench.board
    if event == "arm":
        return bench.arm()
    if event == "go":
        return board.go(9, 0, 0)
    if event == "clear":
        return board.clear(board.trip_code, board.trip_serial)
    if event == "maintain":
        return board.maintain()
    return board.simple(event)


@pytest.mark.parametrize("event", HOST_EVENTS)
@pytest.mark.parametrize(
    "state", ["safe", "armed", "running", "paused", "stopping", "tripped", "maintenance"])
def test_every_command_in_every_state_follows_the_table(state, event):
    bench = bench_in(state)
    table = states.NEXT[states.NAMES.index(state)]
    result = ask(bench, event)
    if event in table:
        assert result == messages.OK
        assert bench.board.state == table[event]
    else:
        assert result == messages.WRONG_STATE
        assert bench.state == state


@pytest.mark.parametrize("state", ["safe", "armed", "tripped", "maintenance"])
def test_enable_is_off_in_states_that_may_not_drive(state):
    bench = bench_in(state)
    bench.ticks(2)
    assert bench.hal.last_drive == (0, 0, 0)


def test_arming_needs_limits_program_fingerprint_inputs_and_plausible_sensors():
    assert Board(Bench().hal, b"x" * 8).state == states.BOOT
    empty = Board(Bench().hal, b"x" * 8)
    empty.boot()
    assert empty.arm(b"x" * 8, 0) == messages.NO_LIMITS
    bench = Bench()
    assert bench.board.arm(b"other..!", bench.board.program.blob.crc32) == messages.FINGERPRINT_DIFFERS
    assert bench.board.arm(bench.fingerprint, 1) == messages.NO_PROGRAM
    bench.hal.input_bits = 2
    assert bench.arm() == messages.CUTOUT_IS_OPEN
    bench.hal.input_bits = 1
    assert bench.arm() == messages.STOP_IS_ACTIVE
    bench.hal.input_bits = 0
    bench.hal.counts[0] = 0
    assert bench.arm() == messages.NOT_PLAUSIBLE
    bench.see(chamber=0)
    assert bench.arm() == messages.OK


def test_a_board_whose_journal_nobody_saves_is_not_armed_again():
    rows = [(program.SEG, 0, 0, 0, 0, 5), (program.END, 0, 1, 0, 0, 0)]
    bench = Bench(rows)
    ends = 0
    while bench.arm() == messages.OK:
        assert bench.board.go(5, 0, 0) == messages.OK
        bench.ticks(300)
        ends += 1
        assert ends < 100
    assert bench.arm() == messages.BUSY
    assert [fields["entry"] for _, fields in journal(bench)] == list(range(1, ends + 1))
    bench.board.journal.keep_until(ends)
    assert bench.arm() == messages.OK


def test_arming_without_a_deadman_is_refused_where_the_rig_needs_one():
    bench = Bench(changes={"deadman_needed": 1})
    bench.hal.capabilities = 0
    assert bench.arm() == messages.NO_DEADMAN
    bench.hal.capabilities = messages.CAN_DEADMAN
    assert bench.arm() == messages.OK


def test_a_changed_byte_in_memory_is_found_at_arming():
    bench = Bench()
    bench.board.limits.blob.data[40] ^= 1
    assert bench.arm() == messages.NO_LIMITS
    bench = Bench()
    bench.board.program.blob.data[3] ^= 1
    assert bench.arm() == messages.NO_PROGRAM


def test_a_trip_survives_a_reboot_and_is_cleared_only_by_its_name():
    bench = bench_in("tripped")
    bench.ticks(300)                     # tail over, latch written
    again = Bench(store=bench.hal.store)
    assert again.state == "tripped"
    assert again.board.trip_code == trips.OUTLET_REVERSE
    assert again.board.trip_body == bench.board.trip_body
    serial = again.board.trip_serial
    assert again.board.clear(trips.COIL_HOT, serial) == messages.OTHER_TRIP
    assert again.board.clear(trips.OUTLET_REVERSE, serial + 1) == messages.OTHER_TRIP
    assert again.state == "tripped"
    assert again.board.clear(trips.OUTLET_REVERSE, serial) == messages.OK
    again.ticks(1)
    third = Bench(store=again.hal.store)
    assert third.state == "safe"
    assert third.board.trip_serial == serial


def test_enable_is_off_from_the_first_thing_that_a_board_does():
    assert Bench().hal.drives[0] == (0, 0, 0)


def test_program_of_another_rig_is_not_armed():
    bench = Bench()
    bench.board.program.blob.fingerprint = b"another!"
    assert bench.arm() == messages.FINGERPRINT_DIFFERS


def test_heap_is_locked_from_arming_until_the_recorder_stands_still_and_the_latch_is_stored_once():
    bench = bench_in("running")
    saves = []
    bench.hal.save = lambda name, data: saves.append((name, bytes(data)))
    bench.hal.input_bits = 1                      # category 1: a ramp first
    for _ in range(266):                          # 16 ticks of ramp lie inside the tail of 250
        assert bench.board.locked == (bench.board.live or bench.hal.last_drive[2] == 1)
        assert bench.board.locked or len(saves) == 1
        bench.ticks(1)
    assert not bench.board.locked
    bench.ticks(20)
    assert [name for name, _ in saves] == ["trip"]


def test_each_trip_has_the_next_serial_and_a_trip_before_go_ends_no_run():
    bench = bench_in("armed")
    for serial in (1, 2):
        bench.hal.input_bits = 2
        bench.ticks(1)
        assert bench.board.trip_serial == serial
        bench.hal.input_bits = 0
        bench.ticks(1)
        assert bench.board.clear(trips.CUTOUT_OPEN, serial) == messages.OK
        bench.ticks(1)
        assert bench.arm() == messages.OK
    assert [code for code, _ in journal(bench)] == [0x92, 0x92]


@pytest.mark.parametrize("state", ["safe", "tripped", "maintenance"])
def test_port_is_given_back_on_ctrl_c_or_maintenance_when_no_current_flows(state):
    bench = bench_in(state)
    if state == "maintenance":
        assert bench.board.released
        return
    bench.board.interrupt()
    bench.loop.run()                              # the recorder's tail first, then back
    assert bench.hal.last_drive == (0, 0, 0)
    assert bench.state == state


def test_a_period_missed_is_counted_and_not_caught_up():
    bench = bench_in("running")
    for late_us, missed in ((999, 0), (1000, 1), (3500, 3)):
        before = bench.board.late_ticks
        ticks = bench.hal.feeds
        bench.hal.idle(late_us)
        bench.ticks(1)
        assert bench.board.late_ticks - before == missed
        assert bench.hal.feeds == ticks + 1
        bench.ticks(3)


def test_nothing_is_stored_while_current_may_flow():
    bench = bench_in("running")
    bench.see(outlet=1000, chamber=-1400)
    bench.ticks(1)
    assert bench.state == "tripped"
    assert "trip" not in bench.hal.store          # the recorder's tail still runs
    bench.ticks(260)
    assert "trip" in bench.hal.store


def test_a_watchdog_reset_comes_up_tripped():
    bench = Bench()
    hal = bench.hal
    hal.reset_was_watchdog = True
    board = Board(hal, b"bundle00")
    board.boot()
    assert board.state == states.TRIPPED
    assert board.trip_code == trips.WATCHDOG_RESET


def test_stop_ramps_down_before_enable_drops():
    bench = bench_in("running")
    bench.board.simple("stop")
    targets = []
    while bench.hal.last_drive[2]:
        bench.ticks(1)
        targets.append(bench.board.tick.target_a_ma)
    assert targets == sorted(targets, reverse=True)
    assert len(targets) == 17                     # 1000 mA at 60 mA a tick
    assert bench.state == "safe"


def test_program_end_is_journalled_once_with_the_cycles_done():
    rows = [(program.LOOP, 0, 0, 0, 0, 3), (program.CYCLE, 0, 0, 0, 0, 0),
            (program.SEG, 0, 1, 500, 0, 20), (program.SEG, 0, 1, 0, 0, 20),
            (program.NEXT, 0, 0, 0, 0, 0), (program.CLOSE, 0, 0, 0, 0, 0),
            (program.END, 0, 2, 0, 0, 0)]
    bench = Bench(rows)
    bench.go()
    bench.ticks(200)
    assert bench.state == "safe"
    entries = journal(bench)
    assert [code for code, _ in entries] == [0x90, 0x90, 0x90, 0x93]
    assert [fields["cycle"] for code, fields in entries if code == 0x90] == [1, 2, 3]
    assert [fields["duration_ticks"] for code, fields in entries if code == 0x90] == [40, 40, 40]
    assert entries[-1][1]["cycle"] == 3
    assert entries[-1][1]["why"] == messages.ENDED_FINISHED


def test_last_cycle_ends_a_program_when_that_cycle_is_complete():
    rows = [(program.LOOP, 0, 0, 0, 0, 50), (program.CYCLE, 0, 0, 0, 0, 0),
            (program.SEG, 0, 1, 500, 0, 20), (program.SEG, 0, 1, 0, 0, 20),
            (program.NEXT, 0, 0, 0, 0, 0), (program.END, 0, 2, 0, 0, 0)]
    bench = Bench(rows)
    assert bench.arm() == 0
    assert bench.board.go(5, 17, 20) == 0
    bench.ticks(400)
    cycles = [fields["cycle"] for code, fields in journal(bench) if code == 0x90]
    assert cycles == [18, 19, 20]
    assert bench.state == "safe"


def test_a_run_of_one_cycle_pumps_one_cycle():
    rows = [(program.LOOP, 0, 0, 0, 0, 50), (program.CYCLE, 0, 0, 0, 0, 0),
            (program.SEG, 0, 1, 500, 0, 20), (program.SEG, 0, 1, 0, 0, 20),
            (program.NEXT, 0, 0, 0, 0, 0), (program.END, 0, 2, 0, 0, 0)]
    bench = Bench(rows)
    bench.go(last=1)
    bench.ticks(200)
    cycles = [fields for code, fields in journal(bench) if code == 0x90]
    assert [(fields["cycle"], fields["duration_ticks"]) for fields in cycles] == [(1, 40)]


def test_held_ticks_are_those_in_which_the_target_was_folded_back():
    rows = [(program.LOOP, 0, 0, 0, 0, 9), (program.CYCLE, 0, 0, 0, 0, 0),
            (program.SEG, 0, 1, 500, 0, 20), (program.SEG, 0, 1, 500, 0, 80),
            (program.NEXT, 0, 0, 0, 0, 0), (program.END, 0, 2, 0, 0, 0)]
    bench = Bench(rows, changes={"fold_rise_q8": 256})
    bench.go()
    bench.ticks(140)
    bench.see(outlet=1000, chamber=-900)              # outlet reverse, soft
    bench.ticks(10)
    bench.see(outlet=392, chamber=0)
    bench.ticks(151)
    held = [fields["held_ticks"] for code, fields in journal(bench) if code == 0x90]
    assert held == [0, 10, 0]


def test_marks_are_journalled_with_their_number_zero_too():
    rows = [(program.SEG, 0, 1, 500, 0, 5), (program.MARK, 0, 1, 0, 0, 0),
            (program.SEG, 0, 1, 0, 0, 5), (program.MARK, 0, 2, 0, 0, 65535),
            (program.SEG, 0, 2, 0, 0, 5), (program.END, 0, 2, 0, 0, 0)]
    bench = Bench(rows)
    bench.go()
    bench.ticks(40)
    marks = [(fields["mark"], fields["tick"]) for code, fields in journal(bench) if code == 0x91]
    assert marks == [(0, 5), (65535, 10)]


def test_a_program_without_end_is_refused():
    import binascii

    from benches import records

    bench = Bench()
    data = records([(program.SEG, 0, 0, 0, 0, 5)])
    bench.board.program.blob.put(0, data, len(data))
    assert not bench.board.program.seal(len(data), binascii.crc32(data), bench.fingerprint)


def test_step_limit_only_ever_tightens_and_relax_gives_the_rigs_back():
    from lodeboard import limits

    high = limits.INDEX["outlet_high_hard_pa"]
    low = limits.INDEX["chamber_low_hard_pa"]
    rows = [(program.LIMIT, high, 0, 0, 0, 1500), (program.LIMIT, low, 0, 0, 0, -9000),
            (program.SEG, 0, 0, 0, 0, 30), (program.RELAX, 0, 1, 0, 0, 0),
            (program.SEG, 0, 1, 0, 0, 30), (program.END, 0, 2, 0, 0, 0)]
    bench = Bench(rows)
    bench.go()
    bench.ticks(10)
    assert bench.board.limits.active[high] == 1500
    assert bench.board.limits.active[low] == bench.board.limits.values[low]
    bench.ticks(30)
    assert bench.board.limits.active[high] == bench.board.limits.values[high]
    assert bench.state == "running"


def test_tightened_limit_trips_at_its_own_level():
    from lodeboard import limits

    high = limits.INDEX["outlet_high_hard_pa"]
    rows = [(program.LIMIT, high, 0, 0, 0, 1500), (program.SEG, 0, 0, 0, 0, 300),
            (program.END, 0, 2, 0, 0, 0)]
    bench = Bench(rows)
    bench.go()
    bench.ticks(10)
    bench.see(outlet=1510, chamber=1000)
    bench.loop.step()
    assert bench.board.trip_code == trips.OUTLET_HIGH
    assert struct.unpack("<IHBBBIiiB", bench.board.trip_body)[7] == 1500


def test_a_bare_ctrl_c_stops_a_running_board_and_then_gives_the_port_back():
    bench = bench_in("running")
    bench.hal.rx += b"\x03"
    bench.ticks(2)
    assert bench.state == "stopping"
    assert bench.board.released
    bench.loop.run()                    # ends by itself, with the coil off
    assert bench.hal.last_drive == (0, 0, 0)
    assert bench.state == "safe"


def test_a_fault_in_the_loop_leaves_the_coil_off_and_a_trip_latched():
    bench = bench_in("running")

    def broken() -> int:
        raise RuntimeError("a fault of ours")

    bench.board.sequencer.step = broken
    with pytest.raises(RuntimeError):
        bench.loop.run()
    assert bench.hal.last_drive == (0, 0, 0)
    assert bench.board.trip_code == trips.FIRMWARE_FAULT
    assert bench.hal.store["trip"][6] == trips.FIRMWARE_FAULT


def journal(bench: Bench) -> list[tuple[int, dict[str, int]]]:
    """Every entry that the journal holds, decoded."""
    ring = bench.board.journal
    table = {code: (form, fields) for code, _, form, fields in messages.UP}
    entries = []
    for entry in range(ring.saved + 1, ring.newest + 1):
        at = ring.at(entry)
        code, length = ring.rows[at], ring.rows[at + 1]
        form, fields = table[code]
        body = bytes(ring.rows[at + 2 : at + 2 + length])
        entries.append((code, dict(zip(fields, struct.unpack(form, body), strict=True))))
    return entries
