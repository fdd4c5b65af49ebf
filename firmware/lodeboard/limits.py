"""Limits, calibration and tuning that the host sends before arming: one flat array of 32-bit integers.

The order of FIELDS is the layout on the wire (`<i` each). Every value fits a small integer of a
32-bit board; the host's compiler sees to it that every product in the tick does too.
"""

import binascii
import struct
from array import array

from .compat import const

# Sensor channels, in the order in which a Hal delivers raw counts.
CHAMBER = const(0)
OUTLET = const(1)
COIL_A = const(2)
COIL_B = const(3)
SUPPLY = const(4)
INLET = const(5)
N_CHANNELS = const(6)
CHANNELS = ("chamber", "outlet", "coil_a", "coil_b", "supply", "inlet")

# Per channel: value = ((counts * gain) >> shift) + offset; counts * gain stays within 30 bits.
# "present" 0 leaves the channel at its offset (a stated inlet head, a stated supply voltage).
_CHANNEL_FIELDS = (
    "present", "gain", "shift", "offset", "low_counts", "high_counts",
    "stuck_ticks",     # 0: not watched. Trips after this many ticks without one count of change
    "jump",            # 0: not watched. Trips when the value moves more than this in one tick
)
CHANNEL_STRIDE = const(8)

FIELDS = tuple([
    name + "_" + field for name in CHANNELS for field in _CHANNEL_FIELDS
]) + (
    # pressures: soft holds the stroke back, hard trips
    "outlet_reverse_soft_pa", "outlet_reverse_hard_pa",
    "inlet_reverse_soft_pa", "inlet_reverse_hard_pa",
    "chamber_high_soft_pa", "chamber_high_hard_pa",
    "chamber_low_soft_pa", "chamber_low_hard_pa",
    "outlet_high_soft_pa", "outlet_high_hard_pa",
    "outlet_low_hard_pa",
    # current
    "target_max_ma", "over_current_ma", "coil_open_ma", "coil_open_ticks",
    "supply_low_mv",
    # heat, two nodes per coil: see thermal.py for the units
    "ambient_mc", "hot_soft_mc", "hot_hard_mc", "r20_mohm", "alpha_ppm",
    "heat_winding_q", "heat_leak_winding_q", "heat_leak_body_q", "heat_body_leak_q",
    # regulator: duty in Q15
    "kp_q8", "ki_q8", "feed_q8", "response_q8", "duty_min_q15", "duty_max_q15",
    # fold-back of the target while a soft level is exceeded, 256 = full target
    "fold_min_q8", "fold_fall_q8", "fold_rise_q8",
    # time
    "tick_us", "late_us", "silence_ms", "ramp_ma", "sensor_bad_ticks", "deadman_needed",
    # account
    "tail_ticks",
)
N_FIELDS = len(FIELDS)
INDEX = {name: i for i, name in enumerate(FIELDS)}
BLOB_BYTES = 4 * N_FIELDS

# Limits that act when a value falls to them; all others act when a value rises to them.
LOWER_BOUNDS = (
    INDEX["chamber_low_soft_pa"], INDEX["chamber_low_hard_pa"], INDEX["outlet_low_hard_pa"],
    INDEX["supply_low_mv"],
)


# What a schedule step may tighten lies between these two.
FIRST_STEP_LIMIT = INDEX["outlet_reverse_soft_pa"]
LAST_STEP_LIMIT = INDEX["hot_hard_mc"]
_N_FIELDS = const(89)          # a board's compiler folds it; held to FIELDS by a test
_SMALL = const(0x3FFFFFFF)
_SHIFTS = tuple([INDEX[name + "_shift"] for name in CHANNELS])
_TICK_US = INDEX["tick_us"]
_RAMP_MA = INDEX["ramp_ma"]


