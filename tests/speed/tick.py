"""What a control tick costs: in loop iterations (L) on the real interpreter, and the twin's speed.

    python tests/speed/tick.py [--json]

L is one iteration of `for i in range(n): s += i & 7` in the same process. `core_l` is the tick less
the test Hal's own methods; `whole_l` a whole period with link and telemetry (a sample each ten ticks).
Kept and printed, never asserted as time.
"""

from __future__ import annotations

import json
import sys
import time
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
sys.path.insert(0, str(ROOT / "tests" / "mpy"))

from interpreter import run_script  # noqa: E402

from lodestroke.rig import load_rig  # noqa: E402
from lodestroke.runner import dry_run  # noqa: E402
from lodestroke.schedule import load_schedule  # noqa: E402


def twin_times_real_time() -> float:
    """Simulated seconds per second of a dry-run of the gentle schedule, the second of two."""
    rig = load_rig(ROOT / "hil_configs" / "bench-sim.toml")
    schedule = load_schedule(ROOT / "hil_configs" / "schedules" / "gentle.toml")
    dry_run(rig, schedule)
    start = time.perf_counter()
    result = dry_run(rig, schedule).result
    return float(result["duration_s"]) / (time.perf_counter() - start)


def main() -> None:
    """Measure and print."""
    unit, core, whole, worst, hal = (int(word) for word in run_script("tick_cost.py", heap="1M").split())
    figures = {
        "l_ns": unit, "core_l": round((core - hal) / unit, 1), "core_with_hal_l": round(core / unit, 1),
        "whole_l": round(whole / unit, 1), "whole_worst_l": round(worst / unit, 1),
        "twin_times_real_time": round(twin_times_real_time(), 1),
    }
    if "--json" in sys.argv[1:]:
        print(json.dumps(figures))
        return
    for name, value in figures.items():
        print(f"{name:<24}{value}")


if __name__ == "__main__":
    main()
