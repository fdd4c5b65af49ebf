# The same arithmetic on both interpreters: a hash over regulator, estimate, sequencer and frames.
import binascii
import sys

sys.path.insert(0, sys.path[0])
from common import FINGERPRINT, board_ready

from lodeboard.wire import crc, frames

state = [0, 0]                     # CRC-32 and length of everything noted


def note_bytes(data):
    state[0] = binascii.crc32(data, state[0]) & 0xFFFFFFFF
    state[1] += len(data)


def note(*numbers):
    for number in numbers:
        note_bytes((number & 0xFFFFFFFF).to_bytes(4, "little"))


hal, board, loop = board_ready()
board.hal.read_counts(board.sensors.counts)      # as the tick before has done
assert board.arm(FINGERPRINT, board.program.blob.crc32) == 0
board.unlock()                                          # this script itself allocates
assert board.go(5, 0, 0) == 0
for k in range(3000):
    board.heard()
    if k == 1200:
        hal.swing = 2500                                # soft level: fold-back at work
    loop.step()
    note(board.tick.target_a_ma, board.regulator_a.duty_q15, board.thermal_a.winding_mc,
         board.tick.fold_q8, board.state, board.cycles.number, board.interlocks.outlet_reverse_pa)
for length in range(0, 57):
    buf = bytearray(70)
    for i in range(length):
        buf[4 + i] = (i * 31 + length) & 0xFF
    n = frames.build_up(buf, 0x83, length, length)
    note_bytes(bytes(buf[:n]))
    frame = frames.build_down(0x42, length, bytes(buf[4 : 4 + min(length, 40)]))
    note_bytes(frame)
    reader = frames.DownReader()
    note(sum(reader.feed(octet) for octet in frame), reader.damaged)
slow = crc.make_table()
crc.halves(bytearray(b"123456789"), 0, 9, slow)
note(slow[512], slow[513])
print("%08x %d" % (state[0], state[1]))
