# Every way out of a run, with the heap locked: each kind of trip, a stop, a pause, the program's end.
# Two coils, nested loops, step limits and marks, so that every line of the tick has its turn.
import sys

sys.path.insert(0, sys.path[0])
from common import FINGERPRINT, VALUES, board_ready

from lodeboard import limits, program, states, trips

HIGH = limits.INDEX["outlet_high_hard_pa"]
ROWS = (
    (program.LOOP, 0, 0, 0, 0, 6), (program.LOOP, 0, 0, 0, 0, 2), (program.CYCLE, 0, 1, 0, 0, 0),
    (program.LIMIT, HIGH, 1, 0, 0, 2400), (program.SEG, 0, 1, 900, -400, 20),
    (program.SEG, 0, 1, 900, 700, 40), (program.MARK, 0, 1, 0, 0, 3), (program.SEG, 0, 1, 0, 0, 20),
    (program.RELAX, 0, 1, 0, 0, 0), (program.NEXT, 0, 0, 0, 0, 0), (program.CLOSE, 0, 2, 0, 0, 0),
    (program.SEG, 0, 2, 0, 0, 30), (program.NEXT, 0, 0, 0, 0, 0), (program.END, 0, 3, 0, 0, 0))
CHANGES = {"coil_b_" + field: VALUES["coil_a_" + field]
           for field in ("present", "gain", "shift", "offset", "low_counts", "high_counts")}
CHANGES["duty_min_q15"] = -31129
CHANGES["silence_ms"] = 100


def cutout(hal, board):
    hal.input_bits = 2


def stop_input(hal, board):
    hal.input_bits = 1


def swings(hal, board):
    hal.swing = 6000


def off_scale(hal, board):
    hal.swing = 1
    board.limits.values[limits.INDEX["chamber_stuck_ticks"]] = 5
    board.limits.shadow[limits.INDEX["chamber_stuck_ticks"]] = ~5


def spoilt_limits(hal, board):
    board.limits.values[limits.INDEX["tail_ticks"]] += 64


def spoilt_program(hal, board):
    board.program.n[4] += 1


def hot(hal, board):
    board.thermal_b.winding_mcq = 110000 << 10
    board.thermal_b.winding_mc = 110000


def silent(hal, board):
    board.tick.silent_ticks = 200


def late(hal, board):
    hal.time_us = (hal.time_us + 60000) & 0x3FFFFFFF


def ends(hal, board):
    pass


def stops(hal, board):
    assert board.simple("stop") == 0


def pauses(hal, board):
    assert board.simple("pause") == 0


CASES = (
    (cutout, trips.CUTOUT_OPEN), (stop_input, trips.STOP_INPUT), (swings, -1), (off_scale, -1),
    (spoilt_limits, trips.LIMITS_CORRUPT), (spoilt_program, trips.PROGRAM_CORRUPT),
    (hot, trips.COIL_HOT), (silent, trips.HOST_SILENT), (late, trips.TICK_LATE),
    (ends, 0), (stops, 0), (pauses, 0))

for act, code in CASES:
    hal, board, loop = board_ready(ROWS, CHANGES)
    for _ in range(3):
        loop.step()
    assert board.arm(FINGERPRINT, board.program.blob.crc32) == 0
    assert board.go(5, 0, 0) == 0
    for _ in range(150):
        board.heard()
        loop.step()
    assert board.locked and board.state == states.RUNNING, (act, board.state, board.trip_code)
    act(hal, board)
    steps = 0
    while board.locked:
        board.heard() if act is not silent else None
        loop.step()
        steps += 1
        if act is pauses and steps == 60:
            assert hal.enable and board.tick.target_a_ma == 0
            assert board.simple("resume") == 0
        assert steps < 5000, (act, board.state)
    assert not hal.enable, (act, board.state, board.trip_code)
    assert board.state == (states.TRIPPED if code else states.SAFE), (act, board.state)
    if code > 0:
        assert board.trip_code == code, (act, board.trip_code)
    assert ("trip" in hal.stored) == bool(code)
print("ok", len(CASES))
