"""What a run was made from, as it was then."""

from __future__ import annotations

import tempfile
from pathlib import Path
from typing import Any

from ..rig import Rig, load_rig


def rig_of(run: dict[str, Any]) -> Rig:
    """The rig of a run row, from the text kept with it. Raises RigError."""
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / run["meta"].get("files", {}).get("rig", "rig.toml")
        path.write_text(run["sources"]["rig"], encoding="utf-8")
        return load_rig(path)
