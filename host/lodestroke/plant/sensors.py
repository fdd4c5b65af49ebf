"""Sensors: a straight line to counts, with noise, rounding and saturation.

Noise is counter-based: a hash of seed, channel and tick, so that it does not depend on who reads
what when. Sources: splitmix64 mixing (Steele, Lea and Flood, 2014); Box and Muller, 1958.
"""

from __future__ import annotations

import math

import numpy as np
from numba import njit

from . import layout as k

_M1 = np.uint64(0xBF58476D1CE4E5B9)
_M2 = np.uint64(0x94D049BB133111EB)
_GOLDEN = np.uint64(0x9E3779B97F4A7C15)


@njit(cache=True)
def _mix(z: np.uint64) -> np.uint64:
    z = (z ^ (z >> np.uint64(30))) * _M1
    z = (z ^ (z >> np.uint64(27))) * _M2
    return z ^ (z >> np.uint64(31))


@njit(cache=True)
def normal(seed: np.uint64, channel: int, tick: int) -> float:
    """A standard normal number that only seed, channel and tick decide."""
    key = seed * _GOLDEN + np.uint64(tick) * np.uint64(16) + np.uint64(channel)
    a = _mix(key + _GOLDEN)
    b = _mix(a + _GOLDEN)
    scale = 1.0 / 9007199254740992.0
    u = (float(a >> np.uint64(11)) + 1.0) * scale
    v = float(b >> np.uint64(11)) * scale
    return math.sqrt(-2.0 * math.log(u)) * math.cos(2.0 * math.pi * v)


@njit(cache=True)
def count(
    sensors: np.ndarray, lagged: np.ndarray, seed: np.uint64, tick: int, counts: np.ndarray
) -> None:
    """Raw counts of every channel into counts (int64)."""
    for channel in range(sensors.shape[0]):
        s = sensors[channel]
        if s[k.S_PRESENT] == 0.0:
            continue
        value = lagged[channel]
        if s[k.S_NOISE] > 0.0:
            value += s[k.S_NOISE] * normal(seed, channel, tick)
        raw = s[k.S_CL] + (value - s[k.S_LOW]) / (s[k.S_HIGH] - s[k.S_LOW]) * (
            s[k.S_CH] - s[k.S_CL]
        )
        counts[channel] = int(min(max(round(raw), 0.0), s[k.S_FULL]))
