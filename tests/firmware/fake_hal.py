"""A Hal whose metal is a script: counts, inputs, bytes and time are what the test says.

It implements the contract of lodeboard.hal; it stands for no port's `machine` and models no plant.
"""

from __future__ import annotations

from lodeboard.clock import MASK_US, us_after
from lodeboard.hal import Hal
from lodeboard.limits import CHANNEL_STRIDE, N_CHANNELS
from lodeboard.wire import messages


class FakeHal(Hal):
    """Sensors read `values` (Pa, mA, mV) through the limits' own scales; drives are kept."""

    capabilities = messages.CAN_DEADMAN | messages.CAN_VIRTUAL
    window_frames = 32
    board_id = b"fake\0\0\0\0"

    def __init__(self, values: dict[str, int] | None = None) -> None:
        self.boot_nonce = 77
        self.reset_was_watchdog = False
        self.time_us = MASK_US - 1_999_999
        self.counts = [0] * N_CHANNELS
        self.drives: list[tuple[int, int, int]] = []
        self.input_bits = 0
        self.rx = bytearray()
        self.tx = bytearray()
        self.room = 1 << 20
        self.store: dict[str, bytes] = {}
        self.saved_while: list[int] = []
        self.feeds = 0
        self.guards = 0

    @property
    def last_drive(self) -> tuple[int, int, int]:
        return self.drives[-1]

    def now_us(self) -> int:
        return self.time_us

    def read_counts(self, into) -> None:
        for channel in range(N_CHANNELS):
            into[channel] = self.counts[channel]

    def inputs(self) -> int:
        return self.input_bits

    def drive(self, duty_a_q15: int, duty_b_q15: int, enable: int) -> None:
        self.drives.append((duty_a_q15, duty_b_q15, enable))

    def feed(self) -> None:
        self.feeds += 1

    def start_guards(self) -> bool:
        self.guards += 1
        return True

    def read_byte(self) -> int:
        return self.rx.pop(0) if self.rx else -1

    def write(self, view, n: int) -> int:
        n = min(n, self.room)
        self.tx += bytes(view[:n])
        self.room -= n
        return n

    def own_port(self, owned: bool) -> None:
        pass

    def idle(self, left_us: int) -> None:
        self.time_us = us_after(self.time_us, left_us)

    def load(self, name: str) -> bytes | None:
        return self.store.get(name)

    def save(self, name: str, data: bytes) -> None:
        self.store[name] = bytes(data)

    def reset(self) -> None:
        raise AssertionError("nobody asked for a reset")


def counts_for(values, channel: int, wanted: int) -> int:
    """The raw count whose converted value is the nearest at or above `wanted`."""
    base = channel * CHANNEL_STRIDE
    gain, shift, offset = values[base + 1], values[base + 2], values[base + 3]
    raw = ((wanted - offset) << shift) // gain
    while ((raw * gain) >> shift) + offset < wanted:
        raw += 1
    return raw
