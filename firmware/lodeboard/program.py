"""A compiled schedule: fixed-size integer records that the board runs on its own.

A record is 12 bytes, little-endian, `<BBHhhi`: op, arg, step, a, b, n. `step` is the schedule step
that the record came from, for trip reports. Currents are absolute targets in mA.
"""

from .compat import const

RECORD_FORMAT = "<BBHhhi"
RECORD_BYTES = const(12)
MAX_RECORDS = const(512)
MAX_DEPTH = const(6)          # nested loops
MAX_STEP = const(250)
MAX_TICKS = const(0x1FFFFFFF)

END = const(0)                # the program is over; the board ramps down and reports `end`
SEG = const(1)                # go linearly from the present targets to (a, b) mA in n ticks
CYCLE = const(2)              # a cycle begins here; the one before it, if any, is accounted
CLOSE = const(3)              # the cycle that is open ends here and is accounted
LOOP = const(4)               # repeat what follows up to the matching NEXT, n times
NEXT = const(5)
MARK = const(6)               # journal a mark numbered n (0 to 65535)
LIMIT = const(7)              # tighten limit field `arg` to n until RELAX
RELAX = const(8)              # every tightened limit back to the rig's
