"""What the live page shows, read from the logbook: the newest run, or one by name."""

from __future__ import annotations

import time
from typing import Any

from .. import trips
from ..analysis import cycles as account
from ..errors import LodestrokeError
from ..logbook import Logbook, reader
from ..logbook.source import rig_of

_SHOWN = 2000  # cycles on the page


def state(logbook: Logbook, run_id: str | None) -> dict[str, Any]:
    """The page's data as one JSON-ready dictionary; `condition` in words."""
    try:
        run = reader.run(logbook, run_id or "last")
    except LodestrokeError as error:
        return {"run": None, "condition": error.what, "cycles": {}, "trips": []}
    cycles = reader.cycles(
        logbook, run["id"], max(0, reader.last_cycle(logbook, run["id"]) - _SHOWN)
    )
    rig = rig_of(run)
    series: dict[str, Any] = {}
    if cycles:
        margin = account.margins_pa(cycles, rig)
        series = {
            "cycle": [row["cycle"] for row in cycles],
            "flow_ul_per_min": account.flow_ul_per_min(cycles, rig)[0].round(3).tolist(),
            "chamber_max_pa": [row["chamber_max_pa"] for row in cycles],
            "chamber_min_pa": [row["chamber_min_pa"] for row in cycles],
            "outlet_max_pa": [row["outlet_max_pa"] for row in cycles],
            "margin_outlet_pa": margin["outlet"].round(1).tolist(),
            "margin_inlet_pa": margin["inlet"].round(1).tolist(),
            "winding_degc": [row["winding_cc"] / 100.0 for row in cycles],
        }
    return {
        "run": run["id"],
        "title": run["title"],
        "kind": run["kind"],
        "place": run["place"],
        "target_cycles": run["meta"].get("target_cycles"),
        "done_cycles": cycles[-1]["cycle"] if cycles else 0,
        "condition": _condition(run),
        "open": run["ended"] is None,
        "stop_requested": reader.stop_requested(logbook, run["id"]),
        "trips": [
            f"{trip['at'][:19]} UTC: {trips.sentence(trip)}"
            for trip in reader.trips(logbook, run["id"])
        ],
        "cycles": series,
    }


def _condition(run: dict[str, Any]) -> str:
    if run["ended"] is not None:
        return f"ended: {run['end']}"
    if run["lease_until"] > time.time():
        return "running"
    return "no host is writing this run: it was killed or lost its disk; the board stops by itself"
