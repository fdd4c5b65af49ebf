"""The side channel of a virtual board: what a hand at the bench does. One line each way, JSON back.

`power-cut`, `reset`, `hang MS`, `inputs BITS`, `status`; a Unix socket in the board's folder.
"""

from __future__ import annotations

import json
import os
import socket
import tempfile
from collections.abc import Callable
from typing import Any

from ..errors import PortLost

_PATH_MAX = 100        # the system's bound for a socket's name is 103 to 107 bytes


class SideChannel:
    """The relay's end. Each connection carries one command."""

    def __init__(self, path: str, act: Callable[[str, list[str]], dict[str, Any]]) -> None:
        self._folder = ""
        if len(os.fsencode(path)) > _PATH_MAX:
            self._folder = tempfile.mkdtemp(prefix="lodestroke-", dir="/tmp")
            path = self._folder + "/side"
        self.path = path
        self._act = act
        self._socket = socket.socket(socket.AF_UNIX, socket.SOCK_STREAM)
        self._socket.bind(path)
        self._socket.listen(4)

    def fileno(self) -> int:
        return self._socket.fileno()

    def serve(self) -> None:
        """Take one connection, act, answer. A peer that goes away or stalls is dropped."""
        peer, _ = self._socket.accept()
        with peer:
            peer.settimeout(0.5)
            try:
                words = peer.recv(256).decode("utf-8", "replace").split()
                answer = self._act(words[0], words[1:]) if words else {"error": "no command"}
                peer.sendall(json.dumps(answer).encode())
            except OSError:
                pass

    def close(self) -> None:
        self._socket.close()
        if os.path.exists(self.path):
            os.unlink(self.path)
        if self._folder:
            os.rmdir(self._folder)


def ask(path: str, command: str) -> dict[str, Any]:
    """Send one command to a relay; its answer. Raises PortLost when the board is gone."""
    try:
        with socket.socket(socket.AF_UNIX, socket.SOCK_STREAM) as peer:
            peer.settimeout(5)
            peer.connect(path)
            peer.sendall(command.encode())
            peer.shutdown(socket.SHUT_WR)
            parts = []
            while part := peer.recv(4096):
                parts.append(part)
    except OSError as err:
        raise PortLost(
            "the virtual board does not answer", at=path, got=str(err),
            try_="start it again with `lodestroke board RIG`",
        ) from err
    answer: dict[str, Any] = json.loads(b"".join(parts) or b"{}")
    return answer
