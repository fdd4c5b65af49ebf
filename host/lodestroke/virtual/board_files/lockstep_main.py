"""The lock-step virtual board: the firmware as it stands, no file system, no REPL."""

import os
import sys
from binascii import unhexlify

import hal_virtual

from lodeboard.board import Board
from lodeboard.loop import Loop

hal = hal_virtual.open_hal({})
board = Board(hal, unhexlify(os.getenv("LODESTROKE_BUNDLE") or "00" * 8))
board.boot()
loop = Loop(board)
loop.run()
hal.own_port(False)
if loop.service.reset_wanted:
    hal.reset()
sys.exit(0)
