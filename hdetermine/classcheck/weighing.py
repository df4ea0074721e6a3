"""How probable a claim is under each way of doing the arithmetic.

Logarithms of the claimed numbers are compared with their prediction by a normal distribution.
Its covariance holds what the re-analysis does not know, the claim's rounding, and the scatter
that ordinary reading by people has: between voltages, common to all, and in the arithmetic.
Nobody states these three, so a grid of them is tried.
"""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import chdtrc, logsumexp

from hdetermine.classcheck.alignment import UNSEEN_STEP, Alignment
from hdetermine.classcheck.arithmetic import (
    PROPER,
    RIGHT,
    Combination,
    Prediction,
    Variant,
    line_through_origin,
    mean_of_products,
    predict,
)

FloatArray = NDArray[np.float64]

WITHOUT_INTERCEPT = (mean_of_products, line_through_origin)
HOPELESS_CHI2 = 200.0
LARGEST_LOG = 700.0
"""Beyond the exponential of this no float reaches."""
LARGEST_STEP = 0.3
"""Logarithmic distance over which a linearisation is moved."""
LARGEST_ZERO = 10.0
"""Largest relative standard uncertainty of a reading from that of the zero."""
ZERO_READING_U_deg = 0.01
"""How well people take a zero over from the lines, besides what the re-analysis states."""


@dataclass(frozen=True, slots=True)
class Scatter:
    """Relative standard deviations of reading by people: of each cutoff, of all, of h."""

    single: float
    common: float
    arithmetic: float


def _grid(
    single: Sequence[float], common: Sequence[float], arithmetic: Sequence[float]
) -> tuple[Scatter, ...]:
    return tuple(Scatter(*values) for values in itertools.product(single, common, arithmetic))


ORDINARY = _grid((0.002, 0.006, 0.012, 0.02), (0.002, 0.005), (0.001, 0.005))
"""Scatter of honest readings: 1 to 2 % of each cutoff is common practice, no source."""
ORDINARY_WITHOUT_CUTOFFS = _grid((0.002, 0.007, 0.02), (0.002, 0.007, 0.015), (0.002, 0.01, 0.02))
"""For a claim of h alone, where the arithmetic cannot be followed."""
COARSE = _grid((0.004, 0.015), (0.003, 0.01), (0.001, 0.005))
"""A thinner grid for combinations of two slips."""
ANYTHING = _grid((0.003, 0.02, 0.1), (0.003, 0.05, 0.3, 2.0, 10.0), (0.01, 0.3, 2.0, 30.0))
"""A mistake that no catalogue foresees."""
STATED_ONLY = _grid((0.001,), (0.001,), (0.001,))
"""For a claim against itself: its cutoffs are what it says they are."""


@dataclass(frozen=True, slots=True, eq=False)
class Weights:
    """What one variant with each of F factors makes of a claim.

    Attributes
    ----------
    log_mean : ndarray, shape (F,)
        Log likelihood, averaged over combinations and scatter; -inf where impossible.
    log_best : ndarray, shape (F,)
        The largest of them.
    fit_probability : ndarray, shape (F,)
        Largest probability of chi squared.
    planck_J_s : float
        h predicted by the combination that fits best without a factor; nan if h is not claimed.
    """

    log_mean: FloatArray
    log_best: FloatArray
    fit_probability: FloatArray
    planck_J_s: FloatArray


def factor_shifts(alignment: Alignment, factors: Sequence[Variant]) -> FloatArray:
    """What multiplying variants add to the logarithms of the claimed numbers, shape (F, m)."""
    rows = alignment.rows
    shifts = np.zeros((len(factors), rows.size))
    for index, factor in enumerate(factors):
        wavelength = np.log(factor.wavelength_factor)
        shifts[index, rows.angles.size :] = wavelength
        if rows.with_h:
            shifts[index, -1] = wavelength + np.log(factor.planck_factor)
    return shifts


