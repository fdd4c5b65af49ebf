"""`lodestroke check RIG [SCHEDULE]`: a rig priced before power, and a schedule's static proof."""

from __future__ import annotations

import math
from typing import Any

import click

from ..errors import LodestrokeError
from ..margin.labels import labelled
from .common import emit_json, fail, json_option, say

__all__ = ["command", "examine", "finite", "labelled"]


@click.command()
@click.argument("rig", type=click.Path())
@click.argument("schedule", type=click.Path(), required=False)
@click.option("--page", metavar="FILE", type=click.Path(),
              help="Write all of it as one page with plots.")
@json_option
def command(rig: str, schedule: str | None, page: str | None, as_json: bool) -> None:
    """Price RIG before power: field, force, stroke, heat, sensors, the margin of each limit.

    With SCHEDULE, its static proof too: current, duty, heat, pressure bound, length, memory. What will
    disappoint is told with numbers and what to do. A file that cannot be used ends with exit code 2
    and every problem at once.
    """
    try:
        answer = examine(rig, schedule)
        if page is not None:
            from ..report.check_page import check_page

            answer["page"] = str(check_page(answer, page))
    except LodestrokeError as error:
        fail(error, as_json)
    if as_json:
        emit_json(finite(answer))
        return
    from .check_tables import show_tables

    show_tables(answer)
    if page is not None:
        say(f"page: {answer['page']}")


def examine(rig_path: str, schedule_path: str | None = None) -> dict[str, Any]:
    """Everything that `check` tells, as one dict. Raises RigError or ScheduleError."""
    from ..margin import price, prove_static, strokes
    from ..plant import warm_up
    from ..rig import limits_blob, load_rig
    from ..rig.defaults import defaults_used
    from ..schedule import compile_program, load_schedule

    rig = load_rig(rig_path)
    blob, crc32 = limits_blob(rig)
    program = None
    if schedule_path is not None:
        program = compile_program(load_schedule(schedule_path), rig)
    warm_up(rig, say)
    answer = {
        "rig": str(rig.source), "title": rig.title, "fingerprint": rig.fingerprint.hex(),
        "limits_bytes": len(blob), "limits_crc32": f"{crc32:08x}",
        **price(rig, strokes(program) if program else ()), "defaults": defaults_used(rig),
    }
    if program is not None:
        answer["schedule"] = {**prove_static(program, rig), "crc32": f"{program.crc32:08x}"}
    return answer


def finite(value: Any) -> Any:
    """JSON has no infinity: what has no end becomes null."""
    if isinstance(value, dict):
        return {key: finite(inner) for key, inner in value.items()}
    if isinstance(value, list):
        return [finite(inner) for inner in value]
    return None if isinstance(value, float) and not math.isfinite(value) else value
