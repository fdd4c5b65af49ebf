"""The lock-step virtual board: the firmware as it stands, no file system, no REPL."""

import os
import sys
from binascii import unhexlify

import hal_virtual

from lodeboard.board import Board
from lodeboard.loop import Loop

board = Board(hal_virtual.open_hal({}), unhexlify(os.getenv("LODESTROKE_BUNDLE") or "00" * 8))
board.boot()
Loop(board).run()
sys.exit(0)
