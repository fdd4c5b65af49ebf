"""Trip codes with their stop category (IEC 60204-1): 0 drops enable at once, 1 ramps down first.

The board sends numbers only; the host words them (lodestroke/trips.py). A trip that is found while
the coil is off is category 0 as well: there is nothing to ramp.
"""

from .compat import const

NONE = const(0)
OUTLET_REVERSE = const(1)
INLET_REVERSE = const(2)
CHAMBER_HIGH = const(3)
CHAMBER_LOW = const(4)
OUTLET_HIGH = const(5)
OUTLET_LOW = const(6)
OVER_CURRENT = const(7)
COIL_HOT = const(8)
COIL_OPEN = const(9)
SENSOR_RANGE = const(10)
SENSOR_STUCK = const(11)
SENSOR_JUMP = const(12)
SUPPLY_LOW = const(13)
HOST_SILENT = const(14)
TICK_LATE = const(15)
LIMITS_CORRUPT = const(16)
PROGRAM_CORRUPT = const(17)
STOP_INPUT = const(18)
CUTOUT_OPEN = const(19)
WATCHDOG_RESET = const(20)
FIRMWARE_FAULT = const(21)

# code: (name, stop category). Names are the JSON names too.
TABLE = {
    OUTLET_REVERSE: ("outlet_reverse", 0),
    INLET_REVERSE: ("inlet_reverse", 0),
    CHAMBER_HIGH: ("chamber_high", 0),
    CHAMBER_LOW: ("chamber_low", 0),
    OUTLET_HIGH: ("outlet_high", 0),
    OUTLET_LOW: ("outlet_low", 0),
    OVER_CURRENT: ("over_current", 0),
    COIL_HOT: ("coil_hot", 1),
    COIL_OPEN: ("coil_open", 0),
    SENSOR_RANGE: ("sensor_range", 0),
    SENSOR_STUCK: ("sensor_stuck", 0),
    SENSOR_JUMP: ("sensor_jump", 0),
    SUPPLY_LOW: ("supply_low", 1),
    HOST_SILENT: ("host_silent", 1),
    TICK_LATE: ("tick_late", 0),
    LIMITS_CORRUPT: ("limits_corrupt", 0),
    PROGRAM_CORRUPT: ("program_corrupt", 0),
    STOP_INPUT: ("stop_input", 1),
    CUTOUT_OPEN: ("cutout_open", 0),
    WATCHDOG_RESET: ("watchdog_reset", 0),
    FIRMWARE_FAULT: ("firmware_fault", 0),
}
