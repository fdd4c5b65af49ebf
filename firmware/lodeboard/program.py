"""A compiled schedule: fixed-size integer records that the board runs on its own.

A record is 12 bytes, little-endian, `<BBHhhi`: op, arg, step, a, b, n. `step` is the schedule step
that the record came from, for trip reports. Currents are absolute targets in mA.
"""

import struct
from array import array

from .compat import const
from .limits import FIRST_STEP_LIMIT, INDEX, LAST_STEP_LIMIT, Blob, Limits

RECORD_FORMAT = "<BBHhhi"
RECORD_BYTES = const(12)
MAX_RECORDS = const(512)
MAX_DEPTH = const(6)          # nested loops
MAX_STEP = const(250)
MAX_TICKS = const(0x1FFFFFFF)
MAX_MA = const(30000)

END = const(0)                # the program is over; the board ramps down and reports `end`
SEG = const(1)                # go linearly from the present targets to (a, b) mA in n ticks
CYCLE = const(2)              # a cycle begins here; the one before it, if any, is accounted
CLOSE = const(3)              # the cycle that is open ends here and is accounted
LOOP = const(4)               # repeat what follows up to the matching NEXT, n times
NEXT = const(5)
MARK = const(6)               # journal a mark numbered n (0 to 65535)
LIMIT = const(7)              # tighten limit field `arg` to n until RELAX
RELAX = const(8)              # every tightened limit back to the rig's
_LAST_OP = const(8)
_TARGET_MAX = INDEX["target_max_ma"]

# what Sequencer.step() found on its way to the tick's targets
RUNS = const(0)
ENDED = const(1)
BROKEN = const(2)             # no END, a loop without its match, or an unknown op


class Program:
    """The store: bytes as sent, decoded once into arrays when sealed."""

    def __init__(self) -> None:
        self.blob = Blob(RECORD_BYTES * MAX_RECORDS)
        self.count = 0
        self.op = array("B", bytes(MAX_RECORDS))
        self.arg = array("B", bytes(MAX_RECORDS))
        self.step = array("H", bytes(2 * MAX_RECORDS))
        self.a_ma = array("h", bytes(2 * MAX_RECORDS))
        self.b_ma = array("h", bytes(2 * MAX_RECORDS))
        self.n = array("i", bytes(4 * MAX_RECORDS))
        self.shadow = array("i", bytes(4 * MAX_RECORDS))
        self.at = 0

    def seal(self, length: int, crc32: int, fingerprint: bytes) -> bool:
        """Take the stored bytes as a program if they are whole and every record is lawful."""
        blob = self.blob
        if length == 0 or length % RECORD_BYTES or not blob.check(length, crc32):
            return False
        self.count = length // RECORD_BYTES
        for i in range(self.count):
            row = struct.unpack_from(RECORD_FORMAT, blob.data, RECORD_BYTES * i)
            if not _lawful(row):
                return False
            self.op[i], self.arg[i], self.step[i], self.a_ma[i], self.b_ma[i], self.n[i] = row
            self.shadow[i] = self._fold(i)
        if self.op[self.count - 1] != END or not self._loops_match():
            return False
        blob.crc32 = crc32
        blob.fingerprint = fingerprint
        blob.sealed = True
        self.at = 0
        return True

    def _loops_match(self) -> bool:
        """Every LOOP has its NEXT, none is too deep, and each turn of one takes time."""
        starts = [0] * MAX_DEPTH
        depth = 0
        last_seg = -1
        for i in range(self.count):
            op = self.op[i]
            if op == SEG:
                last_seg = i
            elif op == LOOP:
                if depth == MAX_DEPTH:
                    return False
                starts[depth] = i
                depth += 1
            elif op == NEXT:
                depth -= 1
                if depth < 0 or last_seg < starts[depth]:
                    return False
        return depth == 0

    def whole(self) -> bool:
        """Sealed, and every record still what was sealed."""
        if not self.blob.sealed or self.blob.crc_now() != self.blob.crc32:
            return False
        for i in range(self.count):
            if self.shadow[i] != self._fold(i):
                return False
        return True

    def _fold(self, i: int) -> int:
        """The complement of a record folded into one small integer."""
        word = (self.op[i] << 8) ^ self.arg[i] ^ (self.step[i] << 12)
        return ~(word ^ (self.a_ma[i] << 4) ^ (self.b_ma[i] << 8) ^ self.n[i])

    def patrol(self) -> bool:
        """Look at one more record; False, and `at` stays on it, when it is not what was sealed."""
        i = self.at
        word = (self.op[i] << 8) ^ self.arg[i] ^ (self.step[i] << 12)         # as _fold()
        if self.shadow[i] ^ word ^ (self.a_ma[i] << 4) ^ (self.b_ma[i] << 8) ^ self.n[i] != -1:
            return False
        i += 1
        self.at = i if i < self.count else 0
        return True