def weigh(
    alignment: Alignment,
    variant: Variant,
    shifts: FloatArray,
    grid: Sequence[Scatter],
    own: float = 1.0,
) -> Weights:
    """Weigh one variant, with each of several factors, against a claim.

    Parameters
    ----------
    alignment : Alignment
        Claim and data.
    variant : Variant
        How the arithmetic was done.
    shifts : ndarray, shape (F, m)
        From `factor_shifts`.
    grid : sequence of Scatter
        Scatter that is tried.
    own : float
        Share of the re-analysis' own counting statistics that is counted.

    Returns
    -------
    Weights
    """
    combinations = _combinations(alignment, variant)
    readings = _readings(alignment, _own(alignment, variant, own))
    pieces = []
    for combine in combinations:
        prediction = _predict(alignment, variant, combine)
        if prediction is not None:
            if variant is not RIGHT and _hopeless(alignment, prediction, shifts, readings, grid):
                continue
            pieces += [
                _one(alignment, prediction, shifts, single_u, rounding_u, grid)
                for single_u, rounding_u in readings
            ]
    if not pieces:
        nothing = np.full(len(shifts), -np.inf)
        return Weights(nothing, nothing, np.zeros(len(shifts)), np.full(len(shifts), np.nan))
    log_likelihood = np.concatenate([piece[0] for piece in pieces])
    probability = np.concatenate([piece[1] for piece in pieces])
    h = np.concatenate([piece[2] for piece in pieces])
    # A combination that cannot be done counts as one that was not done.
    log_mean = logsumexp(log_likelihood, axis=0) - np.log(
        len(grid) * len(combinations) * len(readings)
    )
    best = np.argmax(log_likelihood, axis=0)
    columns = np.arange(len(shifts))
    return Weights(
        np.asarray(log_mean), log_likelihood[best, columns], np.max(probability, axis=0),
        h[best, columns],
    )  # fmt: skip


def _combinations(alignment: Alignment, variant: Variant) -> tuple[Combination, ...]:
    """Ways to combine the voltages that are tried.

    For h alone a line with an intercept is not: its own scatter is several percent, and honest
    values of h are taken to scatter by 1 to 2 %, however they were made.
    """
    if variant.combine is not None or not alignment.rows.with_h:
        return PROPER[:1]
    return PROPER if alignment.rows.size > 1 else WITHOUT_INTERCEPT


def _readings(alignment: Alignment, own: FloatArray) -> list[tuple[FloatArray, FloatArray]]:
    """Uncertainty of each reading, and rounding of each claimed number.

    Angles are often written down first and then used as written: their rounding belongs to the
    reading, and what follows from them follows exactly. Or they are rounded for the claim alone.
    """
    rows, rounding = alignment.rows, alignment.rounding_u
    apart = [(own, rounding)]
    angles = rows.angles.size
    if not angles or angles == rows.size:
        return apart
    as_written = own.copy()
    as_written[rows.angles] = np.hypot(as_written[rows.angles], rounding[:angles])
    rest = rounding.copy()
    rest[:angles] = UNSEEN_STEP
    return [*apart, (as_written, rest)]


def _hopeless(
    alignment: Alignment,
    prediction: Prediction,
    shifts: FloatArray,
    readings: list[tuple[FloatArray, FloatArray]],
    grid: Sequence[Scatter],
) -> bool:
    """Whether a prediction is so far off that no scatter of the grid brings it near: saves time."""
    widest = Scatter(
        max(scatter.single for scatter in grid),
        max(scatter.common for scatter in grid),
        max(scatter.arithmetic for scatter in grid),
    )
    covariance = _covariances(alignment, prediction, *readings[0], [widest])[0]
    residual = alignment.log_values - prediction.log_values - shifts
    chi2 = np.sum(np.linalg.solve(np.linalg.cholesky(covariance), residual.T) ** 2, axis=0)
    return bool(np.min(chi2) > HOPELESS_CHI2 + 2.0 * residual.shape[1])


