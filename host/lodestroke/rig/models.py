"""The whole rig. Attributes are the TOML keys; quantities are SI floats, temperatures in degC."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path
from typing import Annotated

from pydantic import Field

from .models_board import Board, Driver, Text
from .models_limits import Limits
from .models_pump import (
    Ambient,
    Chamber,
    Channel,
    Coils,
    Drift,
    Fluid,
    Inlet,
    Outlet,
    Slug,
    Spring,
    Tolerances,
    Valves,
)
from .models_sensors import Sensors
from .toml_file import Table


class Rig(Table):
    """What is wired on one bench."""

    title: Text = ""
    board: Board
    driver: Driver
    coils: Coils
    slug: Slug
    channel: Channel
    spring: Spring = Spring(kind="none")
    chamber: Chamber
    inlet: Inlet = Inlet()
    outlet: Outlet
    fluid: Fluid = Fluid()
    ambient: Ambient = Ambient()
    valves: Valves
    sensors: Sensors
    limits: Limits
    tolerances: Tolerances = Tolerances()
    drift: Drift = Drift()
    source: Annotated[Path, Field(exclude=True)] = Path()

    def canonical_json(self) -> str:
        """The model as JSON with sorted keys and no spaces; the file's place is no part of it."""
        return json.dumps(self.model_dump(mode="json"), sort_keys=True, separators=(",", ":"))

    @property
    def fingerprint(self) -> bytes:
        """First 8 bytes of the SHA-256 of the canonical JSON: ties a board's limits to this rig."""
        return hashlib.sha256(self.canonical_json().encode()).digest()[:8]

    @property
    def tick_us(self) -> int:
        """The control period in whole microseconds."""
        return round(self.board.tick * 1e6)
