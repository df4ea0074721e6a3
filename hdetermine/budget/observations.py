"""Type A evaluation of quantities observed together, n times."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from hdetermine.errors import InputError
from hdetermine.records.quantity import Quantity

FloatArray = NDArray[np.float64]


def mean_quantities(
    observations: Mapping[str, Sequence[float]], units: Mapping[str, str] | None = None
) -> tuple[tuple[Quantity, ...], FloatArray]:
    """Means, their standard uncertainties and their correlations.

    Parameters
    ----------
    observations : mapping of name to n numbers
        The k-th numbers of all quantities belong together; n is at least two.
    units : mapping of name to unit, or None
        ``"1"`` where nothing is stated.

    Returns
    -------
    quantities : tuple of Quantity
        Type A, with n - 1 degrees of freedom.
    correlation : ndarray, shape (m, m)
        Between the means; zero for a quantity that did not vary.

    Raises
    ------
    InputError
        If the quantities have different numbers of observations, or fewer than two.

    References
    ----------
    JCGM 100:2008, 4.2 and eq. (17).
    """
    counts = {name: len(values) for name, values in observations.items()}
    if not counts or len(set(counts.values())) > 1 or min(counts.values()) < 2:
        raise InputError(
            "Quantities observed together need the same number of observations each, at least "
            f"two; there are {counts}."
        )
    table = np.array([list(values) for values in observations.values()], dtype=float)
    n = table.shape[1]
    covariance = np.atleast_2d(np.cov(table)) / n
    u = np.sqrt(np.diag(covariance))
    scale = np.where(u > 0.0, u, 1.0)
    correlation = covariance / np.outer(scale, scale)
    np.fill_diagonal(correlation, 1.0)
    quantities = tuple(
        Quantity(
            name=name,
            symbol=name,
            value=float(mean),
            standard_uncertainty=float(deviation),
            unit=(units or {}).get(name, "1"),
            evaluation="A",
            degrees_of_freedom=n - 1,
        )
        for name, mean, deviation in zip(observations, table.mean(axis=1), u, strict=True)
    )
    return quantities, np.asarray(correlation)
