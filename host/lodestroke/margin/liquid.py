"""The pumped liquid's numbers: what the rig states, else water's at its temperature.

Sources: viscosity IAPWS SR6-08 (0.1 MPa); density Kell, J. Chem. Eng. Data 20 (1975) 97, coefficients
from memory; surface tension IAPWS R1-76(2014).
"""

from __future__ import annotations

import math
from typing import NamedTuple

from ..rig.models import Rig

_A = (280.68, 511.45, 61.131, 0.45903)
_B = (-1.9, -7.7, -19.6, -40.0)


class Liquid(NamedTuple):
    """Density kg/m3, viscosity Pa s, surface tension N/m."""

    density: float
    viscosity: float
    tension: float


def pumped(rig: Rig) -> Liquid:
    """What the pump moves."""
    fluid = rig.fluid
    return Liquid(
        fluid.density or water_density(fluid.temperature),
        fluid.viscosity or water_viscosity(fluid.temperature),
        water_tension(fluid.temperature))


def water_viscosity(degc: float) -> float:
    """Pa s at 0.1 MPa, 0 to 100 degC."""
    warm = (degc + 273.15) / 300.0
    return 1e-6 * sum(a * math.pow(warm, b) for a, b in zip(_A, _B, strict=True))


def water_density(degc: float) -> float:
    """kg/m3 at 101.325 kPa, 0 to 100 degC."""
    top = (999.83952, 16.945176, -7.9870401e-3, -46.170461e-6, 105.56302e-9, -280.54253e-12)
    return sum(a * degc**n for n, a in enumerate(top)) / (1.0 + 16.897850e-3 * degc)


def water_tension(degc: float) -> float:
    """N/m against its vapour."""
    tau = 1.0 - (degc + 273.15) / 647.096
    return 0.2358 * math.pow(tau, 1.256) * (1.0 - 0.625 * tau)
