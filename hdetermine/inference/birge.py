"""Do several values of one quantity agree within their stated uncertainties?"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from hdetermine.errors import InputError


@dataclass(frozen=True, slots=True)
class WeightedMean:
    """Mean of values weighted by their inverse variances, and how well they agree.

    `standard_uncertainty` takes the stated uncertainties at their word; times `birge_ratio` it
    lets the scatter speak instead.
    """

    value: float
    standard_uncertainty: float
    chi2: float
    degrees_of_freedom: int

    @property
    def birge_ratio(self) -> float:
        """Root of chi2 per degree of freedom; nan for a single value."""
        if self.degrees_of_freedom == 0:
            return math.nan
        return math.sqrt(self.chi2 / self.degrees_of_freedom)


def weighted_mean(values: ArrayLike, uncertainties: ArrayLike) -> WeightedMean:
    """Weighted mean of independent values of one quantity.

    Parameters
    ----------
    values, uncertainties : array_like, shape (n,)
        Values and their standard uncertainties, all positive.

    Raises
    ------
    InputError
        If there is no value, or an uncertainty is not positive.
    """
    value = np.array(values, dtype=float)
    u = np.array(uncertainties, dtype=float)
    if value.ndim != 1 or value.shape != u.shape or value.size == 0:
        raise InputError("A weighted mean needs as many uncertainties as values, at least one.")
    if not (np.all(np.isfinite(value)) and np.all(np.isfinite(u)) and np.all(u > 0)):
        raise InputError("A weighted mean needs finite values and positive uncertainties.")
    # Relative to the largest, so that the squares of 1e-34 J s do not underflow.
    scale = u.max()
    weight = (scale / u) ** 2
    mean = float(np.sum(weight * value) / np.sum(weight))
    residual = (value - mean) / u
    return WeightedMean(
        value=mean,
        standard_uncertainty=float(scale / math.sqrt(np.sum(weight))),
        chi2=float(residual @ residual),
        degrees_of_freedom=value.size - 1,
    )


def birge_ratio(values: ArrayLike, uncertainties: ArrayLike) -> float:
    """Birge ratio of independent values of one quantity (R. T. Birge, Phys. Rev. 40, 207 (1932)).

    About one if the values scatter as their standard uncertainties say; nan for a single value.
    """
    return weighted_mean(values, uncertainties).birge_ratio


def modified_birge_factor(count: int) -> float:
    """What the standard uncertainty grows by beyond the Birge ratio, sqrt((n - 1)/(n - 3)).

    O. Bodnar and C. Elster, Metrologia 51, 516 (2014): the ratio itself is estimated from n
    values.

    Raises
    ------
    InputError
        For fewer than four values, whose scatter has no finite variance.
    """
    if count < 4:
        raise InputError(f"The modified Birge ratio needs at least four values, not {count}.")
    return math.sqrt((count - 1) / (count - 3))
