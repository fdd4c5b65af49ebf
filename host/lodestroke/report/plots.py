"""Plots for pages, each a plotly figure with units on every axis; plotly is embedded once a page."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import plotly.graph_objects as go

from ..analysis import cycles as account

if TYPE_CHECKING:
    from ..rig import Rig

_COLOURS = {
    "chamber": "#1b6ca8",
    "outlet": "#b3541e",
    "current": "#5b8c2a",
    "target": "#9aa0a6",
    "winding": "#a8324a",
    "flow": "#1b6ca8",
    "inlet": "#6a4c93",
    "held": "#c9a227",
}
MOST_POINTS = 20_000
PA_PER_CMH2O = 98.0665


def _figure(title: str, x: str, y: str, height: int = 340) -> go.Figure:
    figure = go.Figure()
    figure.update_layout(
        title={"text": title, "font": {"size": 15}},
        height=height,
        template="plotly_white",
        margin={"l": 70, "r": 20, "t": 50, "b": 80},
        hovermode="x unified",
        legend={"orientation": "h", "y": -0.2, "x": 0.5, "xanchor": "center", "yanchor": "top"},
    )
    figure.update_xaxes(title_text=x)
    figure.update_yaxes(title_text=y)
    return figure


def _thin(rows: np.ndarray) -> np.ndarray:
    """Every n-th row, so that a page stays light; extremes of cycles are in the cycle plots."""
    return rows[:: max(1, len(rows) // MOST_POINTS)]


def _line(figure: go.Figure, x: Any, y: Any, name: str, colour: str, **more: Any) -> None:
    figure.add_trace(
        go.Scatter(
            x=x,
            y=y,
            name=name,
            mode="lines",
            line={"color": _COLOURS[colour], "width": 1.4, **more},
        )
    )


def _level(
    figure: go.Figure, y: float, text: str, colour: str = "#888888", dash: str = "dot"
) -> None:
    figure.add_hline(
        y=y,
        line={"color": colour, "dash": dash, "width": 1},
        annotation={"text": text, "font": {"size": 10, "color": colour}},
        annotation_position="top left",
    )


def pressures(
    rows: np.ndarray, rig: Rig, title: str = "Pressures", zero_tick: int = 0
) -> go.Figure:
    """Chamber and outlet over time, with the chamber's and the outlet's hard levels."""
    rows = _thin(rows)
    seconds = (rows["tick"].astype(float) - zero_tick) * rig.board.tick
    figure = _figure(title, "time / s", "gauge pressure / Pa")
    _line(figure, seconds, rows["chamber_pa"], "chamber", "chamber")
    _line(figure, seconds, rows["outlet_pa"], "outlet", "outlet")
    limits = rig.limits
    _level(figure, limits.outlet_high.hard, "outlet high, trips")
    _level(figure, limits.chamber_low.hard, "chamber low, trips")
    return figure


def reverse(
    rows: np.ndarray,
    rig: Rig,
    title: str = "Reverse pressure across the outlet valve",
    zero_tick: int = 0,
) -> go.Figure:
    """Outlet less chamber over time, with soft and hard level and the valve's collapse."""
    rows = _thin(rows)
    seconds = (rows["tick"].astype(float) - zero_tick) * rig.board.tick
    figure = _figure(title, "time / s", "outlet less chamber / Pa")
    _line(figure, seconds, rows["outlet_pa"] - rows["chamber_pa"], "outlet less chamber", "outlet")
    level = rig.limits.outlet_reverse
    _level(figure, level.soft, "soft: holds the stroke back", "#c9a227")
    _level(figure, level.hard, "hard: trips", "#c0392b")
    _level(
        figure, sum(valve.collapse for valve in rig.valves.outlet), "collapse", "#000000", "dash"
    )
    return figure


