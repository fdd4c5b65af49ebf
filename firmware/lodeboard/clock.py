"""Device time: 30-bit microseconds that wrap every 17.9 minutes. Allocates nothing."""

from .compat import const

MASK_US = const(0x3FFFFFFF)
_SIGN_US = const(0x20000000)


def us_since(now_us: int, then_us: int) -> int:
    """Signed microseconds between two 30-bit device times; right within plus or minus 536 s.

    Both operands must already be masked. A plain "add half, mask, subtract half" leaves the small
    integers of a 32-bit board; exclusive-or stays inside them. Longer spans are counted in ticks.
    """
    return (((now_us - then_us) & 0x3FFFFFFF) ^ 0x20000000) - 0x20000000


def us_after(then_us: int, span_us: int) -> int:
    """The device time span_us (0 to 2**29) after then_us, without leaving 30 bits on the way."""
    left_us = MASK_US - then_us
    if span_us > left_us:
        return span_us - left_us - 1
    return then_us + span_us
