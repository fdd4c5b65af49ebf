"""The simulated pump: elements from published methods, one right-hand side, a fixed-step integrator."""

from . import cache as _cache

_cache.settle()

from .build import Params, params_from_rig  # noqa: E402
from .events import events, settle  # noqa: E402
from .pump import Plant, warm_up  # noqa: E402
from .system import advance, rhs  # noqa: E402

__all__ = [
    "Params", "Plant", "advance", "events", "params_from_rig", "rhs", "settle", "warm_up",
]
