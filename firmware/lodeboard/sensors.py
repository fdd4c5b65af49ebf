"""Raw counts to Pa, mA and mV in integers, and whether they can be believed.

convert() allocates nothing. While a channel is out of range for fewer than sensor_bad_ticks ticks, its
last good value stands in.
"""

from array import array

from . import trips
from .compat import const
from .limits import CHANNEL_STRIDE, N_CHANNELS, Limits

_SENSOR_BAD_TICKS = const(86)       # held to limits.FIELDS by a test


class Sensors:
    """values[channel] after each convert(); the first implausible channel in `channel`."""

    def __init__(self, limits: Limits) -> None:
        self.limits = limits
        self.counts = array("i", [0] * N_CHANNELS)
        self.values = array("i", [0] * N_CHANNELS)
        self.last = array("i", [-1] * N_CHANNELS)
        self.bad = array("i", [0] * N_CHANNELS)
        self.still = array("i", [0] * N_CHANNELS)
        self.present = array("i", [0] * N_CHANNELS)
        self.n_present = 0
        self.channel = 0
        self.value = 0
        self.limit = 0

    def load(self) -> None:
        """Take which channels are there; those that are not stay at their stated value."""
        v = self.limits.values
        self.n_present = 0
        for channel in range(N_CHANNELS):
            base = channel * CHANNEL_STRIDE
            self.values[channel] = v[base + 3]
            self.last[channel] = -1
            self.bad[channel] = 0
            self.still[channel] = 0
            if v[base]:
                self.present[self.n_present] = channel
                self.n_present += 1

    def convert(self) -> int:
        """Convert and check the counts; a trip code or 0. The order of channels decides which is first.

        The tick reads the counts, and nobody else: one read a period, in every place.
        """
        counts = self.counts
        values = self.values
        last = self.last
        v = self.limits.values
        found = 0
        for j in range(self.n_present):
            channel = self.present[j]
            base = channel << 3                      # CHANNEL_STRIDE fields each
            raw = counts[channel]
            if raw < v[base + 4] or raw > v[base + 5]:
                self.bad[channel] += 1
                if found == 0:
                    found = self._out_of_range(channel, raw)
                continue
            self.bad[channel] = 0
            value = ((raw * v[base + 1]) >> v[base + 2]) + v[base + 3]
            before = last[channel]
            if raw == before:
                if v[base + 6]:          # not watched, not counted: it would outgrow a small integer
                    self.still[channel] += 1
                if v[base + 6] and self.still[channel] >= v[base + 6] and found == 0:
                    found = self._implausible(trips.SENSOR_STUCK, channel, raw, v[base + 6])
            else:
                self.still[channel] = 0
                last[channel] = raw
                most = v[base + 7]
                if most and before >= 0 and found == 0:
                    moved = value - values[channel]
                    if moved < 0:
                        moved = -moved
                    if moved >= most:
                        found = self._implausible(trips.SENSOR_JUMP, channel, moved, most)
            values[channel] = value
        return found

    def _out_of_range(self, channel: int, raw: int) -> int:
        """A trip code once it has been so for long enough; until then the last good value stands."""
        v = self.limits.values
        base = channel << 3
        if self.bad[channel] < v[_SENSOR_BAD_TICKS]:
            return 0
        limit = v[base + 4] if raw < v[base + 4] else v[base + 5]
        return self._implausible(trips.SENSOR_RANGE, channel, raw, limit)

    def any_bad(self) -> bool:
        """Whether any channel that is there was out of range when last converted."""
        for channel in range(N_CHANNELS):
            if self.bad[channel]:
                return True
        return False

    def _implausible(self, code: int, channel: int, value: int, limit: int) -> int:
        """Keep the first-out channel with its value and limit."""
        self.channel = channel
        self.value = value
        self.limit = limit
        return code
