"""Outside values for several elements at work together, and a rig whose arrays tests may change."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np

from lodestroke.plant import Params, params_from_rig
from lodestroke.rig import load_rig

CMH2O = 98.0665  # Pa, conventional
RIG = load_rig(Path(__file__).resolve().parents[2] / "hil_configs" / "bench-sim.toml")
_ALL = {v["id"]: v for v in json.loads(
    Path(__file__).with_name("system_values.json").read_text(encoding="utf-8"))}


def value(name: str) -> tuple[dict[str, Any], Any, str]:
    """(inputs, expected, source) of one value."""
    found = _ALL[name]
    return found["inputs"], found["expected"], found["source"]


def bench(**places: float) -> Params:
    """The shipped bench with some of its parameters set anew, by name as in plant.layout."""
    from lodestroke.plant import layout

    params = params_from_rig(RIG)
    for name, number in places.items():
        params.p[getattr(layout, name)] = number
    return Params(params.p, params.table_a, params.table_b, np.zeros_like(params.sensors))
