"""The twin: board and plant in one process; reading its port runs both, tick by tick."""

from __future__ import annotations

from typing import TYPE_CHECKING

from lodeboard.board import Board
from lodeboard.loop import Loop

from ..errors import PortLost
from ..plant import Plant
from .hal_twin import TwinHal
from .lockstep import Lockstep
from .simport import SimPort

if TYPE_CHECKING:
    from ..rig import Rig


class TwinEngine:
    """The firmware in this very process against the plant of a rig; `.port` is its Port."""

    def __init__(self, rig: Rig, seed: int = 0, bundle_id: bytes = b"\0" * 8) -> None:
        self.plant = Plant.from_rig(rig, seed)
        self.lockstep = Lockstep(self.plant)
        self.tick_s = float(rig.board.tick)
        self.port = SimPort(self, "twin")
        self.store: dict[str, bytes] = {}
        self.bundle_id = bundle_id
        self.board_id = ((rig.board.serial or "twin").encode() + b"\0" * 8)[:8]
        self.boots = 0
        self._open = True
        self.reboot()

    def reboot(self, watchdog: bool = False) -> None:
        """Power away and back, or a reset: RAM is gone, what was stored stays."""
        self.boots += 1
        self.hal = TwinHal(self.lockstep, self.board_id, self.boots, self.store)
        self.hal.reset_was_watchdog = watchdog
        self.board = Board(self.hal, self.bundle_id)
        self.board.boot()
        self.loop = Loop(self.board)

    def advance(self) -> None:
        """One control period. Raises PortLost once the board is closed or gave its port away."""
        if not self._open:
            raise PortLost("the twin has been closed", at=self.port.name)
        if self.board.released and not self.board.locked:
            if not self.loop.service.reset_wanted:
                raise PortLost(
                    "the twin gave its port back",
                    at=self.port.name,
                    got="maintenance",
                    bound="a running firmware",
                    try_="start it again: reboot()",
                )
            self.reboot()
        self.loop.step()

    def close(self) -> None:
        """End the twin; may be called twice."""
        self._open = False
