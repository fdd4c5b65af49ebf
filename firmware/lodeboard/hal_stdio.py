"""Link bytes over the interpreter's own stdin and stdout: what boards with a USB port share.

read_byte and write never wait and allocate nothing: a warmed-up `ipoll` says whether a byte is
there, one-byte `readinto` takes it. Only for the real interpreter.
"""

import select
import sys

import micropython

from .hal import Hal

_ETX = 3


class StdioHal(Hal):
    """Owns the port while the firmware runs; 0x03 is data then."""

    def __init__(self) -> None:
        self.stdin = sys.stdin.buffer
        self.stdout = sys.stdout.buffer
        self.one = bytearray(1)
        self.held = False             # a 0x03 was read: what follows it belongs to the REPL
        self.can_read = select.poll()
        self.can_read.register(sys.stdin, select.POLLIN)
        self.can_write = select.poll()
        self.can_write.register(sys.stdout, select.POLLOUT)
        for _ in self.can_read.ipoll(0):      # the first call makes the tuple that is re-used
            pass
        for _ in self.can_write.ipoll(0):
            pass

    def read_byte(self) -> int:
        if self.held:
            return -1
        for _ in self.can_read.ipoll(0):
            one = self.one
            if not self.stdin.readinto(one):
                return -1
            octet = one[0]
            if octet == _ETX:
                self.held = True
            return octet
        return -1

    def write(self, view: memoryview, n: int) -> int:
        for _ in self.can_write.ipoll(0):
            return self.stdout.write(view, n) or 0
        return 0

    def feed(self) -> None:
        self.held = False

    def own_port(self, owned: bool) -> None:
        micropython.kbd_intr(-1 if owned else 3)
