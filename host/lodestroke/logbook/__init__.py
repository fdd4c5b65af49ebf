"""Where runs live: one SQLite file by default, PostgreSQL by URL."""

from .open import Logbook, default_path, open_logbook
from .writer import Writer, new_run, request_stop

__all__ = ["Logbook", "Writer", "default_path", "new_run", "open_logbook", "request_stop"]
