# A fault of ours under the locked heap: the loop ends with the coil off, the trip kept, the heap free.
import sys

sys.path.insert(0, sys.path[0])
from common import FINGERPRINT, board_ready

from lodeboard import trips

hal, board, loop = board_ready()
for _ in range(3):
    loop.step()
assert board.arm(FINGERPRINT, board.program.blob.crc32) == 0
assert board.go(5, 0, 0) == 0
for _ in range(50):
    board.heard()
    loop.step()
assert board.locked and hal.enable == 1
board.tick.sequencer = None
try:
    loop.run()
except Exception as fault:
    print(type(fault).__name__)
assert hal.enable == 0
assert not board.locked
assert board.trip_code == trips.FIRMWARE_FAULT
assert hal.stored["trip"][6] == trips.FIRMWARE_FAULT
print(len([0] * 1000))
