"""The virtual board's deadman and watchdog: what metal does when the firmware hangs."""

from __future__ import annotations

import time


class Guard:
    """Deadman and watchdog in wall-clock time, started by the firmware when it arms.

    The deadman, once it has let go, keeps the enable line down until the firmware itself has asked
    for enable 0. The watchdog only says that it is due.
    """

    def __init__(self) -> None:
        self.deadman_s = 0.0
        self.watchdog_s = 0.0
        self.enabled = False
        self.dropped = False
        self.drops = 0
        self._seen = time.monotonic()

    def start(self, deadman_ms: int, watchdog_ms: int) -> None:
        """Both run from here until the next reset."""
        self.deadman_s = deadman_ms / 1000
        self.watchdog_s = watchdog_ms / 1000
        self._seen = time.monotonic()

    def fed(self, enable: int) -> int:
        """The firmware came round and wants this enable line; what the line does."""
        self._seen = time.monotonic()
        if not enable:
            self.dropped = False
        self.enabled = bool(enable) and not self.dropped
        return int(self.enabled)

    def check(self) -> bool:
        """Let go if the firmware is overdue; True when the watchdog is due."""
        silent_s = time.monotonic() - self._seen
        if self.enabled and self.deadman_s and silent_s > self.deadman_s:
            self.enabled = False
            self.dropped = True
            self.drops += 1
        return bool(self.watchdog_s) and silent_s > self.watchdog_s
