"""Effective degrees of freedom and coverage factor."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri, stdtrit

from hdetermine.budget.correlation import correlated_groups

FloatArray = NDArray[np.float64]


def effective_degrees_of_freedom(
    contributions: FloatArray, degrees_of_freedom: FloatArray, correlation: FloatArray | None = None
) -> float:
    """Welch-Satterthwaite formula, with unrounded sums.

    The formula is for independent components. Correlated inputs are therefore taken together
    as one component: its variance is that of the group, correlations included, and its degrees
    of freedom are the smallest among those members that contribute. That is exact where the
    members come from the same repeated observations (JCGM 100:2008, H.2), and on the safe side
    elsewhere.

    Parameters
    ----------
    contributions : ndarray, shape (m,)
        Sensitivity times standard uncertainty, signed.
    degrees_of_freedom : ndarray, shape (m,)
        May be infinite.
    correlation : ndarray, shape (m, m), or None
        Valid correlation matrix.

    Returns
    -------
    float
        Infinite if only components of infinite freedom contribute.

    References
    ----------
    JCGM 100:2008, eq. (G.2b).
    """
    matrix = np.eye(len(contributions)) if correlation is None else correlation
    variance = float(contributions @ matrix @ contributions)
    if variance <= 0.0:
        return math.inf
    denominator = 0.0
    for group in correlated_groups(matrix):
        own = contributions[group]
        share = max(float(own @ matrix[np.ix_(group, group)] @ own), 0.0) / variance
        freedoms = degrees_of_freedom[group][own != 0.0]
        if freedoms.size:
            denominator += share**2 / float(np.min(freedoms))
    return 1.0 / denominator if denominator > 0.0 else math.inf


def coverage_factor(probability: float, degrees_of_freedom: float = math.inf) -> float:
    """Two-sided quantile of Student's t.

    The degrees of freedom are rounded to one decimal, as they are printed, and then truncated
    to the next lower integer (JCGM 100:2008, G.4.1 and H.1.6); below one they count as one.

    Parameters
    ----------
    probability : float
        Coverage probability p, between 0 and 1.
    degrees_of_freedom : float
        Effective degrees of freedom.

    Returns
    -------
    float
        t_p(nu), as in JCGM 100:2008, table G.2.
    """
    if not 0.0 < probability < 1.0:
        raise ValueError("a coverage probability lies between 0 and 1")
    upper = 0.5 * (1.0 + probability)
    if math.isinf(degrees_of_freedom):
        return float(ndtri(upper))
    whole = max(1, math.floor(round(degrees_of_freedom, 1)))
    return float(stdtrit(whole, upper))
