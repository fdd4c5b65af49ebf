"""A Port into simulated time: waiting for bytes runs firmware and plant, tick by tick."""

from __future__ import annotations

from typing import Protocol

from ..errors import PortLost
from .lockstep import Lockstep

# A host looks a hundred times a second or so; looking at each tick costs a third more.
_BATCH_TICKS = 8


class Engine(Protocol):
    """What a SimPort needs of a simulated board."""

    lockstep: Lockstep
    tick_s: float

    def advance(self) -> None:
        """One control period of firmware and plant. Raises PortLost when the board is gone."""
        ...

    def close(self) -> None:
        """End the board; may be called twice."""
        ...


class SimPort:
    """The host's port to a board in lock-step; see link.port.Port. Seconds are simulated ones."""

    def __init__(self, engine: Engine, name: str) -> None:
        self.name = name
        self.engine = engine
        self._closed = False

    def read(self, timeout_s: float) -> bytes:
        """What has arrived; advances at most timeout_s of simulated time for the first byte."""
        self._still_open()
        lockstep = self.engine.lockstep
        data = lockstep.host_read()
        left_ticks = round(timeout_s / self.engine.tick_s) if timeout_s > 0 else 0
        if timeout_s > 0 and left_ticks == 0:
            left_ticks = 1
        while not data and left_ticks > 0:
            lost = self._advance(min(left_ticks, _BATCH_TICKS))
            left_ticks -= _BATCH_TICKS
            data = lockstep.host_read()
            if lost is not None and not data:
                raise lost
        return data

    def _advance(self, ticks: int) -> PortLost | None:
        """So many control periods, unless the board goes: its last bytes are still to be read."""
        try:
            for _ in range(ticks):
                self.engine.advance()
        except PortLost as lost:
            return lost
        return None

    def write(self, data: bytes) -> None:
        """Queue bytes; the firmware gets them as it takes them."""
        self._still_open()
        self.engine.lockstep.host_write(data)

    def now_s(self) -> float:
        """Simulated seconds since power-up."""
        return self.engine.lockstep.exchanges * self.engine.tick_s

    def close(self) -> None:
        """End the board behind the port."""
        self._closed = True
        self.engine.close()

    def _still_open(self) -> None:
        if self._closed:
            raise PortLost("the simulated board has been closed", at=self.name)
