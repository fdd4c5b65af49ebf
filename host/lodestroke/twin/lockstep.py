"""Firmware and plant in lock-step: one exchange per control tick, shared by twin and virtual board.

Both ends of the link and the drive pass through here and nowhere else, so that the twin and the
lock-step virtual board cannot differ in what the firmware sees or when.
"""

from __future__ import annotations

from typing import Any, Protocol

RX_MAX = 32  # bytes for the firmware per exchange: what its link takes in one tick


class SteppedPlant(Protocol):
    """What lock-step needs of a plant. `counts`: raw, in the order of lodeboard.limits.CHANNELS."""

    counts: Any

    def step(self, duty_a_q15: int, duty_b_q15: int, enable: int) -> Any:
        """Advance exactly one tick under this drive."""
        ...


class Lockstep:
    """Advances the plant with the drive of the tick before, and carries the link's bytes both ways.

    `inputs` is what the board's input pins show (bit 0: stop input, bit 1: cut-out open); a test or
    the virtual board's side channel sets it. `enable` is what the driver's enable line showed last.
    """

    def __init__(self, plant: SteppedPlant) -> None:
        self.plant = plant
        self.inputs = 0
        self.enable = 0
        self.exchanges = 0
        self._down = bytearray()
        self._up = bytearray()

    def exchange(
        self, duty_a_q15: int, duty_b_q15: int, enable: int, tx: bytes
    ) -> tuple[Any, bytes]:
        """Counts after one more tick under this drive, and at most RX_MAX bytes for the firmware.

        The very first exchange only reads: no drive has been decided before it.
        """
        if self.exchanges:
            self.plant.step(duty_a_q15, duty_b_q15, enable)
        self.enable = enable
        self.exchanges += 1
        self.board_sent(tx)
        rx = bytes(self._down[:RX_MAX])
        del self._down[:RX_MAX]
        return self.plant.counts, rx

    def board_sent(self, tx: bytes) -> None:
        """Queue bytes from the firmware that come without an exchange: its last ones."""
        self._up += tx

    def host_write(self, data: bytes) -> None:
        """Queue bytes from the host; the firmware gets them from the next exchange on."""
        self._down += data

    def host_read(self) -> bytes:
        """All that the firmware has sent since the last call."""
        out = bytes(self._up)
        self._up.clear()
        return out
