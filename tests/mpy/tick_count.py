# One subject (argv[2]) argv[3] times, for an instruction counter around the real interpreter.
import sys

sys.path.insert(0, sys.path[0])
from subjects import SUBJECTS, board, start

import micropython  # isort: skip

subject = SUBJECTS[sys.argv[2]]
turns = int(sys.argv[3])
start()
micropython.heap_lock()
subject(turns)
micropython.heap_unlock()
assert board.state == 3, board.trip_code
