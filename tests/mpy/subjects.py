# What tick_cost.py and tick_count.py measure: a running board with the heap locked, as on a bench.
import gc

from common import FINGERPRINT, board_ready

from lodeboard.wire.frames import build_down

hal, board, loop = board_ready()
tick = board.tick
_beats = [build_down(0x41, 0, bytes((k * 8 & 0xFF, 0, 0, 0, 0))) for k in range(32)]


def _say(data):
    for i in range(len(data)):
        hal.rx[i] = data[i]
    hal.rx_at, hal.rx_n = 0, len(data)


def start():
    """A host that streams a sample each ten ticks, then ARM and GO."""
    for data in (build_down(0x40, 0, b"\0" * 8), build_down(0x44, 1, b"\x0a\0")):
        _say(data)
        loop.step()
        loop.step()
    assert board.arm(FINGERPRINT, board.program.blob.crc32) == 0
    board.unlock()
    gc.disable()
    assert board.go(5, 0, 0) == 0


def unit(n):
    """L: one iteration of this loop."""
    s = 0
    for i in range(n):
        s += i & 7


def core(n):
    """The control tick with the test Hal's methods."""
    for _ in range(n):
        board.heard()
        tick.run(0)


def whole(n):
    """A period: tick, link, telemetry, and a beat each 64 periods."""
    for k in range(n):
        if k & 63 == 0:
            _say(_beats[(k >> 6) & 31])
        board.heard()
        loop.step()


def bare(n):
    """The test Hal's own methods."""
    counts = board.sensors.counts
    for _ in range(n):
        hal.read_counts(counts)
        hal.inputs()
        hal.drive(0, 0, 1)


SUBJECTS = {"unit": unit, "core": core, "whole": whole, "bare": bare}
