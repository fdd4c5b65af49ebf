"""The byte seam: whatever lies behind a Port, the client above it cannot tell."""

from __future__ import annotations

from typing import Protocol


class Port(Protocol):
    """Bytes to and from one board. Time-outs count in the port's own time (simulated on a twin)."""

    name: str  # "/dev/ttyACM0", "twin", "lock-step"; shown to the user

    def read(self, timeout_s: float) -> bytes:
        """What has arrived, waiting at most timeout_s for the first byte; b"" if nothing did.

        Raises PortLost when the port has gone away.
        """
        ...

    def write(self, data: bytes) -> None:
        """Send all of data. Raises PortLost."""
        ...

    def now_s(self) -> float:
        """Monotonic seconds in this port's time."""
        ...

    def close(self) -> None:
        """Give the port back; may be called twice."""
        ...
