"""Which run a --resume means."""

from __future__ import annotations

from typing import TYPE_CHECKING

from ..errors import LogbookError
from ..logbook import Logbook, reader

if TYPE_CHECKING:
    from ..rig import Rig
    from ..schedule import Plan

FINAL = "target reached"


def resumable(logbook: Logbook, rig: Rig, plan: Plan) -> str:
    """The newest endurance run of this very rig and plan that has not reached its target.

    Raises LogbookError saying what there is instead.
    """
    import hashlib
    from pathlib import Path

    wanted = hashlib.sha256(Path(plan.source).read_bytes()).hexdigest()
    fingerprint = rig.fingerprint.hex()
    others = []
    for row in reader.runs(logbook):
        if row["kind"] != "endure":
            continue
        same = (
            row["meta"].get("sha256", {}).get("plan") == wanted
            and row["meta"].get("fingerprint") == fingerprint
        )
        if same and row["end"] != FINAL:
            return str(row["id"])
        others.append(
            f"{row['id']} ({'this plan, ' if same else 'another rig or plan, '}"
            f"{row['end'] or 'open'})"
        )
    raise LogbookError(
        "there is no run to resume",
        at=logbook.name,
        got=", ".join(others[:4]) or "no endurance run",
        bound="an endurance run of this rig and plan, unchanged, that has not reached its target",
        try_="start it without --resume",
    )
