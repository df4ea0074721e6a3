"""The yardstick: the method that people use today, for every figure to stand beside.

Per scan: the mean of the points below the edge, a straight line through the first five rising
points, the crossing of the two. Then ordinary least squares of the wavelengths on 1/U, the
slope's standard error quoted as the uncertainty (common practice, no source).

It is given what the bench often lacks: the true zero of the goniometer and the crystal's stated
spacing.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy.stats import t as student

RISING_POINTS = 5
BACKGROUND_POINTS = 10
START_POINTS = 4

# e/c in the units of a slope in pm kV; h = (e/c) lambda U.
ELEMENTARY_CHARGE_C = 1.602176634e-19
SPEED_OF_LIGHT_M_PER_S = 299792458.0
PLANCK_PER_SLOPE = ELEMENTARY_CHARGE_C / SPEED_OF_LIGHT_M_PER_S * 1e-9


@dataclass(frozen=True)
class Reading:
    """h by the yardstick: value, quoted standard error and 95 % interval, J s."""

    value_J_s: float
    standard_error_J_s: float
    interval_95_J_s: tuple[float, float]


def onset(counts: np.ndarray) -> int | None:
    """Index of the first rising point: three in a row well above the mean of those before."""
    for index in range(START_POINTS, counts.size - RISING_POINTS):
        before = counts[max(0, index - BACKGROUND_POINTS) : index]
        mean = float(before.mean())
        limit = mean + 4.0 * math.sqrt(max(mean, 1.0))
        following = counts[index : index + 3]
        if (following > limit).all() and following[2] > following[0]:
            return index
    return None


def cutoff_reading(reading_deg: np.ndarray, counts: np.ndarray) -> float:
    """Crossing of the line through five rising points with the background; nan if none."""
    counts = np.asarray(counts, dtype=float)
    first = onset(counts)
    if first is None:
        return math.nan
    background = float(counts[max(0, first - BACKGROUND_POINTS) : first].mean())
    rising = slice(first, first + RISING_POINTS)
    slope, level = np.polyfit(reading_deg[rising], counts[rising], 1)
    return float((background - level) / slope) if slope > 0 else math.nan


def planck_value(wavelength_pm: np.ndarray, voltage_kV: np.ndarray) -> Reading | None:
    """Ordinary least squares of wavelength on inverse voltage; None with fewer than three."""
    usable = np.isfinite(wavelength_pm)
    x, y = 1.0 / voltage_kV[usable], wavelength_pm[usable]
    if x.size < 3 or np.ptp(x) == 0.0:
        return None
    centred = x - x.mean()
    slope = float(centred @ y / (centred @ centred))
    residual = y - y.mean() - slope * centred
    error = math.sqrt(float(residual @ residual) / (x.size - 2) / float(centred @ centred))
    value, half = slope * PLANCK_PER_SLOPE, error * PLANCK_PER_SLOPE
    reach = float(student.ppf(0.975, x.size - 2)) * half
    return Reading(value, half, (value - reach, value + reach))


def through_origin(wavelength_pm: np.ndarray, voltage_kV: np.ndarray) -> float:
    """h from the line through the origin, J s: kinder to the method than the free line."""
    usable = np.isfinite(wavelength_pm)
    x, y = 1.0 / voltage_kV[usable], wavelength_pm[usable]
    return float(x @ y / (x @ x)) * PLANCK_PER_SLOPE if x.size else math.nan
