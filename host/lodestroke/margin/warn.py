"""What will disappoint, in words with numbers and what to do: one small judgement each.

A judgement gets the rig, what `price` worked out (so that no number is told twice in two ways), and the
strokes of a schedule where there is one. It yields a Warn for what is beyond its bound, nothing else.
"""

from __future__ import annotations

import importlib
from collections.abc import Callable, Iterator, Sequence
from dataclasses import asdict, dataclass
from typing import Any, NamedTuple

from ..rig.models import Rig
from ..units import show


@dataclass(frozen=True)
class Warn:
    """One disappointment: what, the value, its bound, and what helps."""

    name: str
    what: str
    got: str
    bound: str
    try_: str

    def as_json(self) -> dict[str, str]:
        """With the key `try`, as errors have it."""
        row = asdict(self)
        row["try"] = row.pop("try_")
        return row


class Stroke(NamedTuple):
    """A kind of stroke in a schedule."""

    rate_hz: float
    rise_s: float
    current_a: float


def brief(value: float, unit: str) -> str:
    """A value with its unit in three digits."""
    return show(float(f"{value:.3g}"), unit)


Judgement = Callable[[Rig, dict[str, Any], Sequence[Stroke]], Iterator[Warn]]
JUDGEMENTS: list[Judgement] = []


def judgement(function: Judgement) -> Judgement:
    """Register a judgement."""
    JUDGEMENTS.append(function)
    return function


def warnings(rig: Rig, facts: dict[str, Any], strokes: Sequence[Stroke] = ()) -> list[Warn]:
    """All that will disappoint, in the order of the work: pump, coil, sensors and limits."""
    for name in ("warn_pump", "warn_coil", "warn_limits"):      # they register themselves
        importlib.import_module(f"{__package__}.{name}")
    return [found for judge in JUDGEMENTS for found in judge(rig, facts, strokes)]
