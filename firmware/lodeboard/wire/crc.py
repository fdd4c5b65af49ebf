"""CRC-32 (IEEE 802.3) over a buffer, stored and compared in place, little-endian.

On a 32-bit board a 32-bit integer would be allocated, so there the CRC is kept as two 16-bit halves
and never becomes one number. CPython uses binascii; boards with a viper emitter use crc_fast.py;
the rest use the bytecode below. tests/golden/test_frames.py holds all of them to one table.
"""

import binascii
from array import array

from ..compat import MICROPYTHON, const

_POLY = const(0xEDB88320)          # reflected 0x04C11DB7
_OUT = const(512)


def make_table() -> "array[int]":
    """256 low halves, 256 high halves, then two places for the result."""
    work = array("H", [0] * 514)
    for i in range(256):
        c = i
        for _ in range(8):
            c = (c >> 1) ^ _POLY if c & 1 else c >> 1
        work[i] = c & 0xFFFF
        work[256 + i] = c >> 16
    return work


def halves(buf: bytearray, start: int, n: int, work: "array[int]") -> None:
    """CRC of n bytes from start; low half to work[512], high half to work[513]."""
    lo = 0xFFFF
    hi = 0xFFFF
    for i in range(start, start + n):
        k = (lo ^ buf[i]) & 0xFF
        lo = ((lo >> 8) | ((hi & 0xFF) << 8)) ^ work[k]
        hi = (hi >> 8) ^ work[256 + k]
    work[_OUT] = lo ^ 0xFFFF
    work[_OUT + 1] = hi ^ 0xFFFF


_work = make_table()
_halves = halves
if MICROPYTHON:
    try:
        from . import crc_fast

        _halves = crc_fast.halves  # type: ignore[assignment]
    except (ImportError, SyntaxError):
        pass                       # no viper emitter on this port: the bytecode does it


def _compute(buf: bytearray, start: int, n: int) -> None:
    """Both halves of the CRC of buf[start:start+n] into the result places of _work."""
    if MICROPYTHON:
        _halves(buf, start, n, _work)
        return
    crc = binascii.crc32(memoryview(buf)[start : start + n])
    _work[_OUT] = crc & 0xFFFF
    _work[_OUT + 1] = crc >> 16


def seal(buf: bytearray, start: int, n: int) -> None:
    """Write the CRC of buf[start:start+n] behind it."""
    _compute(buf, start, n)
    lo = _work[_OUT]
    hi = _work[_OUT + 1]
    at = start + n
    buf[at] = lo & 0xFF
    buf[at + 1] = lo >> 8
    buf[at + 2] = hi & 0xFF
    buf[at + 3] = hi >> 8


def holds(buf: bytearray, start: int, n: int) -> bool:
    """Whether the four bytes behind buf[start:start+n] are its CRC."""
    _compute(buf, start, n)
    at = start + n
    low = buf[at] | (buf[at + 1] << 8)
    high = buf[at + 2] | (buf[at + 3] << 8)
    return low == _work[_OUT] and high == _work[_OUT + 1]
