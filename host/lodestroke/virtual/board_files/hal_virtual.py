"""The Hal of the virtual board: a real interpreter, the plant beyond two pipes.

Every tick `read_counts` trades the drive for raw counts; the plant advances one tick per exchange.
Lock-step: the link's bytes travel in the same exchange and time is simulated. Paced: the link runs
over stdin and stdout, like a USB port, and time is the computer's. Nothing here allocates after
start-up.
"""

import os
import select
import sys
import time

import micropython
import wires
from lodeboard.clock import MASK_US, us_after
from lodeboard.hal import Hal
from lodeboard.store import Store
from lodeboard.wire.messages import CAN_DEADMAN, CAN_VIRTUAL, CAN_WATCHDOG

_RX_SIZE = 256
DEADMAN_MS = 100             # longer than the worst pause of a busy computer's scheduler
WATCHDOG_MS = 3000
_FIRST_US = MASK_US + 1 - 2000000     # the clock starts 2 s before its 30-bit wrap
_ETX = 3


class VirtualHal(Hal):
    """Both modes; what differs is where link bytes travel and whose time counts."""

    def __init__(self, lockstep, store):
        self.lockstep = lockstep
        self.store = store
        self.files = {}                       # lock-step keeps stored files in memory, like the twin
        self.capabilities = CAN_VIRTUAL | CAN_DEADMAN | (0 if lockstep else CAN_WATCHDOG)
        name = (os.getenv("LODESTROKE_BOARD_ID") or "virtual").encode()
        self.board_id = (name + b"\0" * 8)[:8]
        self.boot_nonce = int(os.getenv("LODESTROKE_NONCE") or "1")
        self.reset_was_watchdog = os.getenv("LODESTROKE_RESET") == "watchdog"
        self.window_frames = 32
        self.duty_a = 0
        self.duty_b = 0
        self.enable = 0
        self.rx = bytearray(_RX_SIZE)
        self.rx_new = bytearray(_RX_SIZE)
        self.rx_at = 0
        self.rx_n = 0
        self.n_tx = 0
        self.held = False                     # a 0x03 was read: what follows belongs to the REPL
        self.time_us = _FIRST_US
        self.zero_us = 0
        self._ready_streams()

    def _ready_streams(self):
        self.ticks_us = time.ticks_us
        self.sleep_us = time.sleep_us
        self.zero_us = self.ticks_us()
        self.stdin = sys.stdin.buffer
        self.stdout = sys.stdout.buffer
        self.one = bytearray(1)
        self.can_read = select.poll()
        self.can_read.register(sys.stdin, select.POLLIN)
        self.can_write = select.poll()
        self.can_write.register(sys.stdout, select.POLLOUT)
        for _ in self.can_read.ipoll(0):      # the first call allocates the tuple that is re-used
            pass
        for _ in self.can_write.ipoll(0):
            pass

    def now_us(self):
        if self.lockstep:
            return self.time_us
        return (self.ticks_us() - self.zero_us + _FIRST_US) & MASK_US

    def read_counts(self, into):
        self.held = False
        n_tx = self.n_tx
        self.n_tx = 0
        wires.ask(0, self.duty_a, self.duty_b, self.enable, n_tx)
        reply = wires.reply
        for i in range(6):
            into[i] = reply[i]
        n = reply[6] >> 8
        if n:
            self._take(n)

    def _take(self, n):
        """Bytes that came with an exchange go behind those not yet read; what has no room is lost."""
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

    def inputs(self):
        return wires.reply[6] & 0xFF

    def drive(self, duty_a_q15, duty_b_q15, enable):
        self.duty_a = duty_a_q15
        self.duty_b = duty_b_q15
        self.enable = enable

    def feed(self):
        """Nothing to do: the relay takes each exchange as a sign of life."""

    def start_guards(self):
        if not self.lockstep:
            wires.ask(wires.GUARD, DEADMAN_MS, WATCHDOG_MS, 0, 0)
        return True

    def read_byte(self):
        if self.lockstep:
            at = self.rx_at
            if at == self.rx_n:
                return -1
            self.rx_at = at + 1
            return self.rx[at]
        if self.held:
            return -1
        for _ in self.can_read.ipoll(0):
            one = self.one
            if not self.stdin.readinto(one):
                return -1
            byte = one[0]
            if byte == _ETX:
                self.held = True
            return byte
        return -1

    def write(self, view, n):
        if self.lockstep:
            return self._keep(view, n)
        for _ in self.can_write.ipoll(0):
            return self.stdout.write(view, n) or 0
        return 0

    def _keep(self, view, n):
        at = wires.HEAD + self.n_tx
        out = wires.out
        if n > wires.TX_MAX - self.n_tx:
            n = wires.TX_MAX - self.n_tx
        for i in range(n):
            out[at + i] = view[i]
        self.n_tx += n
        return n

    def own_port(self, owned):
        if self.lockstep:
            return
        if owned:
            wires.ask(wires.OWN, 0, 0, 0, 0)                  # from here on the relay passes 0x03 as data
            micropython.kbd_intr(-1)
        else:
            micropython.kbd_intr(3)
            wires.ask(wires.RELEASE, 0, 0, 0, 0)

    def idle(self, left_us):
        if self.lockstep:
            self.time_us = us_after(self.time_us, left_us)
        elif left_us > 150:
            self.sleep_us(left_us - 100)      # the computer has other work; it wakes up late anyway

    def load(self, name):
        if self.lockstep:
            return self.files.get(name)
        return self.store.load(name)

    def save(self, name, data):
        if self.lockstep:
            self.files[name] = bytes(data)
        else:
            self.store.save(name, data)

    def reset(self):
        """The relay starts a fresh interpreter, as a board's reset would."""
        wires.ask(wires.RESET, 0, 0, 0, 0)
        sys.exit(0)


def open_hal(config):
    """The Hal of this board, by the slot's board.json (which has nothing to say here)."""
    return VirtualHal(os.getenv("LODESTROKE_MODE") == "lockstep", Store("/store"))
