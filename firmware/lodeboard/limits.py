"""Limits, calibration and tuning that the host sends before arming: one flat array of 32-bit integers.

The order of FIELDS is the layout on the wire (`<i` each). Every value fits a small integer of a
32-bit board; the host's compiler sees to it that every product in the tick does too.
"""

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

FIELDS = tuple(
    name + "_" + field for name in CHANNELS for field in _CHANNEL_FIELDS
) + (
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
    "kp_q8", "ki_q8", "feed_q8", "duty_min_q15", "duty_max_q15",
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
