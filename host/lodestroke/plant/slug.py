"""The slug of magnetic liquid: magnetisation, and the pressure that a field puts across it.

Sources: Langevin paramagnetism; ferrohydrodynamic Bernoulli equation, magnetic pressure
p_m = mu0 * integral of M dH (Rosensweig, Ferrohydrodynamics, 1985, ch. 5). The shape of the curve
is fixed by saturation magnetisation and initial susceptibility: M = Ms L(3 chi H / Ms).

Left out by choice: the liquid's own field (demagnetisation) and the normal traction mu0 Mn^2/2 at
each face. `normal_traction` and `demagnetisation_factor` give their size; `check` prints them.
"""

from __future__ import annotations

import math

from numba import njit

MU0 = 1.25663706127e-6  # N/A2, CODATA 2022


@njit(cache=True)
def langevin(x: float) -> float:
    """L(x) = coth x - 1/x, accurate for tiny and huge x."""
    if abs(x) < 1e-2:
        return x / 3.0 - x**3 / 45.0 + 2.0 * x**5 / 945.0
    if abs(x) > 350.0:
        return math.copysign(1.0, x) - 1.0 / x
    return 1.0 / math.tanh(x) - 1.0 / x


@njit(cache=True)
def log_sinhc(x: float) -> float:
    """ln(sinh x / x), the integral of L from 0 to x; even, stable for tiny and huge x."""
    x = abs(x)
    if x < 1e-2:
        return x * x / 6.0 - x**4 / 180.0
    return x + math.log1p(-math.exp(-2.0 * x)) - math.log(2.0 * x)


@njit(cache=True)
def magnetisation(h_a_per_m: float, ms: float, chi: float) -> float:
    """M in A/m at field h, for saturation ms (A/m) and initial susceptibility chi."""
    return ms * langevin(3.0 * chi * h_a_per_m / ms)


@njit(cache=True)
def magnetic_pressure(h_a_per_m: float, ms: float, chi: float) -> float:
    """p_m = mu0 * integral from 0 to h of M dH, in Pa; even in h, never negative."""
    return MU0 * ms * ms / (3.0 * chi) * log_sinhc(3.0 * chi * h_a_per_m / ms)


@njit(cache=True)
def normal_traction(h_a_per_m: float, ms: float, chi: float) -> float:
    """mu0 Mn^2 / 2 at a face across the field, in Pa (Rosensweig 1985)."""
    return 0.5 * MU0 * magnetisation(h_a_per_m, ms, chi) ** 2


def demagnetisation_factor(length_m: float, radius_m: float) -> float:
    """Axial factor of the prolate (or oblate) ellipsoid of the slug's length and diameter.

    Source: Osborn, Phys. Rev. 67 (1945) 351.
    """
    a = length_m / (2.0 * radius_m)
    if abs(a - 1.0) < 1e-6:
        return 1.0 / 3.0
    if a > 1.0:
        e = math.sqrt(1.0 - 1.0 / (a * a))
        return (1.0 - e * e) / e**3 * (math.atanh(e) - e)
    e = math.sqrt(1.0 / (a * a) - 1.0)
    return (1.0 + e * e) / e**3 * (e - math.atan(e))


def drag_circle(viscosity_pa_s: float, length_m: float, radius_m: float) -> float:
    """Resistance of a liquid column to laminar flow, Pa s/m3. Source: Hagen-Poiseuille law."""
    return 8.0 * viscosity_pa_s * length_m / (math.pi * radius_m**4)


def drag_rectangle(
    viscosity_pa_s: float, length_m: float, width_m: float, height_m: float
) -> float:
    """The same for a rectangle, first 40 terms of the exact series, Pa s/m3.

    Source: Bruus, Theoretical Microfluidics, 2008, eq. 3.56.
    """
    w, h = max(width_m, height_m), min(width_m, height_m)
    series = sum(math.tanh(n * math.pi * w / (2 * h)) / n**5 for n in range(1, 81, 2))
    return (
        12.0
        * viscosity_pa_s
        * length_m
        / (w * h**3 * (1.0 - 192.0 * h / (math.pi**5 * w) * series))
    )


@njit(cache=True)
def air_spring(
    x_m: float, area_m2: float, volume_m3: float, ambient_pa: float, exponent: float
) -> float:
    """Gauge pressure of the gas behind the slug once it has moved x_m away, Pa.

    exponent 1: isothermal, 1.4: adiabatic. volume 0: no spring. Source: polytropic gas law.
    """
    if volume_m3 <= 0.0:
        return 0.0
    grown = 1.0 + x_m * area_m2 / volume_m3
    grown = max(grown, 0.05)
    return ambient_pa * (grown ** (-exponent) - 1.0)
