"""From a name, or from what a rig file says of its board, to an open Port."""

from __future__ import annotations

from typing import Any

from ..errors import PortError
from .port import Port


def open_port(name: str, dtr: bool = True) -> Port:
    """Open a serial port or pseudo-terminal by name. Raises PortError or PortBusy."""
    from .serial_port import SerialPort

    return SerialPort(name, dtr)


def find_port(usb_serial: str | None) -> str:
    """The device of the board with this USB serial number. Raises PortError with what was seen."""
    from .serial_port import ports_seen

    ports = [port for port in ports_seen() if port.serial_number]
    found = [port for port in ports if usb_serial and port.serial_number == usb_serial]
    if len(found) == 1:
        return str(found[0].device)
    return _none_or_many(usb_serial, found or ports)


def _none_or_many(usb_serial: str | None, ports: list[Any]) -> str:
    listing = ", ".join(f"{port.device} (USB serial {port.serial_number})" for port in ports)
    what = "no port was named, and the rig's board is not connected"
    if usb_serial is None:
        what = "no port was named, and the rig file names no USB serial number"
    elif sum(port.serial_number == usb_serial for port in ports) > 1:
        what = "two ports carry the rig's USB serial number"
    raise PortError(
        what,
        at="board.port.usb_serial",
        got=listing or "no USB serial port",
        bound=f"one port with USB serial {usb_serial}" if usb_serial else "a port",
        try_="name it: --port /dev/ttyACM0, or the name that lodestroke board prints",
    )
