"""The Poisson likelihood as a deviance."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import xlogy

FloatArray = NDArray[np.float64]


def deviance_terms(counts: FloatArray, expected: FloatArray) -> FloatArray:
    """Each point's share of the Poisson deviance, 2 [m - d + d ln(d/m)].

    Parameters
    ----------
    counts, expected : ndarray, shape (n,)
        Observed counts d and expected counts m > 0.

    References
    ----------
    W. Cash, Astrophys. J. 228, 939 (1979); S. Baker and R. D. Cousins, Nucl. Instrum. Methods
    221, 437 (1984).
    """
    counts = np.asarray(counts, dtype=float)
    expected = np.asarray(expected, dtype=float)
    return np.asarray(2.0 * (expected - counts + xlogy(counts, counts) - xlogy(counts, expected)))


def poisson_deviance(counts: FloatArray, expected: FloatArray) -> float:
    """Sum of `deviance_terms`."""
    return float(np.sum(deviance_terms(counts, expected)))
