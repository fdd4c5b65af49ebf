"""Where compiled code is kept: the user's cache folder, so that an installed wheel may be read-only.

Numba keeps a function until its own file changes, and does not look at the files of what it calls.
So the folder's name carries a hash over all sources of the plant: none is ever paired with another's
compiled code.
"""

from __future__ import annotations

import hashlib
import os
import shutil
import sys
import tempfile
import time
from pathlib import Path

_KEEP_S = 30 * 86400.0


def sources_hash() -> str:
    """First 12 hex digits of the SHA-256 over every source file beside this one."""
    whole = hashlib.sha256()
    for path in sorted(Path(__file__).parent.glob("*.py")):
        whole.update(path.name.encode() + b"\0" + path.read_bytes())
    return whole.hexdigest()[:12]


def settle() -> Path:
    """Point Numba at a folder that can be written, before Numba is imported."""
    chosen = os.environ.get("NUMBA_CACHE_DIR")
    if chosen:
        return Path(chosen)
    import platformdirs

    folder = Path(platformdirs.user_cache_dir("lodestroke")) / "compiled" / sources_hash()
    try:
        folder.mkdir(parents=True, exist_ok=True)
        probe = folder / f".write-{os.getpid()}"
        probe.touch()       # also tells _sweep that this folder is in use
        probe.unlink()
        _sweep(folder)
    except OSError:
        folder = Path(tempfile.mkdtemp(prefix="lodestroke-compiled-"))
    os.environ["NUMBA_CACHE_DIR"] = str(folder)
    numba = sys.modules.get("numba")
    if numba is not None:   # somebody imported it before us: it has read its environment already
        numba.config.CACHE_DIR = str(folder)
    return folder


def _sweep(used: Path) -> None:
    """Take away what other versions left and nobody has used for a month."""
    now = time.time()
    for other in used.parent.iterdir():
        if other != used and other.is_dir() and now - other.stat().st_mtime > _KEEP_S:
            shutil.rmtree(other, ignore_errors=True)
