"""The inner loop of crc.py for ports with a viper emitter. MicroPython only; crc.halves is its twin."""

import micropython


@micropython.viper
def halves(buf: ptr8, start: int, n: int, work: ptr16):  # type: ignore[no-untyped-def]  # noqa: F821
    lo = 0xFFFF
    hi = 0xFFFF
    i = start
    end = start + n
    while i < end:
        k = (lo ^ buf[i]) & 0xFF
        lo = ((lo >> 8) | ((hi & 0xFF) << 8)) ^ work[k]
        hi = (hi >> 8) ^ work[256 + k]
        i += 1
    work[512] = lo ^ 0xFFFF
    work[513] = hi ^ 0xFFFF
