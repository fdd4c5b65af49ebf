"""What an endurance run works with, all the way through, and what it keeps for a resume."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from ..logbook import reader

if TYPE_CHECKING:
    from ..link import Client
    from ..logbook import Logbook, Writer
    from ..rig import Rig
    from ..schedule import Plan, Schedule
    from .collect import Outcome
    from .signals import StopFlag


@dataclass
class Bench:
    """What an endurance run works with, all the way through."""

    logbook: Logbook
    writer: Writer
    client: Client
    rig: Rig
    plan: Plan
    schedule: Schedule
    bundle_id: bytes
    say: Callable[[str], None]
    progress: Callable[[Outcome], None]
    flag: StopFlag
    done: int = 0
    segment: int = 0
    token: int = 0  # of the last GO that the board got, from us or from somebody else
    trips: list[dict[str, int]] = field(default_factory=list)

    def stop(self) -> str:
        """Why a running program should be stopped now; empty for no reason."""
        if self.flag.raised:
            return "interrupted"
        return "stop requested" if reader.stop_requested(self.logbook, self.writer.run) else ""

    def remember(self, token: int, phase: str) -> None:
        """Put on disk what a resume needs, before the board is told to go."""
        info = self.client.info
        assert info is not None
        self.segment += 1
        self.writer.begin(info.boot_nonce, self.client.saved_entry, self.segment)
        self.writer.resume_state(
            {
                "nonce": info.boot_nonce,
                "token": token,
                "before": self.token,
                "phase": phase,
                "segment": self.segment,
                "base": self.done,
                "at": time.time(),
                "kind": "endure",
            }
        )
        self.writer.flush()
        self.token = token

    def settled(self, token: int) -> None:
        """The program of this GO has ended and all of it is on disk: nothing of it can be lost."""
        info = self.client.info
        assert info is not None
        self.writer.resume_state(
            {
                "nonce": info.boot_nonce,
                "token": token,
                "phase": "between",
                "segment": self.segment,
                "base": self.done,
                "kind": "endure",
            }
        )
        self.writer.flush()
