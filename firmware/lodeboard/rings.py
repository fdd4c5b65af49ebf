"""The two rings between tick and link. Storage is made once; each index has one writer."""

from struct import pack_into

from .compat import const
from .wire import messages

ROWS = const(1280)                 # at 1 kHz: the last second before a trip, a quarter after, some air
ROW_BYTES = const(28)
CELLS = const(64)
CELL_BYTES = const(64)
_RESERVE = const(4)                # cells kept for trip, end and gap when cycles fill the ring
_SAMPLE = messages.SAMPLE_FORMAT


class Samples:
    """One row a tick from GO on: live stream and flight recorder in one. Row n is tick n."""

    def __init__(self, storage: "bytearray | None" = None) -> None:
        # 35 KB in one piece: a board makes it before its imports have scattered the heap (storage.py)
        self.rows = bytearray(ROWS * ROW_BYTES) if storage is None else storage
        self.written = 0           # the tick writes this
        self.sent = 0              # the link writes this
        self.every = 0             # 0: no live stream
        self.dropped = 0

    def clear(self) -> None:
        """GO: the recorder starts anew."""
        self.written = 0
        self.sent = 0
        self.dropped = 0

    def push(self, a_ma: int, b_ma: int, target_ma: int, duty_q15: int, chamber_pa: int,
             outlet_pa: int, inlet_pa: int, winding_cc: int, fold_q8: int, state: int) -> None:
        """Append this tick's row; data before index."""
        n = self.written
        pack_into(_SAMPLE, self.rows, (n % ROWS) * ROW_BYTES, n, a_ma, b_ma, target_ma, duty_q15,
                  chamber_pa, outlet_pa, inlet_pa, winding_cc, fold_q8, state)
        self.written = n + 1

    def peek(self) -> int:
        """Offset of the next row to stream, or -1. Rows overrun since are counted as dropped."""
        every = self.every
        if every == 0:
            return -1
        n = self.sent
        oldest = self.written - ROWS
        if n < oldest:
            behind = (oldest - n + every - 1) // every
            self.dropped += behind
            n += behind * every
            self.sent = n
        if n >= self.written:
            return -1
        return (n % ROWS) * ROW_BYTES

    def pop(self) -> None:
        """The row at peek() is on its way."""
        self.sent += self.every

    def recorded(self) -> int:
        """How many rows the recorder holds."""
        return self.written if self.written < ROWS else ROWS

    def recorded_at(self, row: int) -> int:
        """Offset of recorder row `row`, oldest = 0; -1 beyond the end."""
        if row >= self.recorded():
            return -1
        return ((self.written - self.recorded() + row) % ROWS) * ROW_BYTES


class Journal:
    """Reliable entries, kept until the host has them on disk. Entry n lives in cell n % CELLS."""

    def __init__(self) -> None:
        self.rows = bytearray(CELLS * CELL_BYTES)     # a cell: code, length, body
        self.newest = 0
        self.saved = 0
        self.lost_first = 0
        self.lost_last = 0

    def room(self, reserve: int = _RESERVE) -> bool:
        """Whether another entry fits, leaving `reserve` cells for what matters more."""
        return self.newest - self.saved < CELLS - reserve

    def open(self, code: int, length: int) -> int:
        """A cell for the next entry: writes its head, returns the offset of its body."""
        self.newest += 1
        at = (self.newest % CELLS) * CELL_BYTES
        self.rows[at] = code
        self.rows[at + 1] = length
        return at + 2

    def at(self, entry: int) -> int:
        """Offset of an entry's cell; -1 when it is saved already or not yet written."""
        if entry <= self.saved or entry > self.newest:
            return -1
        return (entry % CELLS) * CELL_BYTES

    def keep_until(self, entry: int) -> None:
        """The host has everything up to this entry on disk."""
        if self.saved < entry <= self.newest:
            self.saved = entry

    def lose(self, cycle: int) -> None:
        """A cycle that found no room: remembered as part of a gap."""
        if self.lost_first == 0:
            self.lost_first = cycle
        self.lost_last = cycle

    def own_up(self, reserve: int = _RESERVE) -> None:
        """Journal the gap as soon as there is room; reserve 0 at a run's end, which keeps a cell for it."""
        if self.lost_first and self.room(reserve):
            at = self.open(0x94, 12)
            pack_into("<III", self.rows, at, self.newest, self.lost_first, self.lost_last)
            self.lost_first = 0
