"""The page of a dry-run."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

from .. import trips
from . import plots
from .page import Section, Table, write

if TYPE_CHECKING:
    import numpy as np

    from ..rig import Rig


def dry_run_page(
    result: dict[str, Any],
    samples: np.ndarray,
    cycles: list[dict[str, Any]],
    rig: Rig,
    out: str | Path,
) -> Path:
    """One self-contained page of a dry-run. Raises LodestrokeError when it cannot be written."""
    figures = [(key, value) for key, value in result.items() if not isinstance(value, list | dict)]
    sections = [
        Section(
            "Figures",
            tables=[Table("Units stand at the end of each name", ("figure", "value"), figures)],
        ),
        Section(
            "Traces",
            figures=[
                plots.pressures(samples, rig),
                plots.reverse(samples, rig),
                plots.drive(samples, rig),
                plots.winding(samples, rig),
            ],
        ),
    ]
    if cycles:
        sections.append(
            Section(
                "Cycles",
                figures=[
                    plots.flow(cycles, rig),
                    plots.cycle_pressures(cycles, rig),
                    plots.margins(cycles, rig),
                ],
            )
        )
    if result["trips"]:
        sections.append(
            Section(
                "Trips",
                tables=[
                    Table(
                        "First-out causes",
                        ("trip", "what"),
                        [(trip["name"], trips.sentence(trip)) for trip in result["trips"]],
                    )
                ],
            )
        )
    verdict = (
        f"Ended: {result['end']}. {result['cycles']} cycles, {result['delivered_ul']} µl, "
        f"least true margin {result['min_margin_pa']} Pa."
    )
    return write(
        Path(out),
        f"Dry-run: {result['schedule']}",
        f"{result['rig']}, seed {result['seed']}, on the {result['on']}",
        verdict,
        bool(result["trips"]) or result["min_margin_pa"] < 0,
        sections,
    )