def drive(rows: np.ndarray, rig: Rig, title: str = "Coil current", zero_tick: int = 0) -> go.Figure:
    """Target and measured current over time."""
    rows = _thin(rows)
    seconds = (rows["tick"].astype(float) - zero_tick) * rig.board.tick
    figure = _figure(title, "time / s", "current / mA", 260)
    _line(figure, seconds, rows["target_a_ma"], "target", "target", dash="dot")
    _line(figure, seconds, rows["coil_a_ma"], "measured", "current")
    return figure


def winding(rows: np.ndarray, rig: Rig) -> go.Figure:
    """The board's estimate of the winding's temperature over time."""
    rows = _thin(rows)
    figure = _figure(
        "Winding temperature, the board's estimate", "time / s", "temperature / °C", 260
    )
    _line(figure, rows["tick"] * rig.board.tick, rows["winding_cc"] / 100.0, "winding", "winding")
    return figure


def cycle_pressures(cycles: list[dict[str, Any]], rig: Rig) -> go.Figure:
    """Extremes of each cycle against limits."""
    figure = _figure("Pressures, extremes of each cycle", "cycle number / 1", "gauge pressure / Pa")
    x = account.column(cycles, "cycle")
    _line(figure, x, account.column(cycles, "chamber_max_pa"), "chamber, highest", "chamber")
    _line(
        figure,
        x,
        account.column(cycles, "chamber_min_pa"),
        "chamber, lowest",
        "chamber",
        dash="dot",
    )
    _line(figure, x, account.column(cycles, "outlet_max_pa"), "outlet, highest", "outlet")
    _level(figure, rig.limits.outlet_high.hard, "outlet high, trips")
    _level(figure, rig.limits.chamber_low.hard, "chamber low, trips")
    return figure


def flow(cycles: list[dict[str, Any]], rig: Rig) -> go.Figure:
    """Mean flow of each cycle with a band of two standard uncertainties."""
    figure = _figure("Flow to the load, mean of each cycle", "cycle number / 1", "flow / µl/min")
    x = account.column(cycles, "cycle")
    value, u = account.flow_ul_per_min(cycles, rig)
    figure.add_trace(
        go.Scatter(
            x=np.concatenate([x, x[::-1]]),
            y=np.concatenate([value + 2 * u, (value - 2 * u)[::-1]]),
            mode="lines",
            fill="toself",
            fillcolor="rgba(27,108,168,0.15)",
            line={"width": 0},
            hoverinfo="skip",
            name="± 2 u",
        )
    )
    _line(figure, x, value, "flow", "flow")
    return figure


def margins(cycles: list[dict[str, Any]], rig: Rig) -> go.Figure:
    """Margin of each valve in each cycle, sensor uncertainty taken off."""
    figure = _figure(
        "Margin to collapse, worst of each cycle (less 2 u)", "cycle number / 1", "margin / Pa"
    )
    x = account.column(cycles, "cycle")
    for side, values in account.margins_pa(cycles, rig).items():
        _line(figure, x, values, f"{side} valve", side)
    _level(figure, 0.0, "collapse", "#000000", "dash")
    return figure


def heat_and_hold(cycles: list[dict[str, Any]]) -> go.Figure:
    """Winding temperature at the end of each cycle, and the share of ticks held back."""
    figure = _figure(
        "Winding temperature and strokes held back", "cycle number / 1", "winding temperature / °C"
    )
    x = account.column(cycles, "cycle")
    _line(figure, x, account.column(cycles, "winding_cc") / 100.0, "winding", "winding")
    held = account.column(cycles, "held_ticks") / np.maximum(
        account.column(cycles, "duration_ticks"), 1
    )
    figure.add_trace(
        go.Bar(
            x=x,
            y=100.0 * held,
            name="held back",
            yaxis="y2",
            opacity=0.5,
            marker={"color": _COLOURS["held"]},
        )
    )
    figure.update_layout(
        yaxis2={
            "title": "ticks held back / %",
            "overlaying": "y",
            "side": "right",
            "range": [0, 100],
            "showgrid": False,
            "tickmode": "linear",
            "dtick": 20,
        },
        margin={"r": 70},
    )
    return figure