class Blob:
    """Bytes that arrive in parts and count only once sealed with their length, CRC and fingerprint."""

    def __init__(self, size: int) -> None:
        self.data = bytearray(size)
        self.length = 0
        self.crc32 = 0
        self.fingerprint = b"\0" * 8
        self.sealed = False

    def put(self, offset: int, data: bytes, count: int) -> bool:
        """Store count bytes at offset; False when they would not fit. Breaks the seal."""
        self.sealed = False
        if count > len(data) or offset + count > len(self.data):
            return False
        self.data[offset : offset + count] = data[:count]
        return True

    def crc_now(self) -> int:
        """CRC-32 of what is stored now."""
        crc32: int = binascii.crc32(bytes(self.data[: self.length]))
        return crc32

    def check(self, length: int, crc32: int) -> bool:
        """Whether the first length bytes have this CRC."""
        if length > len(self.data):
            return False
        self.length = length
        return self.crc_now() == crc32


class Limits:
    """The rig's limits as sent, the copy in force, and a complement that shows corruption.

    A schedule step may tighten a limit in `active`; `values` stays what the host sent. One word a
    tick is compared with its complement, and the one in force must not be looser: whatever memory
    does is found within a lap of N_FIELDS ticks.
    """

    def __init__(self) -> None:
        self.blob = Blob(BLOB_BYTES)
        self.values: "array[int]" = array("i", [0] * N_FIELDS)
        self.active: "array[int]" = array("i", [0] * N_FIELDS)
        self.shadow: "array[int]" = array("i", [-1] * N_FIELDS)
        self.at = 0

    def seal(self, length: int, crc32: int, fingerprint: bytes) -> bool:
        """Take the stored bytes as limits if they are whole."""
        blob = self.blob
        if length != BLOB_BYTES or not blob.check(length, crc32):
            return False
        for i in range(N_FIELDS):
            self.active[i] = struct.unpack_from("<i", blob.data, 4 * i)[0]
        if not _can_run(self.active):
            return False             # the tick still converts with what it had
        for i in range(N_FIELDS):
            value = self.active[i]
            self.values[i] = value
            self.shadow[i] = ~value
        self.at = 0
        blob.crc32 = crc32
        blob.fingerprint = fingerprint
        blob.sealed = True
        return True

    def whole(self) -> bool:
        """Sealed, and every word still what was sealed."""
        if not self.blob.sealed or self.blob.crc_now() != self.blob.crc32:
            return False
        for i in range(N_FIELDS):
            if self.values[i] ^ self.shadow[i] != -1:
                return False
        return True

    def get(self, name: str) -> int:
        """A limit as the host sent it, by name. For code that does not run every tick."""
        return self.values[INDEX[name]]

    def relax(self) -> None:
        """Every limit that a step may have tightened back to the rig's."""
        values = self.values
        active = self.active
        for i in range(FIRST_STEP_LIMIT, LAST_STEP_LIMIT + 1):
            active[i] = values[i]

    def tighten(self, field: int, value: int) -> None:
        """Put a step's limit in force; one looser than what is in force already is ignored."""
        if field in LOWER_BOUNDS:
            if value > self.active[field]:
                self.active[field] = value
        elif value < self.active[field]:
            self.active[field] = value

    def patrol(self) -> bool:
        """Look at one more word; False, and `at` stays on it, when it is not what was sealed."""
        i = self.at
        value = self.values[i]
        if value ^ self.shadow[i] != -1:
            return False
        loose = self.active[i] - value
        if loose and (loose < 0) == (i in LOWER_BOUNDS):
            return False
        i += 1
        self.at = i if i < _N_FIELDS else 0
        return True


def _can_run(values: "array[int]") -> bool:
    """Whether a board could run on these: small integers, a period, a ramp that ends."""
    for value in values:
        if value < -_SMALL or value > _SMALL:
            return False
    for at in _SHIFTS:
        if values[at] < 0 or values[at] > 29:
            return False
    return 100 <= values[_TICK_US] <= 100000 and values[_RAMP_MA] > 0
