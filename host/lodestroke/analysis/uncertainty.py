"""Small helpers after the GUM (JCGM 100:2008): type A, combination, straight lines."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np


def type_a(values: np.ndarray) -> tuple[float, float]:
    """Mean and its standard uncertainty s/sqrt(n) (JCGM 100, 4.2.3); u is nan for one value."""
    values = np.asarray(values, dtype=float)
    n = len(values)
    if n == 0:
        return math.nan, math.nan
    mean = float(values.mean())
    if n == 1:
        return mean, math.nan
    return mean, float(values.std(ddof=1)) / math.sqrt(n)


def combine(*parts: float) -> float:
    """Root sum of squares of uncorrelated standard uncertainties; nan parts are left out."""
    return math.sqrt(sum(part * part for part in parts if not math.isnan(part)))


@dataclass(frozen=True)
class Line:
    """y = intercept + slope x, with standard uncertainties and the residual standard deviation."""

    intercept: float
    slope: float
    u_intercept: float
    u_slope: float
    residual_sd: float


def line(x: np.ndarray, y: np.ndarray) -> Line:
    """Ordinary least squares through at least two different x.

    Raises ValueError for fewer. Source: JCGM 100:2008, annex H.3.
    """
    x = np.asarray(x, dtype=float)
    y = np.asarray(y, dtype=float)
    n = len(x)
    if n < 2 or float(np.ptp(x)) == 0.0:
        raise ValueError("a line needs at least two different x")
    middle = x.mean()
    dx = x - middle
    sxx = float(dx @ dx)
    slope = float(dx @ (y - y.mean())) / sxx
    intercept = float(y.mean() - slope * middle)
    residual = y - intercept - slope * x
    sd = math.sqrt(float(residual @ residual) / (n - 2)) if n > 2 else math.nan
    return Line(
        intercept, slope, sd * math.sqrt(1.0 / n + middle * middle / sxx), sd / math.sqrt(sxx), sd
    )
