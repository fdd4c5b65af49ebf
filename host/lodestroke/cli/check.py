"""`lodestroke check RIG [SCHEDULE]`: a rig priced before power, and a schedule's static proof."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

import click

from ..errors import LodestrokeError
from .common import emit_json, fail, json_option

if TYPE_CHECKING:
    from rich.console import Console

# unit at the end of a name, longest first -> SI unit
_SUFFIXES = (
    ("_pa_s2_m3", "Pa*s^2/m^3"), ("_pa_s_m3", "Pa*s/m^3"), ("_pa_s", "Pa/s"), ("_a_m", "A/m"),
    ("_ohm", "ohm"), ("_pa", "Pa"), ("_hz", "Hz"), ("_m3", "m^3"), ("_a", "A"), ("_s", "s"),
    ("_c", "degC"), ("_m", "m"), ("_w", "W"), ("_n", "N"), ("_t", "T"), ("_bytes", "bytes"),
)


@click.command()
@click.argument("rig", type=click.Path())
@click.argument("schedule", type=click.Path(), required=False)
@json_option
def command(rig: str, schedule: str | None, as_json: bool) -> None:
    """Price RIG before power: field, force, stroke, heat, sensors, the margin of each limit.

    With SCHEDULE, its static proof too: current, duty, heat, pressure bound, length, memory. A file
    that cannot be used ends with exit code 2 and every problem at once.
    """
    try:
        answer = examine(rig, schedule)
    except LodestrokeError as error:
        fail(error, as_json)
    if as_json:
        emit_json(finite(answer))
    else:
        show_tables(answer)


def examine(rig_path: str, schedule_path: str | None = None) -> dict[str, Any]:
    """Everything that `check` tells, as one dict. Raises RigError or ScheduleError."""
    from ..margin import price, prove_static
    from ..rig import limits_blob, load_rig
    from ..rig.defaults import defaults_used
    from ..schedule import compile_program, load_schedule

    rig = load_rig(rig_path)
    blob, crc32 = limits_blob(rig)
    answer = {
        "rig": str(rig.source), "title": rig.title, "fingerprint": rig.fingerprint.hex(),
        "limits_bytes": len(blob), "limits_crc32": f"{crc32:08x}",
        **price(rig), "defaults": defaults_used(rig),
    }
    if schedule_path is not None:
        program = compile_program(load_schedule(schedule_path), rig)
        answer["schedule"] = {**prove_static(program, rig), "crc32": f"{program.crc32:08x}"}
    return answer


def finite(value: Any) -> Any:
    """JSON has no infinity: what has no end becomes null."""
    if isinstance(value, dict):
        return {key: finite(inner) for key, inner in value.items()}
    if isinstance(value, list):
        return [finite(inner) for inner in value]
    return None if isinstance(value, float) and not math.isfinite(value) else value


def labelled(name: str, value: Any) -> tuple[str, str]:
    """("thermal_slow_s", 389.2) -> ("thermal slow", "389.2 s")."""
    from ..units import show

    if isinstance(value, str) or value is None:
        return name.replace("_", " "), value or "-"
    for suffix, unit in _SUFFIXES:
        if name.endswith(suffix):
            label = name.removesuffix(suffix).replace("_", " ")
            if not math.isfinite(value):
                return label, "no end (thermal runaway)" if unit == "degC" else "never"
            return label, show(float(f"{value:.4g}"), unit) if unit != "bytes" else f"{value} bytes"
    return name.replace("_", " "), f"{value:.4g}" if isinstance(value, float) else str(value)


def show_tables(answer: dict[str, Any]) -> None:
    """The answer as tables on standard output."""
    from rich.console import Console

    console = Console(highlight=False, markup=False, emoji=False)   # titles are the user's text
    console.print(answer["title"] or answer["rig"], style="bold")
    console.print(f"fingerprint {answer['fingerprint']}, limits {answer['limits_bytes']} bytes, "
                  f"CRC-32 {answer['limits_crc32']}\n")
    for coil in answer["coils"]:
        _pairs(console, f"Coil {coil['name']}".strip(), coil, skip=("name",))
    _pairs(console, "Slug at full current", answer["slug"])
    _pairs(console, "Static stroke at full current", answer["stroke"])
    _sensors(console, answer["sensors"])
    _interlocks(console, answer["interlocks"])
    _pairs(console, "Left out of the simulation by choice", answer["left_out"])
    if answer["defaults"]:
        _pairs(console, "Defaults in force", answer["defaults"], raw=True)
    if "schedule" in answer:
        _pairs(console, f"Static proof: {answer['schedule']['title']}", answer["schedule"],
               skip=("title",))
        console.print("passes every static bound", style="green")


def _pairs(
    console: Console, title: str, values: dict[str, Any], skip: tuple[str, ...] = (),
    raw: bool = False,
) -> None:
    from rich.table import Table

    table = Table(title=title, title_justify="left", show_header=False, box=None, padding=(0, 2))
    for name, value in values.items():
        if name not in skip:
            table.add_row(*((name, value) if raw else labelled(name, value)))
    console.print(table)
    console.print()


def _sensors(console: Console, sensors: dict[str, dict[str, float]]) -> None:
    from rich.table import Table

    from ..units import show

    table = Table(title="Sensors", title_justify="left", box=None, padding=(0, 2))
    for head in ("channel", "one count", "noise", "uncertainty (k = 2)", "counts of least limit"):
        table.add_column(head)
    for name, row in sensors.items():
        unit = {"coil_a": "A", "coil_b": "A", "supply": "V"}.get(name, "Pa")
        table.add_row(name, show(float(f"{row['resolution']:.3g}"), unit),
                      show(row["noise"], unit), show(row["uncertainty_k2"], unit),
                      f"{row['counts_of_smallest_limit']:.0f}")
    console.print(table)
    console.print()


def _interlocks(console: Console, rows: list[dict[str, Any]]) -> None:
    from rich.table import Table

    table = Table(title="Margin of each pressure trip to a valve's collapse", title_justify="left",
                  box=None, padding=(0, 1))
    for head in ("", "collapse", "at trip", "sensor", "doubt", "overshoot", "margin"):
        table.add_column(head, justify="right" if head else "left")
    for row in rows:
        names = ("collapse_pa", "reverse_at_hard_pa", "sensor_pa", "collapse_doubt_pa",
                 "overshoot_pa", "margin_pa")
        table.add_row(row["interlock"].replace("_", " "), *(labelled(n, row[n])[1] for n in names))
    console.print(table)
    if any(row["margin_pa"] < 0.0 for row in rows):
        console.print("Below zero: not shown by calculation; a dry-run shows what happens.")
    console.print()
