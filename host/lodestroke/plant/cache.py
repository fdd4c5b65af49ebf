"""Where compiled code is kept: the user's cache folder, so that an installed wheel may be read-only."""

from __future__ import annotations

import os
import tempfile
from pathlib import Path


def settle() -> Path:
    """Point Numba at a folder that can be written, before Numba is imported."""
    chosen = os.environ.get("NUMBA_CACHE_DIR")
    if chosen:
        return Path(chosen)
    import platformdirs

    folder = Path(platformdirs.user_cache_dir("lodestroke")) / "compiled"
    try:
        folder.mkdir(parents=True, exist_ok=True)
        probe = folder / f".write-{os.getpid()}"
        probe.touch()
        probe.unlink()
    except OSError:
        folder = Path(tempfile.mkdtemp(prefix="lodestroke-compiled-"))
    os.environ["NUMBA_CACHE_DIR"] = str(folder)
    return folder
