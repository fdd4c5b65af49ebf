"""Real serial ports, pseudo-terminals included, through pyserial."""

from __future__ import annotations

import contextlib
import time
from typing import TYPE_CHECKING, Any

from ..errors import PortBusy, PortError, PortLost

if TYPE_CHECKING:
    import serial


class SerialPort:
    """A Port over pyserial, opened for ourselves alone."""

    def __init__(self, name: str, dtr: bool = True) -> None:
        self.name = name
        self.line = _open(name, dtr)

    def read(self, timeout_s: float) -> bytes:
        """What has arrived; see Port."""
        import serial

        try:
            self.line.timeout = max(0.0, timeout_s)
            first = self.line.read(1)
            waiting = self.line.in_waiting if first else 0
            return bytes(first + self.line.read(waiting)) if waiting else bytes(first)
        except (serial.SerialException, OSError, TypeError) as fault:
            raise self._lost(fault) from fault

    def write(self, data: bytes) -> None:
        """Send all of data; see Port."""
        import serial

        try:
            self.line.write(data)
        except (serial.SerialException, OSError, TypeError) as fault:
            raise self._lost(fault) from fault

    def now_s(self) -> float:
        """Wall clock."""
        return time.monotonic()

    def close(self) -> None:
        """Give the port back."""
        with contextlib.suppress(OSError):
            self.line.close()

    def _lost(self, fault: BaseException) -> PortLost:
        return PortLost(
            "the port went away while in use",
            at=self.name,
            got=str(fault) or "no data",
            bound="a board that stays connected",
            try_="look at cable and power. The board is safe by itself: it stops when the host is "
            "silent. Then run again, or endure --resume",
        )


def _open(name: str, dtr: bool) -> serial.Serial:
    import serial

    try:
        line = serial.Serial()
        line.port = name
        line.baudrate = 115200
        line.timeout = 0.1
        line.write_timeout = 2.0
        line.exclusive = True
        line.dtr = dtr
        line.open()
        return line
    except (serial.SerialException, OSError, ValueError) as fault:
        raise _worded(name, fault) from fault


def _worded(name: str, fault: BaseException) -> PortError:
    text = str(fault)
    if "exclusively lock" in text or "busy" in text.lower() or "Errno 11" in text:
        return PortBusy(
            "another program has the port",
            at=name,
            got=text,
            bound="a free port",
            try_="end the other program (a terminal, an endurance run, watch of another tool)",
        )
    seen = ", ".join(port.device for port in ports_seen()) or "none"
    return PortError(
        "the port cannot be opened",
        at=name,
        got=text,
        bound=f"a serial port; seen here: {seen}",
        try_="name it with --port, or start a virtual board: lodestroke board RIG",
    )


def ports_seen() -> list[Any]:
    """Serial ports that this machine shows now."""
    from serial.tools import list_ports

    return list(list_ports.comports())
