"""Do counts scatter as counts do? Fourth differences against Poisson's law, and last digits."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammainc, gammaincc
from scipy.stats import chi2

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

FILTER = np.array([1.0, -4.0, 6.0, -4.0, 1.0])
"""Fourth difference: blind to a smooth spectrum, all ears for scatter."""
_SQUARES = float(FILTER @ FILTER)
# Sum over all lags of the squared correlation of the differences of independent counts.
_CORRELATION = float(np.sum(np.correlate(FILTER, FILTER, "full") ** 2)) / _SQUARES**2
SMOOTHING = 7
SURROUNDINGS, FEATURE_REACH = 15, 7
FEATURE_SIGMA, FEATURE_SHARE = 6.0, 0.3
"""A feature stands out by so many standard deviations, and by this share of its surroundings."""
LEAST_MEAN = 2.0
"""Counts; where fewer are expected, scatter says little and its law is skew."""
LEAST_DIFFERENCES = 20
TOO_SMOOTH, TOO_ROUGH = 0.6, 1.7
"""Scatter over Poisson's beyond which a departure matters."""
LEAST_DIGIT_COUNT = 40
"""Counts from which the last digit of a Poisson number is even to better than 1 %."""
LEAST_DIGITS = 100


@dataclass(frozen=True, slots=True)
class Scatter:
    """Sums over fourth differences; they add up over scans.

    Attributes
    ----------
    differences : int
        Number of differences.
    low, high : float
        Sums of squares over the expected variance: with the smallest that counting allows
        (dead time makes counts more regular), and with the largest.
    variance : float
        Variance of the sum for sound data.
    """

    differences: int = 0
    low: float = 0.0
    high: float = 0.0
    variance: float = 0.0

    def __add__(self, other: Scatter) -> Scatter:
        return Scatter(
            self.differences + other.differences,
            self.low + other.low,
            self.high + other.high,
            self.variance + other.variance,
        )

    @property
    def ratio(self) -> float:
        """Scatter over Poisson's, unit 1."""
        return self.high / self.differences if self.differences else float("nan")

    def probabilities(self) -> tuple[float, float]:
        """Chances that sound data scatter so little, and so much.

        The sum is taken for gamma distributed with its mean and variance.
        """
        if self.differences < LEAST_DIFFERENCES:
            return 1.0, 1.0
        shape = self.differences**2 / self.variance
        rate = shape / self.differences
        return float(gammainc(shape, self.low * rate)), float(gammaincc(shape, self.high * rate))


def measure_scatter(
    counts: IntArray,
    dwell_s: FloatArray,
    dead_time_s: float,
    usable: NDArray[np.bool_],
    rounding: float = 0.0,
) -> Scatter:
    """Measure the scatter of one scan.

    Parameters
    ----------
    counts : ndarray of int, shape (n,)
        Recorded counts.
    dwell_s : ndarray, shape (n,)
        Counting times.
    dead_time_s : float
        Dead time, s: recorded counts of a non-paralysable counter have the variance
        N (1 - m tau)^2 (Knoll, Radiation Detection and Measurement, 4th ed. (2010), ch. 4; from
        memory).
    usable : ndarray of bool, shape (n,)
        False at lines and other steep features.
    rounding : float
        Half-width to which counts are known (restored from rounded rates).

    Returns
    -------
    Scatter
    """
    n = counts.size
    if n < SMOOTHING + FILTER.size:
        return Scatter()
    values = counts.astype(float)
    mean = np.convolve(values, np.full(SMOOTHING, 1.0 / SMOOTHING), mode="same")
    edge = SMOOTHING // 2
    inside = usable.copy()
    inside[:edge] = inside[n - edge :] = False
    inside &= np.concatenate([[True], dwell_s[1:] == dwell_s[:-1]])
    inside &= mean >= LEAST_MEAN
    whole = np.convolve(inside.astype(float), np.ones(FILTER.size), mode="valid") == FILTER.size
    if not np.any(whole):
        return Scatter()
    difference = np.convolve(values, FILTER, mode="valid")[whole]
    live = np.clip(1.0 - values / dwell_s * dead_time_s, 0.2, 1.0)
    squares = FILTER**2
    largest = np.convolve(mean + rounding**2 / 3.0, squares, mode="valid")[whole]
    smallest = np.convolve(mean * live**2, squares, mode="valid")[whole]
    middle = np.convolve(mean, squares / _SQUARES, mode="valid")[whole]
    return Scatter(
        int(difference.size),
        float(np.sum(difference**2 / smallest)),
        float(np.sum(difference**2 / largest)),
        float(2.0 * _CORRELATION * difference.size + np.sum(1.0 / middle)),
    )


def steep_features(counts: IntArray) -> NDArray[np.bool_]:
    """Mark peaks and steps: where a short mean leaves the median of its surroundings.

    Parameters
    ----------
    counts : ndarray of int, shape (n,)
        Recorded counts.

    Returns
    -------
    ndarray of bool, shape (n,)
        True at features and next to them.
    """
    if counts.size < SURROUNDINGS:
        return np.zeros(counts.size, dtype=bool)
    values = counts.astype(float)
    half = SURROUNDINGS // 2
    padded = np.pad(values, half, mode="reflect")
    median = np.median(np.lib.stride_tricks.sliding_window_view(padded, SURROUNDINGS), axis=1)
    short = np.convolve(values, np.full(3, 1.0 / 3.0), mode="same")
    short[0], short[-1] = values[0], values[-1]
    away = np.abs(short - median) > FEATURE_SIGMA * np.sqrt((median + 1.0) / 3.0)
    # Between a slope and its flat neighbourhood the median lags: only steep places are features.
    away &= np.abs(short - median) > FEATURE_SHARE * (median + 1.0)
    return np.convolve(away.astype(float), np.ones(FEATURE_REACH), mode="same") > 0.5


def last_digit_probability(counts: Sequence[IntArray]) -> tuple[float, float, int]:
    """Chance that last digits are as uneven as they are.

    Parameters
    ----------
    counts : sequence of ndarray of int
        Counts of all scans of a group; those above `LEAST_DIGIT_COUNT` are used.

    Returns
    -------
    statistic, probability : float
        Chi squared of ten equal classes, 9 degrees of freedom, and its probability.
    number : int
        Counts used; with too few the probability is 1.
    """
    large = np.concatenate([scan[scan >= LEAST_DIGIT_COUNT] for scan in counts])
    if large.size < LEAST_DIGITS:
        return 0.0, 1.0, int(large.size)
    found = np.bincount(large % 10, minlength=10)
    statistic = float(np.sum((found - large.size / 10.0) ** 2) / (large.size / 10.0))
    return statistic, float(chi2.sf(statistic, 9)), int(large.size)


def common_divisor(counts: IntArray) -> int:
    """Largest whole number that divides every count; 1 if there are too few to tell."""
    different = np.unique(counts[counts > 0])
    return int(np.gcd.reduce(different)) if different.size >= 8 else 1
