"""The straight line of best fit when both variables are uncertain and correlated.

The observations x and y scatter about true points (xi, a + b xi) with a known covariance
matrix of all 2 n numbers. Maximum likelihood then asks for the line and the points xi that
minimise the generalised sum of squares (Deming 1943; York 1966; ISO/TS 28037:2010, clause 10).
For a given slope the points follow in closed form, so only the line is iterated:

    r = y - a - b x,    W = V_y - b (V_xy + V_xy') + b^2 V_x,    xi = x - (V_xy - b V_x) W^-1 r,

and the Gauss-Newton step of the whole problem, with xi eliminated, is the weighted least-squares
solution of [xi 1] (db, da)' = r under W. Its fixed point is the maximum of the likelihood, and
its normal matrix, taken at the adjusted points, is the expected information: the standard
uncertainties of York, Evensen, Lopez Martinez and De Basabe Delgado, Am. J. Phys. 72, 367 (2004).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.linalg import LinAlgError, cholesky, solve_triangular

from hdetermine.errors import InputError

FloatArray = NDArray[np.float64]

MOST_STEPS = 200
SETTLED = 1e-13
"""The iteration ends when a step moves the weighted points by no more than this (times the root
of chi2, where that is above one)."""

ROUNDING = 1e-7
"""It also ends when steps no longer than this stop shrinking."""


@dataclass(frozen=True, slots=True, eq=False)
class StraightLine:
    """A fitted line y = intercept + slope x.

    Attributes
    ----------
    slope, intercept : float
        Of the line, in units of y/x and of y.
    covariance : ndarray, shape (2, 2)
        Of (slope, intercept); row and column of an intercept held at zero are zero.
    chi2 : float
        Minimum of the generalised sum of squares; without `covariance_y`, the plain sum of
        squared residuals in the unit of y squared.
    degrees_of_freedom : int
        Points less parameters.
    fitted_x : ndarray, shape (n,)
        Adjusted abscissae; equal to x where x is exact.
    """

    slope: float
    intercept: float
    covariance: FloatArray
    chi2: float
    degrees_of_freedom: int
    fitted_x: FloatArray

    @property
    def slope_u(self) -> float:
        """Standard uncertainty of the slope."""
        return math.sqrt(self.covariance[0, 0])

    @property
    def intercept_u(self) -> float:
        """Standard uncertainty of the intercept."""
        return math.sqrt(self.covariance[1, 1])

    @property
    def scatter(self) -> float:
        """Root of chi2 per degree of freedom; nan where no freedom is left.

        The Birge ratio of a fit with stated covariances; the residual standard deviation, in
        the unit of y, of one without.
        """
        if self.degrees_of_freedom == 0:
            return math.nan
        return math.sqrt(self.chi2 / self.degrees_of_freedom)

    def value_at(self, x: float) -> tuple[float, float]:
        """Ordinate at an exact abscissa, and its standard uncertainty."""
        gradient = np.array([x, 1.0])
        variance = float(gradient @ self.covariance @ gradient)
        return self.intercept + self.slope * x, math.sqrt(max(variance, 0.0))


def fit_straight_line(
    x: ArrayLike,
    y: ArrayLike,
    covariance_x: ArrayLike | None = None,
    covariance_y: ArrayLike | None = None,
    covariance_xy: ArrayLike | None = None,
    *,
    intercept: bool = True,
) -> StraightLine:
    """Fit a straight line by generalised least squares with errors in both variables.

    Parameters
    ----------
    x, y : array_like, shape (n,)
        Observations.
    covariance_x, covariance_y : array_like, shape (n, n), optional
        Of the observations. Without `covariance_x` the abscissae are exact: weighted least
        squares. Without either, all points weigh the same and the uncertainty of the line
        comes from the scatter about it (Type A evaluation, JCGM 100:2008, H.3).
    covariance_xy : array_like, shape (n, n), optional
        Element (i, j) is the covariance of x[i] and y[j].
    intercept : bool
        False holds the intercept at zero.

    Returns
    -------
    StraightLine

    Raises
    ------
    InputError
        If the observations are too few, not finite or all at one x; if a covariance matrix is
        none, or belongs to no `covariance_y`; if the fit does not settle.
    """
    points = _points(x, y, covariance_x, covariance_y, covariance_xy)
    least = 2 if intercept else 1
    if points.x.size < least:
        raise InputError(
            f"A line with {least} parameters needs at least {least} points, not {points.x.size}."
        )
    if covariance_y is None:
        if covariance_x is not None or covariance_xy is not None:
            raise InputError(
                "A line fit with a covariance of x needs the covariance of y as well: state it."
            )
        return _unweighted(points, intercept)

    start, _ = _solve(_design(points.x, intercept), points.y)
    best = points.adjusted(start)
    earlier = math.inf
    for _ in range(MOST_STEPS):
        design = best.whitened(_design(best.fitted_x, intercept))
        step, covariance = _solve(design, best.white)
        following = _descend(points, best, step)
        moved = float(np.linalg.norm(design @ (following.line - best.line)[:least]))
        scale = max(1.0, math.sqrt(best.chi2))
        # Strongly correlated points leave the last steps to rounding: they stop shrinking.
        rounding = moved <= ROUNDING * scale and moved > 0.5 * earlier
        settled = moved <= SETTLED * scale or rounding
        earlier = moved
        best = following
        if settled:
            break
    else:
        raise InputError(
            "The straight-line fit does not settle: the stated uncertainties are larger than "
            "the range of the points, so look for a wrong unit among them."
        )
    return StraightLine(
        slope=float(best.line[0]),
        intercept=float(best.line[1]),
        covariance=covariance,
        chi2=best.chi2,
        degrees_of_freedom=points.x.size - least,
        fitted_x=best.fitted_x,
    )


@dataclass(frozen=True, slots=True, eq=False)
class _Adjusted:
    """A trial line (slope, intercept), its whitened residuals and the adjusted points."""

    line: FloatArray
    root: FloatArray
    white: FloatArray
    fitted_x: FloatArray

    @property
    def chi2(self) -> float:
        return float(self.white @ self.white)

    def whitened(self, design: FloatArray) -> FloatArray:
        return np.asarray(solve_triangular(self.root, design, lower=True))


@dataclass(frozen=True, slots=True, eq=False)
class _Points:
    """Observations with their covariances."""

    x: FloatArray
    y: FloatArray
    of_x: FloatArray
    of_y: FloatArray
    of_xy: FloatArray

    def adjusted(self, line: FloatArray) -> _Adjusted:
        """Adjust the points to a line."""
        slope = line[0]
        spread = self.of_y - slope * (self.of_xy + self.of_xy.T) + slope**2 * self.of_x
        try:
            root = np.asarray(cholesky(spread, lower=True))
        except LinAlgError as error:
            raise InputError(
                "The covariance matrices of a line fit are not positive definite: an uncertainty "
                "is zero, or a correlation is impossible."
            ) from error
        residual = self.y - line[1] - slope * self.x
        white = np.asarray(solve_triangular(root, residual, lower=True))
        pull = solve_triangular(root, white, lower=True, trans="T")
        fitted_x = self.x - (self.of_xy - slope * self.of_x) @ pull
        return _Adjusted(line, root, white, fitted_x)


def _descend(points: _Points, start: _Adjusted, step: FloatArray) -> _Adjusted:
    """Take the step, halved until the sum of squares does not rise."""
    highest = start.chi2 * (1.0 + 1e-12)
    for halvings in range(40):
        trial = points.adjusted(start.line + step * 0.5**halvings)
        if trial.chi2 <= highest:
            return trial
    return start


def _unweighted(points: _Points, intercept: bool) -> StraightLine:
    line, unscaled = _solve(_design(points.x, intercept), points.y)
    freedom = points.x.size - (2 if intercept else 1)
    if freedom < 1:
        raise InputError(
            f"{points.x.size} points leave no scatter about a line through all of them: state "
            "the covariance of y, or add a point."
        )
    residual = points.y - line[1] - line[0] * points.x
    chi2 = float(residual @ residual)
    return StraightLine(
        slope=float(line[0]),
        intercept=float(line[1]),
        covariance=unscaled * (chi2 / freedom),
        chi2=chi2,
        degrees_of_freedom=freedom,
        fitted_x=points.x,
    )


def _design(x: FloatArray, intercept: bool) -> FloatArray:
    return np.column_stack([x, np.ones_like(x)]) if intercept else x[:, np.newaxis]


def _solve(design: FloatArray, target: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Least squares by QR: (slope, intercept) and the inverse normal matrix, 2 x 2.

    What the design leaves out stays zero. The triangle is solved as it stands, so that the
    units of x and y do not matter.
    """
    size = design.shape[1]
    orthogonal, triangle = np.linalg.qr(design)
    lengths = np.linalg.norm(design, axis=0)
    if np.any(np.abs(np.diag(triangle)) <= 1e-13 * lengths):
        raise InputError(
            "All points of the line fit stand at one x: a slope needs at least two places."
        )
    inverse = np.asarray(solve_triangular(triangle, np.eye(size)))
    line = np.zeros(2)
    line[:size] = inverse @ (orthogonal.T @ target)
    covariance = np.zeros((2, 2))
    covariance[:size, :size] = inverse @ inverse.T
    return line, covariance


