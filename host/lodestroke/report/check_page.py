"""The page of `check`: what a careful engineer wants to see before power."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from ..margin import labels
from ..margin.labels import sensor_unit
from . import price_plots as plots
from .page import Section, Table, write

_SIGNS = ((" ", "\u00a0"), ("degC", "°C"), ("ul", "µl"), ("um", "µm"), ("us", "µs"), ("*", "·"))


def value_text(value: Any, unit: str) -> str:
    """A value as a page prints it: held together, with the signs that a terminal may lack."""
    return _signs(labels.value_text(value, unit))


def labelled(name: str, value: Any) -> tuple[str, str]:
    """labels.labelled() as a page prints it."""
    label, text = labels.labelled(name, value)
    return label, text if isinstance(value, str) else _signs(text)


def _signs(text: str) -> str:
    """Words stay as they are; a number with its unit is set with signs and no break."""
    if text[:1].isdigit() or (text[:1] == "-" and len(text) > 1):
        for plain, sign in _SIGNS:
            text = text.replace(plain, sign)
    return text


def check_page(answer: dict[str, Any], out: str | Path) -> Path:
    """One self-contained page of what `check` answers. Raises LodestrokeError when it cannot be
    written."""
    sections = [_warnings(answer), _magnet(answer), _stroke(answer), _heat(answer),
                _interlocks(answer), _watches(answer), _flow(answer), _sensors(answer)]
    if "schedule" in answer:
        sections.insert(1, _proof(answer["schedule"]))
    sections.append(_rest(answer))
    return write(Path(out), f"Before power: {answer['title'] or Path(answer['rig']).name}",
                 f"{Path(answer['rig']).name}, fingerprint {answer['fingerprint']}", _verdict(answer),
                 bool(answer["warnings"]), sections)


def _verdict(answer: dict[str, Any]) -> str:
    late = [row for row in answer["interlocks"] if row["margin_pa"] < 0.0]
    holds = min(row["holds_up_to_a"] for row in answer["interlocks"])
    count = len(answer["warnings"])
    text = f"{count} thing{'s' if count != 1 else ''} will disappoint. " if count else (
        "Nothing found that will disappoint. ")
    text += (f"Strokes of up to {value_text(holds, 'A')} leave every valve whole even when the worst "
             "happens at once; above that a trip may come too late. " if late else
             "Every valve stays whole in the worst stroke at full current. ")
    if "schedule" in answer:
        least = min((row["margin_pa"] for row in answer["schedule"]["interlocks"]), default=None)
        if least is not None:
            text += (f"The schedule passes every static bound; least margin at its current "
                     f"{value_text(least, 'Pa')}.")
    return text


def _pairs(caption: str, values: dict[str, Any], skip: tuple[str, ...] = ()) -> Table:
    return Table(caption, ("figure", "value"),
                 [labelled(name, value) for name, value in values.items() if name not in skip])


def _warnings(answer: dict[str, Any]) -> Section:
    if not answer["warnings"]:
        return Section("What will disappoint", "Nothing was found beyond its bound.")
    return Section("What will disappoint", tables=[Table(
        "Pump, coil, then sensors and limits", ("what", "got", "bound", "try"),
        [(row["what"], row["got"], row["bound"], row["try"]) for row in answer["warnings"]])])


def _proof(proof: dict[str, Any]) -> Section:
    tables = [_pairs("Numbers beside their bounds, all of which it passes", proof,
                     skip=("title", "strokes", "interlocks"))]
    if proof["interlocks"]:
        tables.append(_margins(proof["interlocks"],
                               f"worst stroke of its greatest current, {proof['current_a']:g} A"))
    return Section(f"Static proof of the schedule: {proof['title']}", tables=tables)


def _magnet(answer: dict[str, Any]) -> Section:
    axis = answer["axis"]
    step = max(1, (len(axis["place_m"]) - 1) // 12)
    rows = [(value_text(axis["place_m"][n], "m"),
             *(value_text(row[n], "A/m") for row in axis["field_a_m"]),
             value_text(axis["pressure_pa"][n], "Pa"))
            for n in range(0, len(axis["place_m"]), step)]
    heads = ("place", *(f"field, coil {coil['name'] or n + 1}"
                        for n, coil in enumerate(answer["coils"])), "magnetic pressure")
    return Section("Field and pressure along the axis",
                   "Thick-solenoid field on the axis; magnetic pressure of a Langevin liquid (Rosensweig "
                   "1985). Places are counted from the resting slug's middle, towards the chamber.",
                   [Table("At full current", heads, rows), _pairs("The slug", answer["slug"]),
                    _pairs("Left out of the simulation by choice", answer["left_out"])],
                   [plots.field(answer), plots.pressure(answer)])


def _stroke(answer: dict[str, Any]) -> Section:
    return Section("Force and stroke",
                   "A slow stroke: the slug stands where push, return and load balance; the chamber's "
                   "compliance takes its part of what moves.",
                   [_pairs("Static stroke at full current, and its own swing", answer["stroke"])],
                   [plots.force(answer)])


def _heat(answer: dict[str, Any]) -> Section:
    tables = []
    for coil in answer["coils"]:
        tables.append(_pairs(f"Coil {coil['name']}".strip(), coil, skip=("name", "at_duty")))
        tables.append(Table("Full current at a duty, from cold", (
            "duty", "winding in the end", "time to the limit"),
            [(row["duty"], value_text(row["steady_c"], "degC"),
              value_text(row["seconds_to_limit"], "s")) for row in coil["at_duty"]]))
    return Section("Coil: currents, time constants, heat",
                   "Two nodes, winding and body; resistance taken as at the limit.", tables,
                   [plots.heat(answer)])


def _margins(rows: list[dict[str, Any]], when: str) -> Table:
    names = ("collapse_pa", "reverse_at_hard_pa", "sensor_pa", "collapse_doubt_pa", "overshoot_pa",
             "margin_pa", "margin_bound_pa", "reaction_s", "holds_up_to_a")
    return Table(
        f"Margin to collapse, {when}",
        ("interlock", "collapse", "at the hard level", "sensor (k = 2)", "doubt (k = 2)", "overshoot",
         "margin", "margin by the bound", "reaction", "holds up to", "worst stroke"),
        [(row["interlock"].replace("_", " "), *(labelled(name, row[name])[1] for name in names),
          row["cause"]) for row in rows])


def _interlocks(answer: dict[str, Any]) -> Section:
    return Section(
        "Interlocks that keep a valve from collapse",
        "Margin: collapse less the pressure at the hard level, less sensor uncertainty, the doubt of "
        "the collapse pressure, and the overshoot: what filter lag, one tick, the fall of the current "
        "and the slug's own momentum add in the worst single stroke, run through the plant. The bound "
        "is what no stroke between the other limits can pass, by energy and volume, without drag.",
        [_margins(answer["interlocks"], "worst stroke at full current")],
        [plots.interlocks(answer), plots.margins(answer), plots.worst(answer)])


def _watches(answer: dict[str, Any]) -> Section:
    rows = []
    for row in answer["watches"]:
        where = row.get("sensor") or row.get("coil") or ""
        head = "K" if row["unit"] == "degC" else row["unit"]
        rows.append((f"{row['interlock'].replace('_', ' ')} {where}".strip(),
                     value_text(row["limit"], row["unit"]), value_text(row["headroom"], head),
                     value_text(row["acts_within_s"], "s"),
                     value_text(row["margin"], row["margin_unit"]), row["note"]))
    return Section(
        "Every other interlock",
        "Headroom: how far a sound pump stays from firing it, uncertainty (k = 2) and four times the "
        "noise taken off. Margin: how far it acts before harm.",
        [Table("", ("interlock", "limit", "headroom", "acts within", "margin", "what it means"), rows)])


def _flow(answer: dict[str, Any]) -> Section:
    priming = answer["priming"]
    return Section("Fluid numbers and priming", tables=[
        _pairs("At the slug's greatest speed, in the worst stroke at full current", answer["flow"]),
        _pairs("Priming: what gas in the chamber allows, walls taken as rigid", priming,
               skip=("with_gas",)),
        Table("Suction lift by gas left in the chamber", ("gas", "lift"),
              [(value_text(row["gas_m3"], "m^3"), value_text(row["suction_lift_pa"], "Pa"))
               for row in priming["with_gas"]])])


def _sensors(answer: dict[str, Any]) -> Section:
    rows = []
    for name, row in answer["sensors"].items():
        unit = sensor_unit(name)
        rows.append((name, value_text(row["resolution"], unit), value_text(row["noise"], unit),
                     value_text(row["uncertainty_k2"], unit), value_text(row["lag_s"], "s"),
                     value_text(row["smallest_limit"], unit),
                     round(row["counts_of_smallest_limit"])))
    return Section("Sensors against limits", tables=[Table(
        "", ("channel", "one count", "noise", "uncertainty (k = 2)", "lag", "least limit",
             "in counts"), rows)])


def _rest(answer: dict[str, Any]) -> Section:
    tables = []
    if answer["pins"]:
        tables.append(Table("Pins", ("signal", "pin", "way", "used as", "what", "mind"), [
            (row["signal"], row["name"], row["way"], row["peripheral"], row["what"], row["care"])
            for row in answer["pins"]]))
    if answer["defaults"]:
        tables.append(Table("Defaults in force", ("key", "default"),
                            list(answer["defaults"].items())))
    return Section("Wiring and defaults", tables=tables)
