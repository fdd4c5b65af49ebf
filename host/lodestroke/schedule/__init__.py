"""Schedules and plans: read, judged, and compiled to the records that a board runs on its own."""

from .checkups import checkup_schedule
from .compile import Program, compile_program
from .load import load_plan, load_schedule
from .models import Plan, Schedule

__all__ = [
    "Plan", "Program", "Schedule", "checkup_schedule", "compile_program", "load_plan",
    "load_schedule",
]
