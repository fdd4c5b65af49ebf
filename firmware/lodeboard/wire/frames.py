"""Frames, both ways. Nothing here knows a port or a clock, and nothing raises on any input.

Up (board to host): 0xA5, body length, type, number, body, CRC-32. No escaping: the host has the
time to resynchronise, and bytes that belong to no frame are the board's text.

Down (host to board): octet stuffing as in RFC 1662: flag 0x7E, escape 0x7D, escaped octets XOR 0x20;
every octet below 0x20 is escaped too, so no control character ever appears and no REPL wakes.
Content: type, number, body, CRC-32.
"""

from ..compat import const
from . import crc
from .messages import BODY_MAX

SYNC = const(0xA5)
UP_OVERHEAD = const(8)
UP_MAX = const(64)
FLAG = const(0x7E)
ESCAPE = const(0x7D)
_FLIP = const(0x20)
_CTRL_C = const(0x03)
_DOWN_MAX = const(64)


def build_up(buf: bytearray, code: int, number: int, length: int) -> int:
    """Close an up frame whose body already stands at buf[4:4+length]; the frame's size."""
    buf[0] = SYNC
    buf[1] = length
    buf[2] = code
    buf[3] = number
    crc.seal(buf, 1, 3 + length)
    return length + UP_OVERHEAD


def build_down(code: int, number: int, body: bytes) -> bytes:
    """A whole down frame. For the host: it allocates."""
    content = bytearray(2 + len(body) + 4)
    content[0] = code
    content[1] = number
    content[2 : 2 + len(body)] = body
    crc.seal(content, 0, 2 + len(body))
    out = bytearray([FLAG])
    for octet in content:
        if octet < 0x20 or octet == FLAG or octet == ESCAPE:
            out.append(ESCAPE)
            out.append(octet ^ _FLIP)
        else:
            out.append(octet)
    out.append(FLAG)
    return bytes(out)


class DownReader:
    """The board's ear: one octet at a time, no allocation.

    feed() returns the length of type, number and body in `buf` when a whole frame has arrived,
    otherwise 0. A control octet inside a frame means that the frame is lost: it is dropped, and a
    0x03 outside any frame sets `interrupt`. Right behind an opening flag it is damage too: one
    flipped bit makes a 0x03 of a command's code.
    """

    def __init__(self) -> None:
        self.buf = bytearray(_DOWN_MAX)
        self.n = 0
        self.opened = False                   # the last octet was an opening flag
        self.escaped = False
        self.damaged = 0
        self.interrupt = False

    def feed(self, octet: int) -> int:
        """Take one octet."""
        if octet == FLAG:
            n = self.n
            whole = not self.escaped
            self.n = 0
            self.opened = n == 0
            self.escaped = False
            if n >= 6 and n <= _DOWN_MAX and whole and crc.holds(self.buf, 0, n - 4):
                return n - 4
            if n:
                self.damaged = (self.damaged + 1) & 0xFFFF
            return 0
        if octet < 0x20:
            if octet == _CTRL_C and self.n == 0 and not self.opened:
                self.interrupt = True
            elif self.n or self.opened:
                self.damaged = (self.damaged + 1) & 0xFFFF
            self.n = 0
            self.opened = False
            self.escaped = False
            return 0
        if octet == ESCAPE:
            self.escaped = True
            return 0
        if self.escaped:
            self.escaped = False
            octet ^= _FLIP
        self.opened = False
        if self.n < _DOWN_MAX:
            self.buf[self.n] = octet
        if self.n <= _DOWN_MAX:
            self.n += 1                   # one beyond the end: the closing flag will drop it
        return 0


class UpReader:
    """The host's ear: feed() bytes, then take frames and text in the order of arrival."""

    def __init__(self) -> None:
        self.pending = bytearray()
        self.text = bytearray()
        self.damaged = 0

    def feed(self, data: bytes) -> "list[tuple[int, int, bytes]]":
        """All frames that are whole by now, as (type, number, body)."""
        pending = self.pending
        pending += data
        frames = []
        at = 0
        end = len(pending)
        while at < end:
            if pending[at] != SYNC:
                sync = pending.find(SYNC, at)
                stop = end if sync < 0 else sync
                self.text += pending[at:stop]
                at = stop
                continue
            if end - at < 2:
                break
            length = pending[at + 1]
            if length > BODY_MAX:
                self.text.append(SYNC)
                at += 1
                continue
            size = length + UP_OVERHEAD
            if end - at < size:
                break
            if crc.holds(pending, at + 1, 3 + length):
                frames.append((pending[at + 2], pending[at + 3],
                               bytes(pending[at + 4 : at + 4 + length])))
                at += size
            else:
                self.damaged += 1
                self.text.append(SYNC)
                at += 1
        del pending[:at]
        return frames

    def take_text(self) -> bytes:
        """What the board printed outside frames since last asked."""
        text = bytes(self.text)
        self.text = bytearray()
        return text
