"""How many substeps a control tick needs: the fastest mode of the pump decides.

Classical Runge-Kutta of order four is stable while |rate x step| stays below 2.7 (real axis) or 2.8
(imaginary axis; Hairer and Wanner, Solving Ordinary Differential Equations II, 1996, IV.2). We stay
at one for the fastest mode, and never go above SUBSTEP_S, which resolves slug and valves well.
"""

from __future__ import annotations

import math

import numpy as np

from ..errors import RigError
from . import layout as k

SUBSTEP_S = 1e-4  # a slug on chamber and spring moves at some 20 to 60 Hz, a coil's L/R is 0.6 ms
SUBSTEPS_MAX = 5000  # a tick: beyond, a second of pump would take minutes
_HOT = 2.0  # a coil's resistance may double before anything else gives up


def mode_rates(p: np.ndarray) -> dict[str, float]:
    """Rate of each kind of mode, 1/s, by the part of the rig that sets it. p: shape (N_P,)."""
    soft = 1.0 / p[k.C_CH]
    spring = p[k.SPRING_N] * p[k.AMBIENT_P] / p[k.SPRING_V] if p[k.SPRING_V] > 0.0 else 0.0
    stiff = soft + 1.0 / p[k.C_OUT]
    rates = {
        "coils.resistance / coils.inductance": max(
            (_HOT * p[at] + p[k.R_SOURCE]) / p[at + 1] for at in (k.R20_A, k.R20_B)
        ),
        "slug.viscosity / slug.density": p[k.SLUG_DRAG] / p[k.SLUG_INERTANCE],
        "slug.hysteresis": p[k.STICK] / (k.STICK_FLOW * p[k.SLUG_INERTANCE]),
        "slug on chamber.compliance and spring.volume": math.sqrt(
            (soft + spring) / p[k.SLUG_INERTANCE]
        ),
        "outlet.compliance x outlet.restriction": 1.0 / (p[k.R_OUT] * p[k.C_OUT]),
    }
    for side, base in (("inlet", k.CRACK_IN), ("outlet", k.CRACK_OUT)):
        rates[f"valves.{side}.resistance / inertance"] = p[base + 2] / p[base + 3]
        rates[f"valves.{side}.inertance on compliance"] = math.sqrt(stiff / p[base + 3])
        rates[f"valves.{side}.leak on compliance"] = stiff / p[base + 4]
    return rates


def substeps(p: np.ndarray, source: str = "") -> int:
    """Equal substeps of one control tick. Raises RigError where the pump is too stiff to simulate."""
    cause, rate = max(mode_rates(p).items(), key=lambda item: item[1])
    needed = math.ceil(p[k.TICK_S] * max(rate, 1.0 / SUBSTEP_S) - 1e-9)
    if needed > SUBSTEPS_MAX:
        raise RigError(
            "this pump is too stiff to simulate",
            at=f"{source}, {cause}",
            got=f"a mode that changes within {1.0 / rate:.2g} s",
            bound=f"{p[k.TICK_S] / SUBSTEPS_MAX:.2g} s at a tick of {p[k.TICK_S]:.3g} s",
            try_="check the units of these values",
        )
    return max(1, needed)
