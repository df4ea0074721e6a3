"""Coverage intervals from sorted draws, and the numerical tolerance of an uncertainty."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]


def numerical_tolerance(standard_uncertainty: float, digits: int = 2) -> float:
    """Half a unit in the last of the significant digits of a standard uncertainty.

    With u = c 10^l, c an integer of that many digits, delta is 10^l/2.

    References
    ----------
    JCGM 101:2008, 7.9.2.
    """
    if not standard_uncertainty > 0.0:
        return 0.0
    exponent = math.floor(math.log10(standard_uncertainty)) - digits + 1
    if round(standard_uncertainty / 10.0**exponent) >= 10**digits:
        exponent += 1
    return 0.5 * 10.0**exponent


def symmetric_interval(sorted_values: FloatArray, probability: float) -> tuple[float, float]:
    """Probabilistically symmetric coverage interval (JCGM 101:2008, 7.7.2)."""
    size = len(sorted_values)
    covered = _covered(size, probability)
    low = (size - covered + 1) // 2
    return float(sorted_values[low - 1]), float(sorted_values[min(low + covered, size) - 1])


def shortest_interval(sorted_values: FloatArray, probability: float) -> tuple[float, float]:
    """Shortest coverage interval (JCGM 101:2008, 7.7.4)."""
    covered = _covered(len(sorted_values), probability)
    widths = sorted_values[covered:] - sorted_values[:-covered]
    low = int(np.argmin(widths))
    return float(sorted_values[low]), float(sorted_values[low + covered])


def _covered(size: int, probability: float) -> int:
    return min(max(int(probability * size + 0.5), 1), size - 1)
