"""Pages from the logbook, and of dry-runs."""

from .dry_page import dry_run_page
from .run_page import write_report

__all__ = ["dry_run_page", "write_report"]
