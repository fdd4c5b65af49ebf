"""Where runs live: one SQLite file by default, PostgreSQL by URL."""

from .names import resolve
from .open import Logbook, default_path, open_logbook
from .runs import clear_requests, new_run, request_stop, stop_requested
from .writer import Writer

__all__ = [
    "Logbook",
    "Writer",
    "clear_requests",
    "default_path",
    "new_run",
    "open_logbook",
    "request_stop",
    "resolve",
    "stop_requested",
]
