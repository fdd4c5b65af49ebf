"""One table of messages for both ends. A field's suffix is its unit; all integers little-endian.

Down: host to board, escaped on the wire so that no REPL can be triggered, answered by `reply`
(except `beat`). Up: board to host. Journal messages (cycle, mark, trip, end, gap) start with a
serial `entry`; the board keeps each until a `beat` says that the host has it on disk.
"""

import binascii

from ..compat import const

# code, name, struct format, fields
DOWN = (
    (0x40, "hello", "<II", ("wire_version", "saved_entry")),
    (0x41, "beat", "<BI", ("frame", "saved_entry")),           # credit, and "on disk up to"
    (0x42, "put", "<BHB32s", ("blob", "offset", "count", "data")),
    (0x43, "seal", "<BHI8s", ("blob", "length", "crc32", "fingerprint")),
    (0x44, "stream", "<H", ("every_ticks",)),                  # 0: no live samples
    (0x45, "arm", "<8sI", ("fingerprint", "program_crc32")),
    (0x46, "go", "<III", ("run_token", "cycles_before", "last_cycle")),   # 0: no last cycle
    (0x47, "pause", "<", ()),
    (0x48, "resume", "<", ()),
    (0x49, "stop", "<", ()),
    (0x4A, "disarm", "<", ()),
    (0x4B, "clear", "<BH", ("code", "trip_serial")),           # a trip is cleared by naming it
    (0x4C, "status", "<", ()),                                 # answered by a beat after the reply
    (0x4D, "recall", "<HH", ("first", "count")),               # flight recorder rows, oldest = 0
    (0x4E, "maintain", "<", ()),                               # hand the port back to the REPL
    (0x4F, "reset", "<", ()),
)

SAMPLE_FORMAT = "<IhhhhiiihBB"
SAMPLE_FIELDS = (
    "tick", "coil_a_ma", "coil_b_ma", "target_a_ma", "duty_a_q15",
    "chamber_pa", "outlet_pa", "inlet_pa", "winding_cc", "fold_q8", "state",
)

UP = (
    (0x80, "hello", "<I8s8s8sIIIBB", (
        "wire_version", "bundle_id", "fingerprint", "board_id", "boot_nonce", "run_token",
        "oldest_entry", "state", "capabilities")),
    (0x81, "reply", "<BBBi", ("down_frame", "command", "result", "detail")),
    (0x82, "beat", "<IIIIHHHHBBB", (
        "tick", "cycle", "newest_entry", "run_token", "samples_dropped", "late_ticks",
        "worst_gap_us", "trip_serial", "step", "state", "trip_code")),
    (0x83, "sample", SAMPLE_FORMAT, SAMPLE_FIELDS),
    (0x84, "recorded", "<H" + SAMPLE_FORMAT[1:], ("row",) + SAMPLE_FIELDS),
    (0x90, "cycle", "<IIIIiiiiiiiHhhB", (
        "entry", "cycle", "tick", "duration_ticks",
        "chamber_max_pa", "chamber_min_pa", "chamber_mean_pa",
        "outlet_max_pa", "outlet_mean_pa", "outlet_reverse_max_pa",
        "inlet_reverse_max_pa", "held_ticks", "coil_peak_ma", "winding_cc", "step")),
    (0x91, "mark", "<IIHB", ("entry", "tick", "mark", "step")),
    (0x92, "trip", "<IHBBBIiiB", (
        "entry", "trip_serial", "code", "channel", "stop_category", "tick", "value", "limit",
        "step")),
    (0x93, "end", "<IIIBI", ("entry", "tick", "cycle", "why", "run_token")),
    (0x94, "gap", "<III", ("entry", "first_cycle", "last_cycle")),
)

# blob numbers for put and seal
BLOB_LIMITS = const(0)
BLOB_PROGRAM = const(1)

# results in a reply
OK = const(0)
RESULTS = (
    "ok", "wrong state", "unknown command", "wire version differs", "limits missing or corrupt",
    "program missing or corrupt", "fingerprint differs", "checksum differs", "out of bounds",
    "another trip is latched", "cut-out open", "stop input active", "sensor not plausible",
    "busy", "deadman not proved",
)
WRONG_STATE = const(1)
UNKNOWN_COMMAND = const(2)
WIRE_DIFFERS = const(3)
NO_LIMITS = const(4)
NO_PROGRAM = const(5)
FINGERPRINT_DIFFERS = const(6)
CHECKSUM_DIFFERS = const(7)
OUT_OF_BOUNDS = const(8)
OTHER_TRIP = const(9)
CUTOUT_IS_OPEN = const(10)
STOP_IS_ACTIVE = const(11)
NOT_PLAUSIBLE = const(12)
BUSY = const(13)
NO_DEADMAN = const(14)

# why a run ended
ENDS = ("finished", "stopped", "tripped")
ENDED_FINISHED = const(0)
ENDED_STOPPED = const(1)
ENDED_TRIPPED = const(2)

# capability bits in the board's hello
CAN_DEADMAN = const(1)      # a hard timer drops enable
CAN_WATCHDOG = const(2)
CAN_VIRTUAL = const(128)    # simulated: no metal behind it

BODY_MAX = const(56)        # with 8 bytes around it a frame is at most 64

# The hash of the table is the wire version: 30 bits, so that it is a small integer on a board.
WIRE_VERSION = binascii.crc32(repr((DOWN, UP)).encode()) & 0x3FFFFFFF
