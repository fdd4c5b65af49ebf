"""A board on a fake Hal with the shipped simulated rig's limits, armed and running."""

from __future__ import annotations

import struct
from pathlib import Path

from fake_hal import FakeHal, counts_for

from lodeboard import limits, program, states
from lodeboard.board import Board
from lodeboard.loop import Loop
from lodestroke.rig import limits_blob, load_rig

RIG = load_rig(Path(__file__).resolve().parents[2] / "hil_configs" / "bench-sim.toml")
REST = {"chamber": 0, "outlet": 392, "coil_a": 0}
FOREVER = [(program.CYCLE, 0, 0, 0, 0, 0), (program.SEG, 0, 1, 1000, 0, 50),
           (program.SEG, 0, 1, 1000, 0, 400_000), (program.END, 0, 2, 0, 0, 0)]


def records(rows) -> bytes:
    return b"".join(struct.pack(program.RECORD_FORMAT, *row) for row in rows)


class Bench:
    """Board, loop and Hal, with short ways to do what a host would."""

    def __init__(self, rows=FOREVER, changes: dict[str, int] | None = None, store=None) -> None:
        self.hal = FakeHal()
        if store is not None:
            self.hal.store = store
        self.board = Board(self.hal, b"bundle00")
        self.board.boot()
        self.loop = Loop(self.board)
        blob = limits_blob(RIG)[0]
        values = list(struct.unpack(f"<{limits.N_FIELDS}i", blob))
        for name, value in (changes or {}).items():
            values[limits.INDEX[name]] = value
        self.fingerprint = RIG.fingerprint
        self._put(self.board.limits, struct.pack(f"<{limits.N_FIELDS}i", *values))
        self._put(self.board.program, records(rows))
        self.see(**REST)

    def _put(self, store, data: bytes) -> None:
        import binascii

        for at in range(0, len(data), 32):
            part = data[at : at + 32]
            assert store.blob.put(at, part, len(part))
        assert store.seal(len(data), binascii.crc32(data), self.fingerprint)

    def see(self, **values: int) -> None:
        """What the sensors read from now on, in Pa, mA, mV."""
        for name, value in values.items():
            channel = limits.CHANNELS.index(name)
            self.hal.counts[channel] = counts_for(self.board.limits.values, channel, value)

    def arm(self) -> int:
        self.hal.read_counts(self.board.sensors.counts)      # as the tick before has done
        return self.board.arm(self.fingerprint, self.board.program.blob.crc32)

    def go(self, last: int = 0) -> None:
        assert self.arm() == 0
        assert self.board.go(5, 0, last) == 0

    def ticks(self, n: int = 1) -> None:
        """Ticks with a host that is there, and sensors that never stand quite still."""
        for _ in range(n):
            self.board.heard()
            self.wiggle()
            self.loop.step()

    def wiggle(self) -> None:
        """The coil follows its target; one count of noise keeps the stuck watch quiet."""
        flip = self.hal.feeds & 1
        for channel in (limits.CHAMBER, limits.OUTLET):
            self.hal.counts[channel] += 1 if flip else -1
        current = self.board.tick.target_a_ma
        self.hal.counts[limits.COIL_A] = counts_for(
            self.board.limits.values, limits.COIL_A, current) + flip

    @property
    def state(self) -> str:
        return states.NAMES[self.board.state]
