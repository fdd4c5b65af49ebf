"""The board's states and every legal move between them: one table, read by board and host alike."""

from .compat import const

BOOT = const(0)
SAFE = const(1)
ARMED = const(2)
RUNNING = const(3)
PAUSED = const(4)
TRIPPED = const(5)
MAINTENANCE = const(6)
STOPPING = const(7)

NAMES = ("boot", "safe", "armed", "running", "paused", "tripped", "maintenance", "stopping")

# state -> {event: next state}. Events in lower case are host commands; those in capitals are the
# board's own. What is not in the table is refused with a reason, never ignored.
# "stopping" is the category 1 stop: current ramps down, then enable drops.
NEXT = {
    BOOT: {"READY": SAFE, "TRIP": TRIPPED},
    SAFE: {"arm": ARMED, "maintain": MAINTENANCE, "TRIP": TRIPPED},
    ARMED: {"go": RUNNING, "disarm": SAFE, "stop": SAFE, "TRIP": TRIPPED},
    RUNNING: {"pause": PAUSED, "stop": STOPPING, "END": STOPPING, "TRIP": TRIPPED},
    PAUSED: {"resume": RUNNING, "stop": STOPPING, "TRIP": TRIPPED},
    STOPPING: {"DOWN": SAFE, "TRIP": TRIPPED},
    TRIPPED: {"clear": SAFE},
    MAINTENANCE: {},
}

# States in which the driver may be enabled, and in which the heap is locked.
ENERGISED = (ARMED, RUNNING, PAUSED, STOPPING)
