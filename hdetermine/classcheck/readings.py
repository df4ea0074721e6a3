"""Where common shortcuts would have read the limit, from the same counts.

Nobody states how exactly a line was laid through rising points by hand, so each shortcut comes
in several variants (how many points, which level is crossed).
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]

LEVEL_POINTS = 12
"""Points below the edge whose mean is the level from which the counts rise."""
LEAST_LEVEL_POINTS = 3
RISING_SIGMA = (2.5, 4.0)
"""How far above the level a point must lie to count as risen, in standard deviations."""
LINE_POINTS = (4, 6, 8)
"""Rising points through which a straight line is laid."""
SMOOTHING_POINTS = (1, 3, 5, 9)
"""Points over which a curve is smoothed, by eye, before its maximum is read."""
HUMP_REACH = 4.0
"""The maximum of the continuum is sought up to this multiple of the cutoff angle."""


def shortcut_readings(
    reading_deg: FloatArray,
    rate_per_s: FloatArray,
    dwell_s: FloatArray,
    edge_deg: float,
    fwhm_deg: float,
    lines_deg: Sequence[float],
) -> dict[str, float]:
    """Read the limit of one scan by each shortcut.

    Parameters
    ----------
    reading_deg, rate_per_s, dwell_s : ndarray, shape (n,)
        The scan: readings, recorded counts over counting time, counting time.
    edge_deg : float
        Reading of the cutoff by the edge fit: tells which points lie below the edge.
    fwhm_deg : float
        Resolution.
    lines_deg : sequence of float
        Readings at which characteristic lines stand.

    Returns
    -------
    dict of str to float
        Readings by ``shortcut/variant`` with shortcut ``crossing``, ``first_rise`` or
        ``maximum``; nan where one finds nothing.
    """
    found: dict[str, float] = {}
    below = np.flatnonzero(reading_deg < edge_deg - 0.75 * fwhm_deg)[-LEVEL_POINTS:]
    if below.size < LEAST_LEVEL_POINTS:
        level = spread = math.nan
    else:
        level = float(np.mean(rate_per_s[below]))
        # At least one count in a point's time, or an empty background would rise at once.
        spread = math.sqrt(max(level, 1.0 / dwell_s[below[-1]]) / float(dwell_s[below[-1]]))
    starts = []
    for index, sigma in enumerate(RISING_SIGMA):
        start = _first_risen(reading_deg, rate_per_s, level + sigma * spread, edge_deg, fwhm_deg)
        starts.append(start)
        found[f"first_rise/{2 * index}"] = _at(reading_deg, start)
        before = None if start is None else start - 1
        found[f"first_rise/{2 * index + 1}"] = _at(reading_deg, before)
    variant = 0
    for points in LINE_POINTS:
        for start in starts:
            for base in (0.0, level):
                found[f"crossing/{variant}"] = _crossing(
                    reading_deg, rate_per_s, start, points, base
                )
                variant += 1
    maxima = _maxima(reading_deg, rate_per_s, edge_deg, fwhm_deg, lines_deg)
    found.update({f"maximum/{i}": value for i, value in enumerate(maxima)})
    return found


def _at(reading_deg: FloatArray, index: int | None) -> float:
    return math.nan if index is None or index < 0 else float(reading_deg[index])


def _first_risen(
    reading_deg: FloatArray,
    rate_per_s: FloatArray,
    threshold: float,
    edge_deg: float,
    fwhm_deg: float,
) -> int | None:
    """First point above the threshold whose successor lies above it too."""
    if not math.isfinite(threshold):
        return None
    risen = rate_per_s > threshold
    near = (reading_deg > edge_deg - 2.5 * fwhm_deg) & (reading_deg < edge_deg + 3.0 * fwhm_deg)
    candidates = np.flatnonzero(risen[:-1] & risen[1:] & near[:-1])
    return int(candidates[0]) if candidates.size else None


def _crossing(
    reading_deg: FloatArray, rate_per_s: FloatArray, start: int | None, points: int, base: float
) -> float:
    """Reading at which a least-squares line through rising points crosses a level."""
    if start is None or start + points > reading_deg.size or not math.isfinite(base):
        return math.nan
    part = slice(start, start + points)
    middle = float(np.mean(reading_deg[part]))
    offset = reading_deg[part] - middle
    slope = float(np.dot(offset, rate_per_s[part]) / np.dot(offset, offset))
    if slope <= 0.0:
        return math.nan
    return middle - (float(np.mean(rate_per_s[part])) - base) / slope


def _maxima(
    reading_deg: FloatArray,
    rate_per_s: FloatArray,
    edge_deg: float,
    fwhm_deg: float,
    lines_deg: Sequence[float],
) -> list[float]:
    """Reading of the maximum: highest point of all, then of the continuum, more or less smooth."""
    above = np.flatnonzero(reading_deg > edge_deg)
    if above.size < 5:
        return [math.nan] * (1 + len(SMOOTHING_POINTS))
    found = [float(reading_deg[above[np.argmax(rate_per_s[above])]])]
    free = (reading_deg > edge_deg) & (reading_deg < HUMP_REACH * edge_deg)
    for line in lines_deg:
        free &= np.abs(reading_deg - line) > 1.5 * fwhm_deg
    for points in SMOOTHING_POINTS:
        smooth = np.convolve(rate_per_s, np.full(points, 1.0 / points), mode="same")
        places = free.copy()
        places[: points // 2 + 1] = places[places.size - points // 2 - 1 :] = False
        inside = np.flatnonzero(places)
        if inside.size < 5:
            found.append(math.nan)
            continue
        highest = inside[np.argmax(smooth[inside])]
        # Still rising at the end of the scan: no maximum to read.
        rising = highest in (inside[0], inside[-1])
        found.append(math.nan if rising else float(reading_deg[highest]))
    return found
