"""What a control tick costs: in loop iterations (L) on the real interpreter, and the twin's speed.

    python tests/speed/tick.py [--json]

L is one iteration of `for i in range(n): s += i & 7` in the same process, the heap locked as it is
on a bench. `core_l` is the tick less the test Hal's own methods; `whole_l` a whole period with link
and telemetry (a sample each ten ticks). The same in instructions where valgrind is there: those do
not flicker. Kept and printed, never asserted as time.
"""

from __future__ import annotations

import json
import os
import re
import shutil
import subprocess
import sys
import time
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
sys.path.insert(0, str(ROOT / "tests" / "mpy"))

from interpreter import FIRMWARE, HERE, interpreter, run_script  # noqa: E402

from lodestroke.rig import load_rig  # noqa: E402
from lodestroke.runner import dry_run  # noqa: E402
from lodestroke.schedule import load_schedule  # noqa: E402

_TURNS = 640                 # ten beats of the host


def twin_times_real_time() -> float:
    """Simulated seconds per second of a dry-run of the gentle schedule, the second of two."""
    rig = load_rig(ROOT / "hil_configs" / "bench-sim.toml")
    schedule = load_schedule(ROOT / "hil_configs" / "schedules" / "gentle.toml")
    dry_run(rig, schedule)
    start = time.perf_counter()
    result = dry_run(rig, schedule).result
    return float(result["duration_s"]) / (time.perf_counter() - start)


def _collected(subject: str, turns: int) -> int:
    """Instructions of a whole process that runs a subject so often."""
    done = subprocess.run(
        ["valgrind", "--tool=callgrind", "--callgrind-out-file=/dev/null", sys.executable,
         interpreter(), "-X", "heapsize=1M", str(HERE / "tick_count.py"), str(FIRMWARE), subject,
         str(turns)],
        capture_output=True, text=True, timeout=300, check=True,
        env={**os.environ, "PYTHONHASHSEED": "0"})
    found = re.search(r"Collected : (\d+)", done.stderr)
    assert found, done.stderr
    return int(found[1])


def instructions() -> dict[str, float]:
    """Core and whole tick in L, by counting instructions; empty where valgrind is not installed."""
    if shutil.which("valgrind") is None:
        return {}
    per = {name: (_collected(name, 2 * _TURNS) - _collected(name, _TURNS)) / _TURNS
           for name in ("unit", "core", "whole", "bare")}
    return {"core_instructions_l": round((per["core"] - per["bare"]) / per["unit"], 1),
            "whole_instructions_l": round(per["whole"] / per["unit"], 1)}


def main() -> None:
    """Measure and print."""
    unit, core, whole, worst, hal = (int(word) for word in run_script("tick_cost.py", heap="1M").split())
    figures = {
        "l_ns": unit, "core_l": round((core - hal) / unit, 1), "core_with_hal_l": round(core / unit, 1),
        "whole_l": round(whole / unit, 1), "whole_worst_l": round(worst / unit, 1),
        **instructions(),
        "twin_times_real_time": round(twin_times_real_time(), 1),
    }
    if "--json" in sys.argv[1:]:
        print(json.dumps(figures))
        return
    for name, value in figures.items():
        print(f"{name:<24}{value}")
    if "core_instructions_l" not in figures:
        print("instructions not counted: valgrind is not installed")


if __name__ == "__main__":
    main()
