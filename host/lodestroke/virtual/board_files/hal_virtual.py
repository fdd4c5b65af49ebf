"""The Hal of the virtual board: a real interpreter, the plant beyond two pipes.

Every tick `read_counts` trades the drive for raw counts; the plant advances one tick per exchange.
Lock-step: the link's bytes travel in the same exchange and time is simulated. Paced: the link runs
over stdin and stdout, like a USB port, and time is the computer's. Nothing here allocates after
start-up.
"""

import os
import sys
import time

import wires

from lodeboard.clock import MASK_US, us_after
from lodeboard.hal_stdio import StdioHal
from lodeboard.store import Store
from lodeboard.wire.messages import CAN_DEADMAN, CAN_VIRTUAL, CAN_WATCHDOG

DEADMAN_MS = 250             # longer than the worst pause of a busy computer's scheduler
WATCHDOG_MS = 3000
_FIRST_US = MASK_US + 1 - 2000000     # the clock starts 2 s before its 30-bit wrap
_RX_SIZE = 256
_WINDOW_FRAMES = 32          # a pseudo-terminal holds more than a USB port


class VirtualHal(StdioHal):
    """What both modes share. Time and link are the computer's: the paced board."""

    capabilities = CAN_VIRTUAL | CAN_DEADMAN | CAN_WATCHDOG
    window_frames = _WINDOW_FRAMES

    def __init__(self):
        StdioHal.__init__(self)
        name = (os.getenv("LODESTROKE_BOARD_ID") or "virtual").encode()
        self.board_id = (name + b"\0" * 8)[:8]
        self.boot_nonce = int(os.getenv("LODESTROKE_NONCE") or "1")
        self.reset_was_watchdog = os.getenv("LODESTROKE_RESET") == "watchdog"
        self.store = Store("/store")
        self.duty_a = 0
        self.duty_b = 0
        self.enable = 0
        self.ticks_us = time.ticks_us
        self.sleep_us = time.sleep_us
        self.zero_us = (self.ticks_us() - _FIRST_US) & MASK_US

    def now_us(self):
        return (self.ticks_us() - self.zero_us) & MASK_US

    def read_counts(self, into):
        wires.ask(wires.EXCHANGE, self.duty_a, self.duty_b, self.enable, 0)
        reply = wires.reply
        for i in range(6):
            into[i] = reply[i]

    def inputs(self):
        return wires.reply[6] & 0xFF

    def drive(self, duty_a_q15, duty_b_q15, enable):
        """Takes effect at the next exchange."""
        self.duty_a = duty_a_q15
        self.duty_b = duty_b_q15
        self.enable = enable

    def start_guards(self):
        """The relay takes every exchange as a sign of life from here on."""
        wires.ask(wires.GUARD, DEADMAN_MS, WATCHDOG_MS, 0, 0)
        return True

    def own_port(self, owned):
        # No interrupt may come while a request is under way: its reply would stay in the pipe.
        if owned:
            StdioHal.own_port(self, True)
            wires.ask(wires.OWN, 0, 0, 0, 0)      # from here on the relay passes 0x03 as data
        else:
            wires.ask(wires.RELEASE, 0, 0, 0, 0)
            StdioHal.own_port(self, False)

    def idle(self, left_us):
        if left_us > 150:
            self.sleep_us(left_us - 100)          # the computer has other work; it wakes us late

    def load(self, name):
        return self.store.load(name)

    def save(self, name, data):
        self.store.save(name, data)

    def reset(self):
        """The relay starts a fresh interpreter, as a board's reset would."""
        wires.ask(wires.RESET, 0, 0, 0, 0)
        sys.exit(0)


class LockstepHal(VirtualHal):
    """Simulated time; every byte of the link travels with an exchange."""

    def __init__(self):
        VirtualHal.__init__(self)
        self.store = Store(os.getenv("LODESTROKE_FLASH"))
        self.time_us = _FIRST_US
        self.rx = bytearray(_RX_SIZE)
        self.rx_new = bytearray(_RX_SIZE)
        self.rx_at = 0
        self.rx_n = 0
        self.n_tx = 0

    def now_us(self):
        return self.time_us

    def idle(self, left_us):
        self.time_us = us_after(self.time_us, left_us)

    def read_counts(self, into):
        n_tx = self.n_tx
        self.n_tx = 0
        wires.ask(wires.EXCHANGE, self.duty_a, self.duty_b, self.enable, n_tx)
        reply = wires.reply
        for i in range(6):
            into[i] = reply[i]
        n = reply[6] >> 8
        if n:
            self._take(n)

    def _take(self, n):
        """New bytes go behind those not yet read; what has no room is lost."""
        new = self.rx_new
        wires.replies.readinto(new, n)
        if self.rx_at == self.rx_n:
            self.rx_at = 0
            self.rx_n = 0
        rx = self.rx
        end = self.rx_n
        for i in range(n):
            if end == _RX_SIZE:
                break
            rx[end] = new[i]
            end += 1
        self.rx_n = end

    def read_byte(self):
        at = self.rx_at
        if at == self.rx_n:
            return -1
        self.rx_at = at + 1
        return self.rx[at]

    def write(self, view, n):
        room = wires.TX_MAX - self.n_tx
        n = min(n, room)
        out = wires.out
        at = wires.HEAD + self.n_tx
        for i in range(n):
            out[at + i] = view[i]
        self.n_tx += n
        return n

    def start_guards(self):
        return True

    def own_port(self, owned):
        """Nobody else wants it; what was written last still has to go out."""
        if not owned:
            wires.ask(wires.RELEASE, 0, 0, 0, self.n_tx)
            self.n_tx = 0


def open_hal(config):
    """The Hal of this board. The slot's board.json has nothing to say to it."""
    if os.getenv("LODESTROKE_MODE") == "lockstep":
        return LockstepHal()
    return VirtualHal()
