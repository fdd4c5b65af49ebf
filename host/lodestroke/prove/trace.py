"""What an invariant looks at: everything that one run left, and the truth behind it."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np

from ..rig import limits_values

if TYPE_CHECKING:
    from ..rig import Rig
    from .faults import Case, Faulty

# Row t: the drive that tick t decided, the inputs that it saw, and what the plant made of it by
# tick t + 1: the larger true coil current (A) and the least true margin since the start (Pa).
WIRES = np.dtype(
    [
        ("tick", "<i8"),
        ("duty_a_q15", "<i4"),
        ("enable", "u1"),
        ("inputs", "u1"),
        ("current_a", "<f8"),
        ("min_margin_pa", "<f8"),
    ]
)


@dataclass(frozen=True)
class Trace:
    """One run. `limits` as sent to the board (lodeboard.limits.FIELDS); truth in SI."""

    case: Case
    limits: dict[str, int]
    decay_ticks: int  # within which a coil's current is gone once enable is off
    samples: np.ndarray  # rows of lodestroke.rows.SAMPLE; holes only where the link was cut
    wires: np.ndarray  # rows of WIRES
    truth: dict[str, float]
    cycles: list[dict[str, int]] = field(default_factory=list)
    gaps: list[tuple[int, int]] = field(default_factory=list)
    trips: list[dict[str, Any]] = field(default_factory=list)
    ends: list[dict[str, int]] = field(default_factory=list)


def decay_ticks(rig: Rig) -> int:
    """Ten times the longest L/R of the rig's coils, and two ticks: e^-10 of 3 A is 0.1 mA.

    A free-wheeling diode only makes it faster. Source: first-order decay of an R-L circuit.
    """
    slowest_s = max(coil.inductance / coil.resistance for coil in rig.coils)
    return int(10.0 * slowest_s / rig.board.tick) + 2


def trace_of(rig: Rig, dry: Any, faulty: Faulty) -> Trace:
    """The trace of a dry-run (its samples, cycles, gaps, ends, result) that ran with these faults."""
    return Trace(
        faulty.case,
        limits_values(rig),
        decay_ticks(rig),
        dry.samples,
        faulty.wires(),
        faulty.plant.truth(),
        dry.cycles,
        dry.gaps,
        dry.result["trips"],
        dry.ends,
    )
