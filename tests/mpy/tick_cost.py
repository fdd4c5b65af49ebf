# What a tick costs, in loop iterations (L) of the same process; run by the real interpreter.
import gc
import sys
import time

sys.path.insert(0, sys.path[0])
from common import FINGERPRINT, board_ready

from lodeboard.wire.frames import build_down


def loop_ns(n):
    """One iteration of `for i in range(n): s += i & 7`, in ns."""
    s = 0
    t = time.ticks_us()
    for i in range(n):
        s += i & 7
    return time.ticks_diff(time.ticks_us(), t) * 1000 // n


def best(function, n):
    """Least and greatest mean ns over seven turns."""
    low, high = 1 << 60, 0
    for _ in range(7):
        t = time.ticks_us()
        function(n)
        ns = time.ticks_diff(time.ticks_us(), t) * 1000 // n
        low = min(low, ns)
        high = max(high, ns)
    return low, high


hal, board, loop = board_ready()
hello = build_down(0x40, 0, b"\0" * 8)
stream = build_down(0x44, 1, b"\x0a\0")
for data in (hello, stream):
    for i in range(len(data)):
        hal.rx[i] = data[i]
    hal.rx_at, hal.rx_n = 0, len(data)
    loop.step()
    loop.step()
board.hal.read_counts(board.sensors.counts)      # as the tick before has done
assert board.arm(FINGERPRINT, board.program.blob.crc32) == 0
board.unlock()
gc.disable()
assert board.go(5, 0, 0) == 0
beats = [build_down(0x41, 0, bytes((k * 8 & 0xFF, 0, 0, 0, 0))) for k in range(32)]


def core(n):
    run = board.tick.run
    for _ in range(n):
        board.heard()
        run(0)


def whole(n):
    for k in range(n):
        if k & 63 == 0:
            data = beats[(k >> 6) & 31]
            for i in range(len(data)):
                hal.rx[i] = data[i]
            hal.rx_at, hal.rx_n = 0, len(data)
        board.heard()
        loop.step()


def bare(n):
    for _ in range(n):
        hal.read_counts(board.sensors.counts)
        hal.inputs()
        hal.drive(0, 0, 1)
        hal.now_us()


unit = min(loop_ns(20000) for _ in range(9))
core_ns = best(core, 2000)
whole_ns = best(whole, 2000)
hal_ns = best(bare, 2000)
assert board.state == 3, board.trip_code
print(unit, core_ns[0], whole_ns[0], whole_ns[1], hal_ns[0])
