"""The report of a logged run."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

from .. import trips
from ..analysis import cycles as account
from ..logbook import Logbook, reader
from ..logbook.source import rig_of
from . import plots
from .page import Section, Table, write

if TYPE_CHECKING:
    from ..rig import Rig

_GOOD_ENDS = ("finished", "target reached")


def write_report(logbook: Logbook, run_id: str, out: str | Path) -> Path:
    """One self-contained page of a run; `last` stands for the newest. Raises LodestrokeError."""
    run = reader.run(logbook, run_id)
    rig = rig_of(run)
    cycles = reader.cycles(logbook, run["id"])
    found = reader.trips(logbook, run["id"])
    sections = [_result(run, cycles, rig), _with_what(run)]
    if cycles:
        sections.append(
            Section(
                "Cycles",
                figures=[
                    plots.flow(cycles, rig),
                    plots.cycle_pressures(cycles, rig),
                    plots.margins(cycles, rig),
                    plots.heat_and_hold(cycles),
                ],
            )
        )
    sections += _traces(logbook, run, rig)
    sections += _checkups(logbook, run)
    sections += _trips(found, rig)
    sections += _events(logbook, run)
    verdict, bad = _verdict(run, cycles, found, rig)
    title = f"{run['title'] or run['kind']} – run {run['id']}"
    subtitle = f"{run['kind']} on {rig.title}, started {run['started'][:19]} UTC, {run['place']}"
    return write(Path(out), title, subtitle, verdict, bad, sections)


def _verdict(
    run: dict[str, Any], cycles: list[dict[str, Any]], found: list[dict[str, Any]], rig: Rig
) -> tuple[str, bool]:
    end = run["end"] or "still open"
    text = f"Ended: {end}. {len(cycles)} cycles on record"
    if cycles:
        figures = account.summary(cycles, rig)
        text += (
            f", mean flow {figures['mean_flow_ul_per_min']} ± "
            f"{2 * figures['u_mean_flow_ul_per_min']:.2f} µl/min (k = 2), least measured margin "
            f"{figures['least_margin_outlet_pa']} Pa at the outlet valve"
        )
    if found:
        text += f". First trip: {trips.sentence(found[0])}"
    return text + ".", end not in _GOOD_ENDS


def _result(run: dict[str, Any], cycles: list[dict[str, Any]], rig: Rig) -> Section:
    rows = [(key.replace("_", " "), value) for key, value in account.summary(cycles, rig).items()]
    tables = (
        [
            Table(
                "Figures of the cycles; units stand at the end of each name",
                ("figure", "value"),
                rows,
            )
        ]
        if rows
        else []
    )
    trend = (
        account.trend(account.column(cycles, "cycle"), account.flow_ul_per_min(cycles, rig)[0])
        if cycles
        else None
    )
    text = "" if cycles else "No cycle was completed."
    if trend:
        text = (
            f"Flow changes by {trend['per_1000']:.3g} ± {trend['half_width_95']:.2g} µl/min per "
            "thousand cycles (95 %, straight line)."
        )
    return Section("Result", text, tables)


def _with_what(run: dict[str, Any]) -> Section:
    meta = run["meta"]
    rows: list[tuple[Any, ...]] = [
        (name, f"{meta.get('files', {}).get(name, '')}", digest)
        for name, digest in meta.get("sha256", {}).items()
    ]
    ids = [
        ("rig fingerprint", meta.get("fingerprint", "")),
        ("firmware bundle", meta.get("bundle", "")),
        ("board", meta.get("board", "")),
        ("seed", meta.get("seed")),
        ("ended (UTC)", run["ended"]),
        ("resumes", str(run["resumes"])),
        ("machine", meta.get("machine", "")),
    ]
    versions = list(meta.get("versions", {}).items())
    return Section(
        "What was run, and with what",
        tables=[
            Table("Files and their SHA-256 sums", ("what", "file", "SHA-256"), rows),
            Table("Identities", ("what", "value"), [row for row in ids if row[1] is not None]),
            Table("Versions", ("part", "version"), versions),
        ],
    )


def _traces(logbook: Logbook, run: dict[str, Any], rig: Rig) -> list[Section]:
    """The last segment's samples: what the board looked like at the end."""
    last = None
    for _, rows in reader.sample_chunks(logbook, run["id"]):
        last = rows
    if last is None or len(last) == 0:
        return []
    return [
        Section(
            "Traces",
            f"The last {len(last)} live samples of the run.",
            figures=[
                plots.pressures(last, rig),
                plots.reverse(last, rig),
                plots.drive(last, rig),
                plots.winding(last, rig),
            ],
        )
    ]


def _checkups(logbook: Logbook, run: dict[str, Any]) -> list[Section]:
    rows = []
    for row in reader.checkups(logbook, run["id"]):
        result = row["result"]
        if not result.get("ok"):
            rows.append(
                (row["after_cycle"], row["item"], "not measured", result.get("why", ""), "")
            )
        for key, value in result.items():
            if key.startswith("u_") or key in ("ok", "why", "strokes"):
                continue
            rows.append((row["after_cycle"], row["item"], key, value, result.get(f"u_{key}", "")))
    if not rows:
        return []
    return [
        Section(
            "Check-ups",
            tables=[
                Table(
                    "Units stand at the end of each quantity's name",
                    ("after cycle", "item", "quantity", "value", "u (k = 1)"),
                    rows,
                )
            ],
        )
    ]


def _trips(found: list[dict[str, Any]], rig: Rig) -> list[Section]:
    if not found:
        return []
    rows, figures = [], []
    for trip in found:
        words = trips.WORDS.get(trip["code"])
        rows.append(
            (
                trip["at"][:19],
                trip["name"],
                trips.sentence(trip),
                words.causes if words else "",
                words.next if words else "",
            )
        )
        recorded = reader.recorder(trip)
        if len(recorded):
            head = f"Flight recorder, {trip['name']}"
            figures += [
                plots.pressures(recorded, rig, head + ": pressures (0 = trip)", trip["tick"]),
                plots.reverse(
                    recorded, rig, head + ": across the outlet valve (0 = trip)", trip["tick"]
                ),
                plots.drive(recorded, rig, head + ": current (0 = trip)", trip["tick"]),
            ]
    return [
        Section(
            "Trips",
            tables=[
                Table(
                    "First-out causes",
                    ("at (UTC)", "trip", "what", "likely causes", "next step"),
                    rows,
                )
            ],
            figures=figures,
        )
    ]


def _events(logbook: Logbook, run: dict[str, Any]) -> list[Section]:
    gaps = [
        (
            row["after_cycle"],
            row["why"],
            f"cycles {row['first_cycle']} to {row['last_cycle']}"
            if row["first_cycle"]
            else f"at most {row['unnumbered_most']} cycles",
        )
        for row in reader.gaps(logbook, run["id"])
    ]
    marks = [(row["tick"], row["mark"], row["step"]) for row in reader.marks(logbook, run["id"])]
    notes = [(row["at"][:19], row["text"]) for row in reader.notes(logbook, run["id"])]
    tables = []
    for caption, head, rows in (
        (
            "Gaps: what may have been pumped and is not on record",
            ("after cycle", "why", "how much"),
            gaps,
        ),
        ("Marks of the schedule", ("tick", "mark", "step"), marks),
        ("Notes", ("at (UTC)", "text"), notes),
    ):
        if rows:
            tables.append(Table(caption, head, rows))
    return [Section("Gaps, marks and notes", tables=tables)] if tables else []
