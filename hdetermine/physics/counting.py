"""Counting: dead time and exact Poisson intervals."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammaincinv

from hdetermine.records.apparatus import DeadTimeModel

FloatArray = NDArray[np.float64]


def recorded_rate(
    true_rate_per_s: FloatArray | float, dead_time_s: float, model: DeadTimeModel
) -> FloatArray:
    """Rate that a counter with dead time records.

    Parameters
    ----------
    true_rate_per_s : array_like
        Rate of arrivals, 1/s.
    dead_time_s : float
        Dead time, s.
    model : {"nonparalysable", "paralysable"}
        n/(1 + n tau), or n exp(-n tau).

    Returns
    -------
    ndarray
        Recorded rate, 1/s.

    References
    ----------
    Knoll, Radiation Detection and Measurement, 4th ed. (2010), ch. 4, sect. VII.
    """
    rate = np.asarray(true_rate_per_s, dtype=float)
    if model == "paralysable":
        return rate * np.exp(-rate * dead_time_s)
    return rate / (1.0 + rate * dead_time_s)


def recorded_slope(
    true_rate_per_s: FloatArray, dead_time_s: float, model: DeadTimeModel
) -> FloatArray:
    """Derivative of the recorded with respect to the true rate, unit 1."""
    if model == "paralysable":
        return (1.0 - true_rate_per_s * dead_time_s) * np.exp(-true_rate_per_s * dead_time_s)
    return np.asarray((1.0 + true_rate_per_s * dead_time_s) ** -2)


def garwood_interval(
    counts: NDArray[np.int64] | int, probability: float = 0.682689492137
) -> tuple[FloatArray, FloatArray]:
    """Exact central interval of a Poisson mean.

    Parameters
    ----------
    counts : array_like of int
        Observed counts.
    probability : float
        Coverage; the default is that of one standard deviation of a normal distribution.

    Returns
    -------
    lower, upper : ndarray
        Bounds of the mean.

    References
    ----------
    F. Garwood, Biometrika 28, 437 (1936).
    """
    n = np.asarray(counts, dtype=float)
    tail = 0.5 * (1.0 - probability)
    lower = np.where(n > 0, gammaincinv(np.maximum(n, 1.0), tail), 0.0)
    upper = gammaincinv(n + 1.0, 1.0 - tail)
    return np.asarray(lower, dtype=float), np.asarray(upper, dtype=float)
