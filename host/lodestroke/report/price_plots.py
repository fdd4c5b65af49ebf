"""Plots of a priced rig: one message each, said in its title with its number."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import plotly.graph_objects as go

from ..margin.labels import value_text
from .plots import _figure, _level

SERIES = ("#1b6ca8", "#b3541e", "#5b8c2a", "#a8324a", "#6a4c93", "#c9a227")
_FADED = ("#a9c9e3", "#5f9ccb", "#1b6ca8")


def line(figure: go.Figure, x: Any, y: Any, name: str, colour: str, dash: str = "solid") -> None:
    """One line."""
    figure.add_trace(go.Scatter(x=x, y=y, name=name, mode="lines",
                                line={"color": colour, "width": 1.8, "dash": dash}))


def times(values: Sequence[float], factor: float) -> list[float]:
    """Values in another unit."""
    return [factor * value for value in values]


def field(answer: dict[str, Any]) -> go.Figure:
    """Field of each coil along the axis, with windings and slug shaded."""
    axis, coils = answer["axis"], answer["coils"]
    place = times(axis["place_m"], 1e3)
    peak = max(axis["field_a_m"][0], key=abs)
    at = place[axis["field_a_m"][0].index(peak)]
    figure = _figure(f"Field at {value_text(axis['current_a'], 'A')}: {value_text(peak, 'A/m')} at "
                     f"{at:.1f} mm from the resting slug's middle",
                     "place on the axis / mm", "field / kA/m")
    for n, row in enumerate(axis["field_a_m"]):
        line(figure, place, times(row, 1e-3), f"coil {coils[n]['name'] or n + 1}", SERIES[n])
    for n, ends in enumerate(axis["coil_ends_m"]):
        figure.add_vrect(x0=1e3 * ends[0], x1=1e3 * ends[1], fillcolor=SERIES[n], opacity=0.08,
                         line_width=0, annotation_text="winding", annotation_position="top left")
    _slug(figure, answer)
    return figure


def pressure(answer: dict[str, Any]) -> go.Figure:
    """Magnetic pressure of the liquid along the axis: the push is the difference of two faces."""
    axis, slug = answer["axis"], answer["slug"]
    figure = _figure(
        f"Push at rest {value_text(slug['push_at_rest_pa'], 'Pa')}: front face "
        f"{value_text(slug['pressure_front_pa'], 'Pa')}, rear face "
        f"{value_text(slug['pressure_rear_pa'], 'Pa')}",
        "place on the axis / mm", "magnetic pressure / Pa")
    line(figure, times(axis["place_m"], 1e3), axis["pressure_pa"], "magnetic pressure", SERIES[0])
    _slug(figure, answer)
    return figure


def _slug(figure: go.Figure, answer: dict[str, Any]) -> None:
    reach = answer["axis"]["face_reach_m"][1]
    half = reach - answer["force"]["displacement_m"][-1]
    figure.add_vrect(x0=-1e3 * half, x1=1e3 * half, line={"color": "#444444", "width": 1, "dash": "dot"},
                     fillcolor="#444444", opacity=0.06, annotation_text="resting slug",
                     annotation_position="bottom right")


def force(answer: dict[str, Any]) -> go.Figure:
    """Push by current against what the slug has to beat: load and return."""
    rows, stroke = answer["force"], answer["stroke"]
    x = times(rows["displacement_m"], 1e3)
    moved = stroke["displacement_m"] > stroke["rear_m"]
    title = (f"Full current holds the slug at {1e3 * stroke['displacement_m']:.2f} mm against load and "
             "spring" if moved else "Full current does not move the slug against load and spring")
    figure = _figure(title, "displacement towards the chamber / mm", "pressure on the slug / Pa")
    for n, push in enumerate(rows["push_pa"]):
        line(figure, x, push, f"push at {value_text(rows['currents_a'][n], 'A')}", _FADED[n])
    line(figure, x, [stroke["load_pa"] - back for back in rows["return_pa"]],
         "load less return", SERIES[1], "dash")
    _level(figure, stroke["load_pa"], "load: outlet head and cracking")
    return figure


def heat(answer: dict[str, Any]) -> go.Figure:
    """Seconds from cold to the limit over duty, at full current."""
    coil = answer["coils"][0]
    rows = [row for row in coil["at_duty"] if row["seconds_to_limit"] < 1e6]
    last = (coil["greatest_steady_rms_a"] / answer["axis"]["current_a"])**2
    figure = _figure(
        f"Full current lasts {coil['seconds_to_limit_at_full_current']:.3g} s without a pause; for good "
        f"only up to a duty of {last:.2g}" if rows else "Full current may stay on for good",
        "duty / 1", "time from cold to the limit / s")
    figure.add_trace(go.Scatter(
        x=[row["duty"] for row in rows], y=[row["seconds_to_limit"] for row in rows],
        mode="lines+markers", name="time to the limit", line={"color": SERIES[3]}))
    figure.update_yaxes(type="log")
    return figure


def interlocks(answer: dict[str, Any]) -> go.Figure:
    """What takes up each valve's collapse pressure: level, doubts, overshoot."""
    rows = answer["interlocks"]
    late = [row for row in rows if row["margin_pa"] < 0.0]
    figure = _figure(
        f"{len(late)} of {len(rows)} pressure trips come too late for the worst stroke at full current"
        if late else "Every pressure trip comes before its valve's collapse, at full current too",
        "reverse pressure across the guarded valve / Pa", "interlock / 1", 80 + 70 * len(rows))
    names = [row["interlock"].replace("_", " ") for row in rows]
    for key, label, colour in (
            ("reverse_at_hard_pa", "at the hard level", SERIES[0]),
            ("sensor_pa", "sensor, k = 2", SERIES[5]),
            ("collapse_doubt_pa", "doubt of collapse, k = 2", SERIES[4]),
            ("overshoot_pa", "overshoot, worst stroke", SERIES[1])):
        figure.add_trace(go.Bar(y=names, x=[row[key] for row in rows], name=label, orientation="h",
                                marker={"color": colour}))
    figure.add_trace(go.Scatter(
        y=names, x=[row["collapse_pa"] for row in rows], mode="markers", name="collapse",
        marker={"symbol": "line-ns-open", "size": 26, "color": "#000000", "line": {"width": 3}}))
    figure.update_layout(barmode="stack", hovermode="closest", margin={"l": 120})
    figure.update_yaxes(autorange="reversed", title_text="")
    return figure


