"""Every error that a user may meet, each with what, where, the value, the bound and what to try.

LodestrokeError
├── RigError          a rig file that cannot be used
├── ScheduleError     a schedule or plan that cannot be used, or that the rig refuses
├── PortError         no port, or a port that cannot be opened
│   ├── PortLost      it went away while in use
│   └── PortBusy      somebody else has it
├── LinkError         the board answers, but not as it should
│   ├── LinkTimeout   it does not answer
│   ├── WireMismatch  it speaks another version
│   └── Refused       it refused a command, with its reason
├── Tripped           an interlock ended the run
├── FlashError        installing firmware failed
├── LogbookError      a logbook that cannot be opened, written or trusted
├── ProofFailed       an invariant did not hold
├── Interrupted       Ctrl-C or SIGTERM ended the work, safely
└── Unavailable       something this machine does not have (the real interpreter, say)
"""

from __future__ import annotations

import enum


class Exit(enum.IntEnum):
    """Exit codes of the command, listed in the README."""

    DONE = 0
    BAD_INPUT = 2
    TRIPPED = 3
    NO_PORT = 4
    LINK = 5
    FLASH_FAILED = 6
    LOGBOOK = 7
    PROOF_FAILED = 8
    UNAVAILABLE = 9
    INTERNAL = 70
    INTERRUPTED = 130


class LodestrokeError(Exception):
    """What went wrong, in five parts; every part but `what` may be empty."""

    exit_code = Exit.INTERNAL

    def __init__(
        self, what: str, *, at: str = "", got: str = "", bound: str = "", try_: str = ""
    ) -> None:
        super().__init__(what)
        self.what = what
        self.at = at
        self.got = got
        self.bound = bound
        self.try_ = try_

    def text(self) -> str:
        """The error as the command prints it: one line a part."""
        rows = [self.what]
        for label, value in (
            ("at", self.at),
            ("got", self.got),
            ("bound", self.bound),
            ("try", self.try_),
        ):
            if value:
                rows.append(f"  {label:<5} {value}")
        return "\n".join(rows)

    def as_json(self) -> dict[str, str]:
        """The same parts for `--json`."""
        return {
            "error": type(self).__name__,
            "what": self.what,
            "at": self.at,
            "got": self.got,
            "bound": self.bound,
            "try": self.try_,
        }


class RigError(LodestrokeError):
    exit_code = Exit.BAD_INPUT


class ScheduleError(LodestrokeError):
    exit_code = Exit.BAD_INPUT


class PortError(LodestrokeError):
    exit_code = Exit.NO_PORT


class PortLost(PortError):
    pass


class PortBusy(PortError):
    pass


class LinkError(LodestrokeError):
    exit_code = Exit.LINK


class LinkTimeout(LinkError):
    pass


class WireMismatch(LinkError):
    pass


class Refused(LinkError):
    pass


class Tripped(LodestrokeError):
    exit_code = Exit.TRIPPED


class FlashError(LodestrokeError):
    exit_code = Exit.FLASH_FAILED


class LogbookError(LodestrokeError):
    exit_code = Exit.LOGBOOK


class ProofFailed(LodestrokeError):
    exit_code = Exit.PROOF_FAILED


class Interrupted(LodestrokeError):
    exit_code = Exit.INTERRUPTED


class Unavailable(LodestrokeError):
    exit_code = Exit.UNAVAILABLE
