"""Schedules and plans: read, judged, and compiled to the records that a board runs on its own."""

from .compile import Program, compile_program
from .load import load_plan, load_schedule
from .models import Plan, Schedule

__all__ = ["Plan", "Program", "Schedule", "compile_program", "load_plan", "load_schedule"]
