"""The host's end of the two pipes to the interpreter; board_files/wires.py is the other end."""

from __future__ import annotations

import contextlib
import os
import struct
from collections.abc import Sequence
from typing import NamedTuple

EXCHANGE, UP, OWN, RELEASE, RESET, GUARD = range(6)

_REQUEST = struct.Struct("<BBhhBB")
_REPLY = struct.Struct("<6iii")


class Request(NamedTuple):
    """What the interpreter asks. Duties are Q15; tx are link bytes (lock-step only)."""

    kind: int
    duty_a: int
    duty_b: int
    enable: int
    tx: bytes


class Channel:
    """One pair of pipes, made anew for each launch of the interpreter."""

    def __init__(self) -> None:
        self.request_fd, self.child_request_fd = os.pipe()
        self.child_reply_fd, self.reply_fd = os.pipe()

    def environment(self) -> dict[str, str]:
        """How the interpreter finds its ends."""
        return {
            "LODESTROKE_REQUEST_FD": str(self.child_request_fd),
            "LODESTROKE_REPLY_FD": str(self.child_reply_fd),
        }

    def child_fds(self) -> tuple[int, int]:
        return self.child_request_fd, self.child_reply_fd

    def launched(self) -> None:
        """The child has its ends; close ours, so that its death is seen as an end of file."""
        os.close(self.child_request_fd)
        os.close(self.child_reply_fd)

    def take(self) -> Request | None:
        """The next request, waiting for it; None when the interpreter is gone.

        A request is one write of at most 263 bytes, which a pipe never splits.
        """
        head = os.read(self.request_fd, _REQUEST.size)
        if len(head) < _REQUEST.size:
            return None
        kind, _, duty_a, duty_b, enable, n_tx = _REQUEST.unpack(head)
        tx = os.read(self.request_fd, n_tx) if n_tx else b""
        return Request(kind, duty_a, duty_b, enable, tx)

    def answer(self, counts: Sequence[int] = (0,) * 6, inputs: int = 0, rx: bytes = b"") -> None:
        """Reply with six raw counts, input bits, link bytes. A dead reader is no error here."""
        six = [int(count) for count in counts]
        with contextlib.suppress(BrokenPipeError):
            os.write(self.reply_fd, _REPLY.pack(*six, inputs | len(rx) << 8, 0) + rx)

    def close(self) -> None:
        """Close this end; may be called twice."""
        if self.request_fd >= 0:
            os.close(self.request_fd)
            os.close(self.reply_fd)
        self.request_fd = -1
