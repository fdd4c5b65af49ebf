"""A case as a small TOML file that `dry-run --replay` takes."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from lodeboard.limits import CHANNELS

from ..errors import ScheduleError
from ..rig.problems import Problem
from ..rig.toml_file import Document, read_fields, read_toml
from .faults import OF_A_SENSOR, OF_A_SIZE, Case, Fault

if TYPE_CHECKING:
    from ..rig import Rig


def case_text(case: Case, remark: str = "") -> str:
    """The file's text; the remark stands above it as a comment."""
    lines = [f"# {line}" for line in remark.splitlines()]
    lines.append(f"plant_seed = {case.plant_seed}")
    for fault in case.faults:
        lines += ["", "[[faults]]", f'kind = "{fault.kind}"']
        if fault.channel:
            lines.append(f'channel = "{fault.channel}"')
        lines.append(f"start_tick = {fault.start_tick}")
        lines.append(f"length_ticks = {fault.length_ticks}")
        if fault.kind in OF_A_SIZE:
            lines.append(f"magnitude = {fault.magnitude}")
    return "\n".join(lines) + "\n"


def write_case(path: Path, case: Case, remark: str = "") -> Path:
    """Write the file. Raises ScheduleError when it cannot be written; the case is told then."""
    text = case_text(case, remark)
    try:
        path.write_text(text, encoding="utf-8")
    except OSError as fault:
        raise ScheduleError(
            "the case cannot be written",
            at=str(path),
            got=fault.strerror or str(fault),
            bound="a file that can be written",
            try_="name another with --out; the case is:\n" + text,
        ) from fault
    return path


def read_case(path: str | Path, rig: Rig) -> Case:
    """Read and judge a case file for a rig. Raises ScheduleError with all that is wrong."""
    document = read_toml(path, ScheduleError, "case")
    good = read_fields(Case, document)
    for n, fault in enumerate(good.get("faults", ())):
        document.problems.extend(_misfits(fault, n, rig))
    _needs_something(document)
    document.raise_if_any()
    return Case(**good)


def _misfits(fault: Fault, n: int, rig: Rig) -> list[Problem]:
    """What a fault says that this rig or its kind cannot have."""
    wired = [name for name in CHANNELS if getattr(rig.sensors, name) is not None]
    found = []
    if fault.kind in OF_A_SENSOR and fault.channel not in wired:
        found.append(Problem(("faults", n, "channel"), "no sensor of this rig",
                             ", ".join(wired), "name the sensor that fails"))
    if fault.kind not in OF_A_SENSOR and fault.channel:
        found.append(Problem(("faults", n, "channel"), f"{fault.kind} is of no one sensor",
                             "no channel", "leave it out"))
    if fault.magnitude and fault.kind not in OF_A_SIZE:
        found.append(Problem(("faults", n, "magnitude"), f"{fault.kind} has no size",
                             "no magnitude", "leave it out"))
    if fault.kind == "supply_sag" and not 0 <= fault.magnitude <= 100:
        found.append(Problem(("faults", n, "magnitude"), "no share of the supply",
                             "0 to 100 percent", "write a percentage"))
    return found


def _needs_something(document: Document) -> None:
    """An empty file is more likely a wrong one than the nominal pump without a fault."""
    if not document.data:
        document.problems.append(Problem(("plant_seed",), "missing", '"plant_seed" is needed',
                                         "write plant_seed = 0 for the nominal pump"))