def _predict(alignment: Alignment, variant: Variant, combine: Combination) -> Prediction | None:
    """Predict; where the sine goes wild, linearise about the angles that are claimed."""
    evidence, rows = alignment.evidence, alignment.rows
    prediction = predict(evidence, variant, combine, rows)
    claimed = rows.angles.size
    if prediction is None or variant.sine_of is None or not claimed:
        return prediction
    missing = (alignment.log_values - prediction.log_values)[:claimed]
    around = np.asarray(np.linalg.pinv(prediction.response[:claimed]) @ missing)
    if np.max(np.abs(around)) > LARGEST_STEP:
        return prediction
    return predict(evidence, variant, combine, rows, around)


def _own(alignment: Alignment, variant: Variant, share: float) -> FloatArray:
    """Relative standard uncertainty of each reading, beside the scatter of reading."""
    evidence = alignment.evidence
    if variant.angle_deg is None:
        return share * evidence.own_u
    # Whoever reads off the same counts by a shortcut shares their counting statistics.
    return np.where(alignment.filled, evidence.own_u, variant.reading_u)


def _one(
    alignment: Alignment,
    prediction: Prediction,
    shifts: FloatArray,
    own: FloatArray,
    rounding: FloatArray,
    grid: Sequence[Scatter],
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Log likelihood, probability of chi squared and h, each of shape (grid, F)."""
    covariance = _covariances(alignment, prediction, own, rounding, grid)
    lower = np.linalg.cholesky(covariance)
    residual = alignment.log_values - prediction.log_values - shifts
    white = np.linalg.solve(lower, np.broadcast_to(residual.T, (len(grid), *residual.T.shape)))
    chi2 = np.sum(white**2, axis=1)
    m = residual.shape[1]
    log_det = 2.0 * np.sum(np.log(np.diagonal(lower, axis1=1, axis2=2)), axis=1)
    log_likelihood = -0.5 * (chi2 + log_det[:, np.newaxis] + m * np.log(2.0 * np.pi))
    # h as it follows from the claimed cutoffs, where there are any.
    log_h = np.full(log_likelihood.shape, np.nan)
    if alignment.rows.with_h:
        foreseen = prediction.log_values[-1] + shifts[:, -1]
        log_h = foreseen + np.einsum("gi,gif->gf", lower[:, -1, :-1], white[:, :-1])
    h = np.exp(np.minimum(log_h, LARGEST_LOG))
    return log_likelihood, chdtrc(m, chi2), h


def _covariances(
    alignment: Alignment,
    prediction: Prediction,
    own: FloatArray,
    rounding: FloatArray,
    grid: Sequence[Scatter],
) -> FloatArray:
    """Covariance of the logarithms for each scatter of the grid, shape (grid, m, m)."""
    evidence, rows = alignment.evidence, alignment.rows
    response = prediction.response
    m = response.shape[0]
    zero_u = np.hypot(evidence.zero_u_deg, ZERO_READING_U_deg)
    per_degree = np.radians(1.0) / np.tan(np.radians(evidence.angle_deg))
    # Wavelengths in a wrong power of ten put a claim's own angles far below the zero's doubt.
    per_zero = np.sum(response * np.minimum(per_degree, LARGEST_ZERO / zero_u), axis=1)
    fixed = (response * own**2) @ response.T + zero_u**2 * np.outer(per_zero, per_zero)
    fixed = fixed + np.diag(rounding**2)
    if rows.with_h and not (rows.angles.size or rows.wavelengths.size):
        fixed[-1, -1] += alignment.own_u**2
    independent = response @ response.T
    total = np.sum(response, axis=1)
    common = np.outer(total, total)
    single = np.array([scatter.single**2 for scatter in grid])[:, np.newaxis, np.newaxis]
    all_u = np.array([scatter.common**2 for scatter in grid])[:, np.newaxis, np.newaxis]
    covariance: FloatArray = fixed + single * independent + all_u * common
    if rows.with_h:
        arithmetic = np.array([scatter.arithmetic**2 for scatter in grid])
        covariance[:, -1, -1] += arithmetic
    covariance[:, np.arange(m), np.arange(m)] += 1e-12
    return covariance
