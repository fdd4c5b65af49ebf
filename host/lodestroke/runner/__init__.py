"""Executing schedules: dry, wet, and over days."""

from .dry_run import DryRun, dry_run, log_dry_run
from .endure import endure
from .run import run

__all__ = ["DryRun", "dry_run", "endure", "log_dry_run", "run"]
