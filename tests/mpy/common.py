# Shared by the scripts of this folder; run by the real interpreter. argv[1]: the firmware folder.
import binascii
import struct
import sys

sys.path.insert(0, sys.argv[1])

from lodeboard import storage  # isort: skip
from lodeboard import limits, program
from lodeboard.board import Board
from lodeboard.clock import MASK_US, us_after
from lodeboard.hal import Hal
from lodeboard.loop import Loop

FINGERPRINT = b"12345678"
VALUES = {
    "chamber_present": 1, "chamber_gain": 16384, "chamber_shift": 14, "chamber_offset": -8192,
    "chamber_low_counts": 100, "chamber_high_counts": 16300, "chamber_stuck_ticks": 500,
    "outlet_present": 1, "outlet_gain": 16384, "outlet_shift": 14, "outlet_offset": -8192,
    "outlet_low_counts": 100, "outlet_high_counts": 16300, "outlet_stuck_ticks": 500,
    "coil_a_present": 1, "coil_a_gain": 32768, "coil_a_shift": 14, "coil_a_offset": -4096,
    "coil_a_low_counts": 1, "coil_a_high_counts": 4094,
    "supply_offset": 24000, "supply_low_mv": -1,
    "outlet_reverse_soft_pa": 1765, "outlet_reverse_hard_pa": 2353,
    "inlet_reverse_soft_pa": 3922, "inlet_reverse_hard_pa": 4707,
    "chamber_high_soft_pa": 3922, "chamber_high_hard_pa": 4903,
    "chamber_low_soft_pa": -2451, "chamber_low_hard_pa": -3138,
    "outlet_high_soft_pa": 1961, "outlet_high_hard_pa": 2549, "outlet_low_hard_pa": -1961,
    "target_max_ma": 3000, "over_current_ma": 3400, "coil_open_ma": 3001, "coil_open_ticks": 50,
    "ambient_mc": 22000, "hot_soft_mc": 90000, "hot_hard_mc": 105000, "r20_mohm": 8000,
    "alpha_ppm": 3930, "heat_winding_q": 132, "heat_leak_winding_q": 104, "heat_leak_body_q": 28,
    "heat_body_leak_q": 13, "kp_q8": 167, "ki_q8": 684, "feed_q8": 2279, "response_q8": 205,
    "duty_min_q15": 0, "duty_max_q15": 31129, "fold_min_q8": 128, "fold_fall_q8": 13,
    "fold_rise_q8": 1, "tick_us": 1000, "late_us": 50000, "silence_ms": 5000, "ramp_ma": 60,
    "sensor_bad_ticks": 3, "tail_ticks": 250,
}


class ScriptHal(Hal):
    """Counts wiggle by themselves; link bytes come and go through fixed buffers; nothing allocates."""

    capabilities = 129
    window_frames = 32
    boot_nonce = 5

    def __init__(self):
        self.time_us = MASK_US - 1999999
        self.n = 0
        self.rx = bytearray(4096)
        self.rx_n = 0
        self.rx_at = 0
        self.sent = 0
        self.accepts = True
        self.enable = 0
        self.swing = 300
        self.coil = 0
        self.coil_b = 0
        self.input_bits = 0
        self.stored = {}

    def now_us(self):
        return self.time_us

    def read_counts(self, into):
        n = self.n + 1
        self.n = n
        into[0] = 8192 + (n * 7) % self.swing
        into[1] = 8192 + 392 + (n * 3) % 11
        into[2] = 2048 + self.coil + (n & 1)
        into[3] = 2048 + self.coil_b + (n & 1)

    def inputs(self):
        return self.input_bits

    def drive(self, duty_a_q15, duty_b_q15, enable):
        self.enable = enable
        self.coil = duty_a_q15 >> 4
        self.coil_b = duty_b_q15 >> 4

    def feed(self):
        pass

    def start_guards(self):
        return True

    def read_byte(self):
        at = self.rx_at
        if at >= self.rx_n:
            return -1
        self.rx_at = at + 1
        return self.rx[at]

    def write(self, view, n):
        if not self.accepts:
            return 0
        self.sent += n
        return n

    def own_port(self, owned):
        pass

    def idle(self, left_us):
        self.time_us = us_after(self.time_us, left_us)

    def load(self, name):
        return self.stored.get(name)

    def save(self, name, data):
        self.stored[name] = data

    def reset(self):
        raise SystemExit


def put(store, data):
    for at in range(0, len(data), 32):
        part = data[at : at + 32]
        assert store.blob.put(at, part, len(part))
    assert store.seal(len(data), binascii.crc32(data), FINGERPRINT)


ENDLESS = (
    (program.LOOP, 0, 0, 0, 0, 1000000), (program.CYCLE, 0, 0, 0, 0, 0),
    (program.SEG, 0, 1, 900, 0, 20), (program.SEG, 0, 1, 900, 0, 60),
    (program.SEG, 0, 1, 0, 0, 20), (program.MARK, 0, 1, 0, 0, 3), (program.SEG, 0, 1, 0, 0, 100),
    (program.NEXT, 0, 0, 0, 0, 0), (program.END, 0, 2, 0, 0, 0))


def board_ready(rows=ENDLESS, changes=None):
    """A board with limits and a program; by default one of endless short cycles."""
    hal = ScriptHal()
    board = Board(hal, b"bundle00", storage.SAMPLE_ROWS)
    board.boot()
    values = dict(VALUES)
    values.update(changes or {})
    put(board.limits, b"".join(
        struct.pack("<i", values.get(name, 0)) for name in limits.FIELDS))
    put(board.program, b"".join(struct.pack(program.RECORD_FORMAT, *row) for row in rows))
    return hal, board, Loop(board)