def _lawful(row: "tuple[int, ...]") -> bool:
    """Whether a record is one that the sequencer can run."""
    op, arg, step, a_ma, b_ma, n = row
    if op > _LAST_OP or step > MAX_STEP or abs(a_ma) > MAX_MA or abs(b_ma) > MAX_MA:
        return False
    if op == SEG or op == LOOP:
        return 1 <= n <= MAX_TICKS
    if op == LIMIT:
        if not FIRST_STEP_LIMIT <= arg <= LAST_STEP_LIMIT:
            return False
        return (0 if arg == _TARGET_MAX else -MAX_TICKS) <= n <= MAX_TICKS
    return 0 <= n <= 65535


class Sequencer:
    """Runs a program one tick at a time. step() allocates nothing.

    A segment of n ticks ends exactly on its target in its n-th tick; between, targets are
    start + (end - start) * k / n, rounded towards minus infinity, without leaving 30 bits.
    """

    def __init__(self, program: Program, limits: Limits) -> None:
        self.program = program
        self.limits = limits
        self.loop_at = array("i", [0] * MAX_DEPTH)
        self.loop_left = array("i", [0] * MAX_DEPTH)
        self.restart()

    def restart(self) -> None:
        """To the first record, targets at zero."""
        self.pc = 0
        self.depth = 0
        self.a_ma = 0
        self.b_ma = 0
        self.from_a_ma = 0
        self.from_b_ma = 0
        self.k = 0
        self.n = 0
        self.step_now = 0
        # set by step() for the tick to act on, one tick long
        self.cycle_mark = 0       # CYCLE or CLOSE was passed
        self.mark = -1

    def step(self) -> int:
        """Advance one tick; RUNS, ENDED or BROKEN. Targets are in a_ma, b_ma."""
        if self.k >= self.n:
            found = self._next_segment()
            if found != RUNS:
                return found
        self.k += 1
        i = self.pc
        k = self.k
        n = self.n
        if k == n:
            self.a_ma = self.program.a_ma[i]
            self.b_ma = self.program.b_ma[i]
            self.pc = i + 1
        else:
            span_ma = self.program.a_ma[i] - self.from_a_ma
            if span_ma:
                self.a_ma = self.from_a_ma + _share(span_ma, k, n)
            span_ma = self.program.b_ma[i] - self.from_b_ma
            if span_ma:
                self.b_ma = self.from_b_ma + _share(span_ma, k, n)
        return RUNS

    def _next_segment(self) -> int:
        """Run records up to and including the next SEG; bounded by MAX_RECORDS records."""
        program = self.program
        for _ in range(MAX_RECORDS):
            i = self.pc
            if i >= program.count:
                return BROKEN
            op = program.op[i]
            self.step_now = program.step[i]
            if op == SEG:
                self.from_a_ma = self.a_ma
                self.from_b_ma = self.b_ma
                self.k = 0
                self.n = program.n[i]
                return RUNS
            if op == END:
                return ENDED
            if not self._control(op, i):
                return BROKEN
        return BROKEN

    def _control(self, op: int, i: int) -> bool:
        """A record that takes no time. False when loops do not match."""
        self.pc = i + 1
        if op == LOOP:
            if self.depth >= MAX_DEPTH:
                return False
            self.loop_at[self.depth] = i + 1
            self.loop_left[self.depth] = self.program.n[i]
            self.depth += 1
        elif op == NEXT:
            if self.depth == 0:
                return False
            top = self.depth - 1
            self.loop_left[top] -= 1
            if self.loop_left[top] > 0:
                self.pc = self.loop_at[top]
            else:
                self.depth = top
        elif op == CYCLE or op == CLOSE:
            # CLOSE then CYCLE in one tick means CYCLE: it closes the open one anyway
            if self.cycle_mark != CYCLE:
                self.cycle_mark = op
        elif op == MARK:
            self.mark = self.program.n[i]
        elif op == LIMIT:
            self.limits.tighten(self.program.arg[i], self.program.n[i])
        elif op == RELAX:
            self.limits.relax()
        return True


def _share(span_ma: int, k: int, n: int) -> int:
    """span_ma * k // n without leaving 30 bits, for k < n up to MAX_TICKS and spans up to 60 A."""
    while n > 16383:
        n >>= 1
        k >>= 1
    return span_ma * k // n
