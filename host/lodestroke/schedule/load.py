"""Schedule and plan files in; all problems told at once, with their lines."""

from __future__ import annotations

from pathlib import Path

from ..errors import ScheduleError
from ..rig.problems import Problem
from ..rig.toml_file import Document, read_fields, read_toml
from .models import Plan, Schedule, StopRules, WaveStep, walk
from .shape import shape_problems


def load_schedule(path: str | Path) -> Schedule:
    """Read and judge a schedule file, as far as that is possible without a rig.

    Raises ScheduleError for everything that is wrong with it, at once.
    """
    document = read_toml(path, ScheduleError, "schedule")
    good = read_fields(Schedule, document)
    if "steps" in good and "waves" in good:
        for step_path, step in walk(good["steps"]):
            if isinstance(step, WaveStep):
                document.problems.extend(shape_problems(good["waves"], step_path, step))
    document.raise_if_any()
    good["source"], good["lines"] = document.path.resolve(), document.lines
    return Schedule(**good)


def load_plan(path: str | Path) -> Plan:
    """Read and judge a plan file and the schedule that it names.

    Raises ScheduleError; a target or check-up that is no whole number of passes is refused with
    the nearest that fits.
    """
    document = read_toml(path, ScheduleError, "plan")
    good = read_fields(Plan, document)
    good.setdefault("stop", StopRules())
    if "schedule" in good:
        good["schedule"] = (document.path.resolve().parent / good["schedule"]).resolve()
        document.raise_if_any()
        schedule = load_schedule(good["schedule"])
        good["cycles_per_pass"] = schedule.cycles_per_pass
        _multiples(document, good["cycles_per_pass"])
    document.raise_if_any()
    good["source"] = document.path.resolve()
    return Plan(**good)


def _multiples(document: Document, per_pass: int) -> None:
    """Target and check-ups must fall between passes: the board never stops inside one."""
    if per_pass == 0:
        document.problems.append(Problem(
            ("schedule",), "this schedule makes no cycles", "at least one cycle in a pass",
            "name a schedule with a step of strokes"))
        return
    table = document.data.get("checkup", {})
    for key, value in ((("target_cycles",), document.data.get("target_cycles")),
                       (("checkup", "every_cycles"), table.get("every_cycles"))):
        if isinstance(value, int) and value % per_pass:
            near = max(1, round(value / per_pass)) * per_pass
            document.problems.append(Problem(
                key, "no whole number of passes of the schedule",
                f"a multiple of {per_pass}, its cycles per pass", f"write {near}"))