def _points(
    x: ArrayLike,
    y: ArrayLike,
    covariance_x: ArrayLike | None,
    covariance_y: ArrayLike | None,
    covariance_xy: ArrayLike | None,
) -> _Points:
    abscissa = np.array(x, dtype=float)
    ordinate = np.array(y, dtype=float)
    if abscissa.ndim != 1 or abscissa.shape != ordinate.shape:
        raise InputError(
            f"A line fit needs two lists of one length, not shapes {abscissa.shape} and "
            f"{ordinate.shape}."
        )
    if not (np.all(np.isfinite(abscissa)) and np.all(np.isfinite(ordinate))):
        raise InputError("The points of a line fit must all be finite numbers: leave others out.")
    count = abscissa.size
    return _Points(
        abscissa,
        ordinate,
        _matrix(covariance_x, count, "covariance_x", symmetric=True),
        _matrix(covariance_y, count, "covariance_y", symmetric=True),
        _matrix(covariance_xy, count, "covariance_xy", symmetric=False),
    )


def _matrix(given: ArrayLike | None, count: int, name: str, *, symmetric: bool) -> FloatArray:
    if given is None:
        return np.zeros((count, count))
    matrix = np.array(given, dtype=float)
    if matrix.shape != (count, count) or not np.all(np.isfinite(matrix)):
        raise InputError(f"{name} must be a finite {count} by {count} matrix for {count} points.")
    if symmetric:
        scale = np.sqrt(np.abs(np.outer(np.diag(matrix), np.diag(matrix))))
        if np.any(np.diag(matrix) < 0) or np.any(np.abs(matrix - matrix.T) > 1e-9 * scale):
            raise InputError(f"{name} is no covariance matrix: it must be symmetric.")
        matrix = 0.5 * (matrix + matrix.T)
    return matrix
