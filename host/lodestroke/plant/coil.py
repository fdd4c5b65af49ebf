"""The coil: field on its axis, resistance with temperature, two-node heat.

Sources: thick solenoid on-axis field, integral of the Biot-Savart loop over a uniform winding
(e.g. Montgomery, Solenoid Magnet Design, 1969); copper resistance IEC 60028; lumped thermal network.
"""

from __future__ import annotations

import math

import numpy as np
from numba import njit

ZERO_C_ALPHA = 20.0  # temperature that the coefficient refers to, degC


_FAR = 15.0              # beyond so many sizes the closed form loses digits to cancellation
_NODES = (-0.8611363115940526, -0.33998104358485626, 0.33998104358485626, 0.8611363115940526)
_WEIGHTS = (0.3478548451374538, 0.6521451548625461, 0.6521451548625461, 0.3478548451374538)


@njit(cache=True)
def _far_field(
    z_m: float, turns: float, length_m: float, inner_m: float, outer_m: float
) -> float:
    """The same by Gauss-Legendre quadrature over loops a^2/(2 (a^2 + z^2)^1.5) of the winding."""
    total = 0.0
    for n in range(4):
        a = 0.5 * (inner_m + outer_m) + 0.5 * (outer_m - inner_m) * _NODES[n]
        for j in range(4):
            z = z_m + 0.5 * length_m * _NODES[j]
            total += _WEIGHTS[n] * _WEIGHTS[j] * a * a / (2.0 * (a * a + z * z) ** 1.5)
    return turns * total / 4.0


@njit(cache=True)
def field_per_ampere(
    z_m: float, turns: float, length_m: float, inner_m: float, outer_m: float
) -> float:
    """H on the axis of a thick solenoid carrying 1 A, z_m from its middle, in A/m per A.

    Uniform current density over the window; scalars only, SI.
    """
    if abs(z_m) > _FAR * (length_m + outer_m):
        return _far_field(z_m, turns, length_m, inner_m, outer_m)
    near = z_m - length_m / 2.0
    far = z_m + length_m / 2.0
    total = 0.0
    for z, sign in ((far, 1.0), (near, -1.0)):
        top = outer_m + math.sqrt(outer_m * outer_m + z * z)
        low = inner_m + math.sqrt(inner_m * inner_m + z * z)
        total += sign * z * math.log(top / low)
    return turns / (2.0 * length_m * (outer_m - inner_m)) * total


@njit(cache=True)
def field_table(
    z_from_m: float,
    z_step_m: float,
    n: int,
    turns: float,
    length_m: float,
    inner_m: float,
    outer_m: float,
) -> np.ndarray:
    """field_per_ampere at n places from z_from_m on, shape (n,)."""
    table = np.empty(n)
    for k in range(n):
        table[k] = field_per_ampere(z_from_m + k * z_step_m, turns, length_m, inner_m, outer_m)
    return table


@njit(cache=True)
def interpolate(table: np.ndarray, start: float, step: float, x: float) -> float:
    """Four-point cubic (Lagrange) interpolation in an even table; the ends continue flat."""
    u = (x - start) / step
    k = int(math.floor(u))  # noqa: RUF046 - compiled code returns a float here
    if k < 1:
        return table[0] if u < 0.0 else table[k] + (u - k) * (table[k + 1] - table[k])
    if k > table.shape[0] - 3:
        return table[table.shape[0] - 1]
    f = u - k
    a = table[k - 1]
    b = table[k]
    c = table[k + 1]
    d = table[k + 2]
    return b + f * (
        (c - a / 3.0 - b / 2.0 - d / 6.0)
        + f * (0.5 * (a + c) - b + f * ((d - a) / 6.0 + 0.5 * (b - c)))
    )


@njit(cache=True)
def resistance(r20_ohm: float, alpha_per_k: float, winding_c: float) -> float:
    """Winding resistance in ohm at winding_c. Source: IEC 60028, linear about 20 degC."""
    return r20_ohm * (1.0 + alpha_per_k * (winding_c - ZERO_C_ALPHA))


def steady_winding_c(
    power_w: float, ambient_c: float, winding_to_body: float, body_to_air: float
) -> float:
    """Winding temperature at constant power, degC. Source: series thermal resistances."""
    return ambient_c + power_w * (winding_to_body + body_to_air)
