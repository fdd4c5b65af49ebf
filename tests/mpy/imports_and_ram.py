# Every file of the package imports on the real interpreter; what is left of a board's heap.
import gc
import sys

sys.path.insert(0, sys.path[0])
from common import board_ready

hal, board, loop = board_ready()
gc.collect()
print("free", gc.mem_free(), "used", gc.mem_alloc())
