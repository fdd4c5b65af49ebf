"""The live page's server: loopback only, reads the logbook, and can ask for a stop."""

from __future__ import annotations

import json
import secrets
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer
from importlib import resources

from plotly.offline import get_plotlyjs

from ..errors import LodestrokeError, PortError
from ..logbook import Logbook, request_stop
from .state import state

_OWN_HOSTS = ("127.0.0.1", "localhost")


class Server(ThreadingHTTPServer):
    """Serves one logbook on 127.0.0.1; `url` is its address, `token` what /stop wants to see."""

    daemon_threads = True

    def __init__(self, logbook: Logbook, run: str | None, port: int) -> None:
        self.logbook = logbook
        self.run = run
        self.token = secrets.token_urlsafe(24)
        self.plotly = get_plotlyjs().encode()
        page = resources.files("lodestroke.watch").joinpath("page.html").read_text(encoding="utf-8")
        self.page = page.replace("{{token}}", self.token).encode()
        try:
            super().__init__(("127.0.0.1", port), Handler)
        except OSError as fault:
            raise PortError(
                "the page's network port cannot be had",
                at=f"127.0.0.1:{port}",
                got=str(fault),
                bound="a free port",
                try_="leave --port out",
            ) from fault
        self.url = f"http://127.0.0.1:{self.server_address[1]}/"


class Handler(BaseHTTPRequestHandler):
    """Three addresses to look at, one to act."""

    server: Server
    protocol_version = "HTTP/1.1"

    def do_GET(self) -> None:
        """The page, its library, its data."""
        if not self._from_here():
            return
        if self.path == "/":
            self._answer(200, "text/html; charset=utf-8", self.server.page)
        elif self.path == "/plotly.min.js":
            self._answer(200, "text/javascript", self.server.plotly)
        elif self.path == "/state.json":
            try:
                self._json(200, state(self.server.logbook, self.server.run))
            except LodestrokeError as error:
                self._json(200, {"run": None, "condition": error.what, "cycles": {}, "trips": []})
        else:
            self._json(404, {"said": "nothing here"})

    def do_POST(self) -> None:
        """/stop, with the page's token."""
        self.rfile.read(min(int(self.headers.get("Content-Length") or 0), 4096))
        if not self._from_here():
            return
        if self.path != "/stop":
            self._json(404, {"said": "nothing here"})
        elif not secrets.compare_digest(self.headers.get("X-Token") or "", self.server.token):
            self._json(403, {"said": "refused: this page did not ask"})
        else:
            self._stop()

    def _stop(self) -> None:
        now = state(self.server.logbook, self.server.run)
        if not now.get("open"):
            self._json(409, {"said": "there is no open run to stop"})
            return
        try:
            request_stop(self.server.logbook, now["run"])
        except LodestrokeError as error:
            self._json(500, {"said": error.what})
            return
        self._json(200, {"said": f"stop asked for run {now['run']}; waiting for the board"})

    def _from_here(self) -> bool:
        """Only pages of this machine: a foreign Host header means a rebound name."""
        host = (self.headers.get("Host") or "").rsplit(":", 1)[0]
        if host in _OWN_HOSTS:
            return True
        self._json(403, {"said": "this page is for this machine only"})
        return False

    def _json(self, status: int, answer: object) -> None:
        self._answer(status, "application/json", json.dumps(answer).encode())

    def _answer(self, status: int, kind: str, body: bytes) -> None:
        self.send_response(status)
        self.send_header("Content-Type", kind)
        self.send_header("Content-Length", str(len(body)))
        self.send_header("Cache-Control", "no-store")
        self.send_header("X-Frame-Options", "DENY")
        self.end_headers()
        self.wfile.write(body)

    def log_message(self, format: str, *args: object) -> None:
        """Quiet: the terminal is for what matters."""
