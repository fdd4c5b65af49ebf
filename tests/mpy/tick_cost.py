# What a tick costs, in loop iterations (L) of the same process; run by the real interpreter.
import sys
import time

sys.path.insert(0, sys.path[0])
from subjects import bare, board, core, start, unit, whole

import micropython  # isort: skip


def best(function, n, turns=7):
    """Least and greatest mean ns over some turns, with the heap locked as it is on a bench: calls
    cost more where frames may come from the heap.
    """
    low, high = 1 << 60, 0
    for _ in range(turns):
        micropython.heap_lock()
        t = time.ticks_us()
        function(n)
        t = time.ticks_diff(time.ticks_us(), t)
        micropython.heap_unlock()
        low = min(low, t * 1000 // n)
        high = max(high, t * 1000 // n)
    return low, high


start()
unit_ns = best(unit, 20000, 9)
core_ns = best(core, 2000)
whole_ns = best(whole, 2000)
hal_ns = best(bare, 2000)
assert board.state == 3, board.trip_code
print(unit_ns[0], core_ns[0], whole_ns[0], whole_ns[1], hal_ns[0])
