# 100,000 ticks with the heap locked: link busy, host comes and goes, a trip at the end.
import sys

sys.path.insert(0, sys.path[0])
from common import FINGERPRINT, board_ready

from lodeboard.wire.frames import build_down

hal, board, loop = board_ready()
# What the host says again and again: a beat that saves everything so far cannot be made without
# allocating, so a few ready-made frames are replayed.
hello = build_down(0x40, 0, b"\0" * 8)
stream = build_down(0x44, 1, b"\x0a\0")
status = build_down(0x4C, 2, b"")
pause = build_down(0x47, 3, b"")
resume = build_down(0x48, 4, b"")
refused = build_down(0x45, 5, b"\0" * 12)
noise = bytes((i * 37 + 11) & 0xFF for i in range(200))
beats = [build_down(0x41, 0, bytes((f, s & 0xFF, s >> 8, 0, 0)))
         for f in (0, 40, 80, 120, 160, 200, 240) for s in (1, 40, 200, 450)]


def say(data):
    rx = hal.rx
    n = len(data)
    for i in range(n):
        rx[i] = data[i]
    hal.rx_at = 0
    hal.rx_n = n


def run(ticks):
    for k in range(ticks):
        if k % 40 == 0 and not 30000 < k < 32000:      # the host is away for two seconds
            which = k // 40 % 7
            if which == 0:
                say(hello)
            elif which == 1:
                say(stream)
            elif which == 2:
                say(status)
            elif which == 3:
                say(noise)
            elif which == 4:
                say(pause if k % 280 < 140 else resume)
            elif which == 5:
                say(refused)
            else:
                say(beats[k // 280 % 28])
        hal.accepts = not 50000 < k < 53000             # the port is open, nobody reads
        if k == 60000:
            say(resume)
        loop.step()


say(hello)
loop.step()
board.hal.read_counts(board.sensors.counts)      # as the tick before has done
assert board.arm(FINGERPRINT, board.program.blob.crc32) == 0
assert board.locked
assert board.go(5, 0, 0) == 0
run(100000)
assert board.locked, board.state
cycles = board.cycles.number
hal.swing = 6000                                        # chamber swings: a trip
for _ in range(200):
    loop.step()
    if board.trip_code:
        break
assert board.trip_code and hal.enable == 0
for _ in range(400):
    loop.step()
assert not board.locked and "trip" in hal.stored
print("ok", cycles, hal.sent, board.trip_code)
