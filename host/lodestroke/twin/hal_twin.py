"""The twin's Hal: the firmware's metal is the plant, and time is simulated.

All input and output happens in read_counts(), as on the lock-step virtual board: drive() is only
remembered, write() only buffered, read_byte() takes what the last exchange handed over.
"""

from __future__ import annotations

from lodeboard.clock import MASK_US, us_after
from lodeboard.hal import Hal
from lodeboard.wire import messages

from .lockstep import Lockstep

FIRST_US = MASK_US + 1 - 2_000_000  # the clock starts 2 s before its 30-bit wrap
TX_MAX = 255


class TwinHal(Hal):
    """See lodeboard.hal for what each method promises."""

    capabilities = messages.CAN_VIRTUAL | messages.CAN_DEADMAN | messages.CAN_WATCHDOG
    window_frames = 32

    def __init__(
        self, lockstep: Lockstep, board_id: bytes, nonce: int, store: dict[str, bytes]
    ) -> None:
        self.lockstep = lockstep
        self.board_id = board_id
        self.boot_nonce = nonce
        self.store = store
        self.time_us: int = FIRST_US
        self.duty_a = 0
        self.duty_b = 0
        self.enable = 0
        self.tx = bytearray()
        self.rx = b""
        self.rx_at = 0

    def now_us(self) -> int:
        return self.time_us

    def read_counts(self, into) -> None:  # type: ignore[no-untyped-def]
        counts, rx = self.lockstep.exchange(self.duty_a, self.duty_b, self.enable, bytes(self.tx))
        self.tx.clear()
        if rx:
            self.rx = self.rx[self.rx_at :] + rx
            self.rx_at = 0
        for channel, count in enumerate(counts.tolist()):
            into[channel] = count

    def inputs(self) -> int:
        return self.lockstep.inputs

    def drive(self, duty_a_q15: int, duty_b_q15: int, enable: int) -> None:
        self.duty_a = duty_a_q15
        self.duty_b = duty_b_q15
        self.enable = enable

    def feed(self) -> None:
        """Simulated time cannot stall between ticks."""

    def start_guards(self) -> bool:
        return True

    def read_byte(self) -> int:
        at = self.rx_at
        if at == len(self.rx):
            return -1
        self.rx_at = at + 1
        return self.rx[at]

    def write(self, view: memoryview, n: int) -> int:
        n = min(n, TX_MAX - len(self.tx))
        self.tx += view[:n]
        return n

    def own_port(self, owned: bool) -> None:
        """Nobody else wants it."""

    def idle(self, left_us: int) -> None:
        self.time_us = us_after(self.time_us, left_us)

    def load(self, name: str) -> bytes | None:
        return self.store.get(name)

    def save(self, name: str, data: bytes) -> None:
        self.store[name] = bytes(data)

    def reset(self) -> None:
        """The engine restarts the firmware after the period in which this was asked for."""
