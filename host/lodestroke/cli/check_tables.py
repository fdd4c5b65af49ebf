"""The answer of `check` as tables on a terminal."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

from rich.console import Console
from rich.table import Table

from ..margin.labels import labelled, sensor_unit, value_text

_CURVE_ROWS = 13         # of a curve's points, in a text table


def show_tables(answer: dict[str, Any]) -> None:
    """Everything, in the order in which a bench is thought through; what will disappoint comes last."""
    console = Console(highlight=False, markup=False, emoji=False)   # titles are the user's text
    console.print(answer["title"] or answer["rig"], style="bold")
    console.print(f"fingerprint {answer['fingerprint']}, limits {answer['limits_bytes']} bytes, "
                  f"CRC-32 {answer['limits_crc32']}\n")
    for coil in answer["coils"]:
        _pairs(console, f"Coil {coil['name']}".strip(), coil, skip=("name", "at_duty"))
        _heat(console, coil)
    _curves(console, answer)
    _pairs(console, "Slug at full current", answer["slug"])
    _pairs(console, "Static stroke at full current", answer["stroke"])
    _pairs(console, "Flow, at the slug's fastest", answer["flow"])
    _priming(console, answer["priming"])
    _sensors(console, answer["sensors"])
    _interlocks(console, answer["interlocks"], "at full current")
    _watches(console, answer)
    _pairs(console, "Left out of the simulation by choice", answer["left_out"])
    if answer["pins"]:
        _table(console, "Pins", ("signal", "pin", "way", "used as", "what", "mind"),
               [(row["signal"], row["name"], row["way"], row["peripheral"], row["what"],
                 row["care"]) for row in answer["pins"]], left=(0, 1, 2, 3, 4, 5))
    if answer["defaults"]:
        _pairs(console, "Defaults in force", answer["defaults"], raw=True)
    if "schedule" in answer:
        _proof(console, answer["schedule"])
    _warnings(console, answer["warnings"])


def _pairs(
    console: Console, title: str, values: dict[str, Any], skip: tuple[str, ...] = (),
    raw: bool = False,
) -> None:
    table = Table(title=title, title_justify="left", show_header=False, box=None, padding=(0, 2))
    for name, value in values.items():
        if name not in skip:
            table.add_row(*((name, value) if raw else labelled(name, value)))
    console.print(table)
    console.print()


def _table(
    console: Console, title: str, heads: Iterable[str], rows: Iterable[Iterable[str]],
    left: tuple[int, ...] = (0,),
) -> None:
    table = Table(title=title, title_justify="left", box=None, padding=(0, 1))
    for n, head in enumerate(heads):
        table.add_column(head, justify="left" if n in left else "right", overflow="fold")
    for row in rows:
        table.add_row(*row)
    console.print(table)
    console.print()


def _heat(console: Console, coil: dict[str, Any]) -> None:
    _table(console, "Full current at a duty, from cold", ("duty", "in the end", "to the limit"),
           [(f"{row['duty']:g}", value_text(row["steady_c"], "degC"),
             value_text(row["seconds_to_limit"], "s")) for row in coil["at_duty"]])


def _some(points: list[Any]) -> range:
    step = max(1, (len(points) - 1) // (_CURVE_ROWS - 1))
    return range(0, len(points), step)


def _curves(console: Console, answer: dict[str, Any]) -> None:
    """Field and pressure along the axis; push and return over the travel."""
    axis, force = answer["axis"], answer["force"]
    heads = ("place", *(f"field {coil['name'] or n + 1}" for n, coil in enumerate(answer["coils"])),
             "magnetic pressure")
    _table(console, "Along the axis at full current, from the resting slug's middle", heads,
           [(value_text(axis["place_m"][n], "m"),
             *(value_text(field[n], "A/m") for field in axis["field_a_m"]),
             value_text(axis["pressure_pa"][n], "Pa")) for n in _some(axis["place_m"])])
    _table(console, "Force on the displaced slug: push by current, return, and force of all", (
        "displacement", *(value_text(i, "A") for i in force["currents_a"]), "return", "force"),
        [(value_text(force["displacement_m"][n], "m"),
          *(value_text(push[n], "Pa") for push in force["push_pa"]),
          value_text(force["return_pa"][n], "Pa"),
          value_text((force["push_pa"][-1][n] + force["return_pa"][n]) * force["area_m2"], "N"))
         for n in _some(force["displacement_m"])])


def _priming(console: Console, priming: dict[str, Any]) -> None:
    _pairs(console, "Priming with gas in the chamber", priming, skip=("with_gas",))
    _table(console, "Suction lift by gas left in the chamber", ("gas", "lift"),
           [(value_text(row["gas_m3"], "m^3"), value_text(row["suction_lift_pa"], "Pa"))
            for row in priming["with_gas"]])


def _sensors(console: Console, sensors: dict[str, dict[str, float]]) -> None:
    rows = []
    for name, row in sensors.items():
        unit = sensor_unit(name)
        rows.append((name, value_text(row["resolution"], unit), value_text(row["noise"], unit),
                     value_text(row["uncertainty_k2"], unit),
                     value_text(row["smallest_limit"], unit),
                     f"{row['counts_of_smallest_limit']:.0f}"))
    _table(console, "Sensors", ("channel", "one count", "noise", "uncertainty (k = 2)",
                                "least limit", "in counts"), rows)


def _interlocks(console: Console, rows: list[dict[str, Any]], when: str) -> None:
    names = ("collapse_pa", "reverse_at_hard_pa", "sensor_pa", "collapse_doubt_pa", "overshoot_pa",
             "margin_pa", "margin_bound_pa", "holds_up_to_a")
    _table(console, f"Margin of each pressure trip to a valve's collapse, worst stroke {when}",
           ("", "collapse", "at trip", "sensor", "doubt", "overshoot", "margin", "bound", "holds to"),
           [(row["interlock"].replace("_", " "), *(labelled(name, row[name])[1] for name in names))
            for row in rows])
    if any(row["margin_bound_pa"] < 0.0 for row in rows):
        console.print("overshoot: of the worst single stroke, run through the plant; bound: what no "
                      "stroke between the other limits can pass, by energy and volume, without drag.")
        console.print()


def _watches(console: Console, answer: dict[str, Any]) -> None:
    rows = []
    for row in answer["watches"]:
        where = row.get("sensor") or row.get("coil") or ""
        rows.append((f"{row['interlock'].replace('_', ' ')} {where}".strip(),
                     value_text(row["limit"], row["unit"]), value_text(row["headroom"], _head_unit(row)),
                     value_text(row["acts_within_s"], "s"),
                     value_text(row["margin"], row["margin_unit"])))
    _table(console, "Every other interlock: room before it fires on a sound pump, and margin to harm",
           ("", "limit", "headroom", "acts within", "margin"), rows)
    console.print("Full current takes the chamber from rest to the inlet valve's collapse in "
                  f"{value_text(answer['unguarded_s'], 's')}, nobody watching.\n")


def _head_unit(row: dict[str, Any]) -> str:
    return "K" if row["unit"] == "degC" else str(row["unit"])


def _proof(console: Console, proof: dict[str, Any]) -> None:
    _pairs(console, f"Static proof: {proof['title']}", proof, skip=("title", "strokes", "interlocks"))
    if proof["interlocks"]:
        _interlocks(console, proof["interlocks"], f"of this schedule's {proof['current_a']:g} A")
    console.print("passes every static bound\n", style="green")


def _warnings(console: Console, warnings: list[dict[str, str]]) -> None:
    if not warnings:
        console.print("Nothing found that will disappoint.", style="green")
        return
    console.print(f"What will disappoint ({len(warnings)})", style="bold")
    for row in warnings:
        console.print(f"- {row['what']}", style="yellow")
        for part in ("got", "bound", "try"):
            console.print(f"    {part:<6}{row[part]}", soft_wrap=True)