def margins(answer: dict[str, Any]) -> go.Figure:
    """Margin of each interlock over the strokes' current."""
    rows = answer["margins_by_current"]
    holds = min(row["holds_up_to_a"] for row in answer["interlocks"])
    figure = _figure(f"Strokes of up to {holds:.3g} A leave every valve whole, whatever trips",
                     "current of the worst stroke / A", "margin to collapse / Pa")
    for n, name in enumerate(key for key in rows if key != "current_a"):
        line(figure, rows["current_a"], rows[name], name.replace("_", " "), SERIES[n])
    _level(figure, 0.0, "collapse less its doubt", "#000000", "dash")
    return figure


def worst(answer: dict[str, Any]) -> go.Figure:
    """Chamber pressure in the worst push and the worst release, nobody watching."""
    push, let_go = answer["worst_strokes"]
    top = max(push["chamber_pa"])
    at = 1e3 * push["time_s"][push["chamber_pa"].index(top)]
    figure = _figure(f"Full current against a blocked outlet takes the chamber to "
                     f"{value_text(top, 'Pa')} in {at:.3g} ms", "time / ms",
                     "chamber pressure / Pa")
    line(figure, times(push["time_s"], 1e3), push["chamber_pa"], "push from the rear stop", SERIES[0])
    line(figure, times(let_go["time_s"], 1e3), let_go["chamber_pa"], "release from full current",
         SERIES[1])
    by_name = {row["interlock"]: row for row in answer["interlocks"]}
    inlet = by_name["inlet_reverse"]
    _level(figure, inlet["reverse_at_hard_pa"], "inlet reverse, trips", "#c0392b")
    _level(figure, inlet["collapse_pa"], "inlet valve collapses", "#000000", "dash")
    return figure
