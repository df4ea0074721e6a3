"""The distributions of input quantities: support, distribution function, quantiles, draws.

JCGM 101:2008, clause 6.4. All functions are vectorised over values or draws.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import ndtr, ndtri, stdtr, stdtrit

from hdetermine.budget.correlation import checked_correlation, correlated_groups, square_root
from hdetermine.errors import InputError
from hdetermine.records.quantity import DISTRIBUTIONS, Quantity

FloatArray = NDArray[np.float64]


def checked_quantity(quantity: Quantity) -> Quantity:
    """Return the quantity if a distribution can be attributed to it.

    Raises
    ------
    InputError
        If its distribution is unknown, its uncertainty negative or not finite, its value not
        finite, or its degrees of freedom not positive.
    """
    name = quantity.name
    if quantity.distribution not in DISTRIBUTIONS:
        raise InputError(
            f"{name}: the distribution {str(quantity.distribution)!r} is unknown; "
            f"use one of {', '.join(DISTRIBUTIONS)}."
        )
    if not math.isfinite(quantity.value):
        raise InputError(f"{name}: the value is not a finite number; state one.")
    if not math.isfinite(quantity.standard_uncertainty) or quantity.standard_uncertainty < 0.0:
        raise InputError(
            f"{name}: the standard uncertainty is {quantity.standard_uncertainty!r}; "
            "it must be zero or a positive number."
        )
    if not quantity.degrees_of_freedom > 0.0:
        raise InputError(
            f"{name}: the degrees of freedom are {quantity.degrees_of_freedom!r}; "
            "they must be a positive number."
        )
    return quantity


def support(quantity: Quantity) -> tuple[float, float]:
    """Smallest and largest possible value; infinite for the normal and t distributions."""
    half_width = quantity.half_width
    if quantity.standard_uncertainty == 0.0:
        return quantity.value, quantity.value
    if half_width is None:
        return -math.inf, math.inf
    return quantity.value - half_width, quantity.value + half_width


def cdf(quantity: Quantity, values: ArrayLike) -> FloatArray:
    """Distribution function.

    Parameters
    ----------
    quantity : Quantity
        With a positive standard uncertainty.
    values : array_like
        In the unit of the quantity.

    Returns
    -------
    ndarray
        Probabilities of the same shape.
    """
    scaled = (np.asarray(values, dtype=float) - quantity.value) / _scale(quantity)
    match quantity.distribution:
        case "normal":
            return np.asarray(ndtr(scaled))
        case "t":
            return np.asarray(_student_cdf(quantity.degrees_of_freedom, scaled))
    inside = np.clip(scaled, -1.0, 1.0)
    match quantity.distribution:
        case "rectangular":
            return np.asarray(0.5 * (1.0 + inside))
        case "triangular":
            return np.asarray(0.5 + inside - 0.5 * inside * np.abs(inside))
    return np.asarray(0.5 + np.arcsin(inside) / np.pi)


def quantile(quantity: Quantity, probabilities: ArrayLike) -> FloatArray:
    """Inverse of `cdf`; the value itself if the standard uncertainty is zero."""
    p = np.asarray(probabilities, dtype=float)
    match quantity.distribution:
        case "normal":
            standard = ndtri(p)
        case "t":
            standard = _student_quantile(quantity.degrees_of_freedom, p)
        case "rectangular":
            standard = 2.0 * p - 1.0
        case "triangular":
            tail = np.minimum(p, 1.0 - p)
            standard = np.sign(p - 0.5) * (1.0 - np.sqrt(2.0 * tail))
        case _:
            standard = -np.cos(np.pi * p)
    return np.asarray(quantity.value + _scale(quantity) * standard)


def from_normal(quantity: Quantity, scores: ArrayLike) -> FloatArray:
    """Turn standard normal scores z into values of the quantity, quantile(Phi(z)).

    Parameters
    ----------
    quantity : Quantity
        Of any distribution.
    scores : array_like
        Standard normal variates.

    Returns
    -------
    ndarray
        Values, of the same shape.
    """
    z = np.asarray(scores, dtype=float)
    if quantity.distribution == "normal":
        return np.asarray(quantity.value + quantity.standard_uncertainty * z)
    # Phi(-|z|) keeps its digits in the far tail where Phi(|z|) rounds to one.
    lower = quantile(quantity, ndtr(-np.abs(z)))
    return np.asarray(np.where(z > 0.0, 2.0 * quantity.value - lower, lower))


def draw(
    inputs: Sequence[Quantity],
    correlation: FloatArray | None,
    rng: np.random.Generator,
    draws: int,
) -> FloatArray:
    """Draw values of all inputs.

    Correlated inputs are drawn through a Gaussian copula: the matrix holds the correlations of
    their normal scores. For normal inputs these are the correlations themselves; for bounded
    ones the correlation of the values comes out slightly smaller (two rectangular inputs: by
    at most 0.018).

    Parameters
    ----------
    inputs : sequence of Quantity
        m inputs.
    correlation : ndarray, shape (m, m), or None
        Correlation matrix; None for independent inputs.
    rng : numpy.random.Generator
        Source of all randomness.
    draws : int
        Number of draws.

    Returns
    -------
    ndarray, shape (m, draws)
    """
    values = np.empty((len(inputs), draws))
    matrix = checked_correlation(correlation, len(inputs), [q.name for q in inputs])
    for group in correlated_groups(matrix):
        if len(group) == 1:
            values[group[0]] = _draw_one(inputs[group[0]], rng, draws)
            continue
        root = square_root(matrix[np.ix_(group, group)])
        scores = root @ rng.standard_normal((len(group), draws))
        for row, index in enumerate(group):
            values[index] = from_normal(inputs[index], scores[row])
    return values


def _draw_one(quantity: Quantity, rng: np.random.Generator, draws: int) -> FloatArray:
    if quantity.standard_uncertainty == 0.0:
        return np.full(draws, quantity.value)
    scale = _scale(quantity)
    match quantity.distribution:
        case "normal":
            standard = rng.standard_normal(draws)
        case "t" if math.isinf(quantity.degrees_of_freedom):
            standard = rng.standard_normal(draws)
        case "t":
            standard = rng.standard_t(quantity.degrees_of_freedom, draws)
        case "rectangular":
            standard = 2.0 * rng.random(draws) - 1.0
        case "triangular":
            standard = rng.random(draws) - rng.random(draws)
        case _:
            standard = np.cos(np.pi * rng.random(draws))
    return np.asarray(quantity.value + scale * standard)


def _scale(quantity: Quantity) -> float:
    half_width = quantity.half_width
    return quantity.standard_uncertainty if half_width is None else half_width


def _student_cdf(nu: float, x: FloatArray) -> FloatArray:
    return np.asarray(ndtr(x) if math.isinf(nu) else stdtr(nu, x))


def _student_quantile(nu: float, p: FloatArray) -> FloatArray:
    return np.asarray(ndtri(p) if math.isinf(nu) else stdtrit(nu, p))
