"""The one loop: a tick each period, then the link in the time that is left."""

import sys

from . import states, trips
from .board import Board
from .clock import us_after, us_since
from .limits import INDEX
from .service import Service

_TICK_US = INDEX["tick_us"]


class Loop:
    """Paces a board. step() is one period; run() goes on until the port is given back."""

    def __init__(self, board: Board) -> None:
        self.board = board
        self.hal = board.hal
        self.service = Service(board)
        self.due_us = self.hal.now_us()
        self.period_us = 1000
        self.last_us = self.due_us

    def step(self) -> None:
        """One tick and the link until the next is due."""
        hal = self.hal
        board = self.board
        period_us = self.period_us
        now_us = hal.now_us()
        if board.stalled:
            board.stalled = False
            self.due_us = now_us
            self.last_us = now_us
        late_us = us_since(now_us, self.due_us)
        if late_us < 0:
            late_us = 0
        self._pace(now_us)
        board.tick.run(late_us)
        hal.feed()
        self.due_us = us_after(self.due_us, period_us)
        if late_us >= period_us:
            # missed periods are counted, never caught up in a burst
            board.late_ticks += late_us // period_us
            self.due_us = us_after(now_us, period_us)
        board.settle()
        while True:
            self.service.poll()
            left_us = us_since(self.due_us, hal.now_us())
            if left_us <= 0:
                return
            hal.idle(left_us)

    def _pace(self, now_us: int) -> None:
        """The period from the limits, and the worst gap between ticks of this run."""
        gap_us = us_since(now_us, self.last_us)
        self.last_us = now_us
        board = self.board
        if gap_us > board.worst_gap_us and board.live:
            board.worst_gap_us = gap_us if gap_us < 65535 else 65535
        if board.limits.blob.sealed:
            self.period_us = board.limits.values[_TICK_US]

    def run(self) -> None:
        """Until the port is given back. Whatever happens, the coil is off when this returns."""
        board = self.board
        try:
            while not (board.released and board.state not in states.ENERGISED
                       and not board.tick.ramping and not board.live):
                self.step()
        except BaseException as fault:
            board.tick.off()
            board.tick.ramping = False
            board.live = False
            board.unlock()
            board.trip(trips.FIRMWARE_FAULT, 255, 0, 0)
            board.settle()
            self._tell(fault)
            raise
        finally:
            self.hal.drive(0, 0, 0)
        self.service.flush()

    def _tell(self, fault: BaseException) -> None:
        """The traceback as plain text on the port: the host carries it to the user."""
        tell = getattr(sys, "print_exception", None)
        if tell is not None:
            tell(fault)
