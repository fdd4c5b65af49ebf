"""Raw pseudo-terminals, how much waits in one, and the line ends of a board."""

from __future__ import annotations

import array
import fcntl
import os
import pty
import termios
import tty


def open_raw() -> tuple[int, int, str]:
    """(master, slave, name of the slave), raw in both directions; the master never blocks."""
    master, slave = pty.openpty()
    tty.setraw(slave)
    os.set_blocking(master, False)
    return master, slave, os.ttyname(slave)


def waiting(slave: int) -> int:
    """Bytes written to the master that nobody has read from the slave yet."""
    count = array.array("i", [0])
    fcntl.ioctl(slave, termios.FIONREAD, count)
    return count[0]


def forget(slave: int) -> None:
    """Drop what waits in either direction."""
    termios.tcflush(slave, termios.TCIOFLUSH)


def forget_by_name(name: str) -> None:
    """Drop what waits on a terminal that nobody has open: the next reader starts clean."""
    slave = os.open(name, os.O_RDWR | os.O_NOCTTY)
    try:
        forget(slave)
    finally:
        os.close(slave)


class LineMender:
    """LF becomes CR LF, as a board's REPL sends it; what is CR LF already stays."""

    def __init__(self) -> None:
        self._last = b""

    def mend(self, data: bytes) -> bytes:
        """The same text with a board's line ends; remembers a CR at the end of the last part."""
        if not data:
            return data
        first_is_whole = self._last == b"\r" and data[:1] == b"\n"
        self._last = data[-1:]
        mended = data.replace(b"\r\n", b"\n").replace(b"\n", b"\r\n")
        return mended[1:] if first_is_whole else mended
