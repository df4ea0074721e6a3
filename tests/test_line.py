"""The straight line against general libraries, and its own properties."""

from __future__ import annotations

import math

import numpy as np
import odrpack
import pytest
from iminuit import Minuit
from scipy.linalg import cho_factor, cho_solve

from hdetermine.errors import InputError
from hdetermine.inference.line import fit_straight_line


def random_problem(seed, *, correlated):
    """Points about a random line, and the joint covariance of all x and y."""
    rng = np.random.default_rng(seed)
    count = int(rng.integers(4, 12))
    slope, intercept = rng.normal(0, 3), rng.normal(0, 2)
    true = np.sort(rng.uniform(0, 10, count))
    scale = rng.uniform(0.05, 0.6)
    sigma = scale * rng.uniform(0.3, 1.0, 2 * count)
    sigma[count:] *= 1 + abs(slope)
    covariance = np.diag(sigma**2)
    if correlated:
        # Two shared inputs act on all x and y, as a zero offset and a gain would.
        shared = 0.7 * rng.normal(size=(2 * count, 2)) * sigma[:, np.newaxis]
        covariance = covariance + shared @ shared.T
    drawn = rng.multivariate_normal(np.concatenate([true, intercept + slope * true]), covariance)
    return drawn[:count], drawn[count:], covariance


def our_fit(x, y, covariance, *, intercept=True):
    n = x.size
    return fit_straight_line(
        x, y, covariance[:n, :n], covariance[n:, n:], covariance[:n, n:], intercept=intercept
    )


def minuit_fit(x, y, covariance, start, *, intercept=True):
    """Minimise the sum of squares over the line and all true points."""
    factor = cho_factor(covariance)

    def cost(parameters):
        slope, offset, true = parameters[0], parameters[1], parameters[2:]
        residual = np.concatenate([x - true, y - offset - slope * true])
        return float(residual @ cho_solve(factor, residual))

    minuit = Minuit(cost, np.concatenate([start, x]))
    minuit.errordef = Minuit.LEAST_SQUARES
    minuit.strategy = 2
    minuit.tol = 1e-10
    if not intercept:
        minuit.values[1] = 0.0
        minuit.fixed[1] = True
    for _ in range(3):
        minuit.migrad(ncall=100_000)
    return minuit


@pytest.mark.parametrize("seed", range(20))
@pytest.mark.parametrize("intercept", [True, False])
def test_independent_errors_against_odrpack(seed, intercept):
    x, y, covariance = random_problem(seed, correlated=False)
    n = x.size
    line = our_fit(x, y, covariance, intercept=intercept)
    result = odrpack.odr_fit(
        lambda points, beta: beta[0] * points + (beta[1] if intercept else 0.0),
        x,
        y,
        np.polyfit(x, y, 1)[: 2 if intercept else 1],
        weight_x=1 / np.diag(covariance)[:n],
        weight_y=1 / np.diag(covariance)[n:],
        diff_scheme="central",
        maxit=2000,
        sstol=1e-15,
        partol=1e-14,
    )
    assert line.slope == pytest.approx(result.beta[0], abs=1e-6 * abs(line.slope))
    assert line.chi2 == pytest.approx(result.sum_square, rel=1e-6)
    assert line.fitted_x == pytest.approx(x + result.delta, rel=1e-6, abs=1e-6)
    # Both evaluate the information at the adjusted points.
    size = 2 if intercept else 1
    assert line.covariance[:size, :size] == pytest.approx(result.cov_beta, rel=1e-5, abs=1e-12)
    if intercept:
        assert line.intercept == pytest.approx(result.beta[1], abs=1e-6 * line.intercept_u)
    else:
        assert line.intercept == line.covariance[1, 1] == line.covariance[0, 1] == 0.0


@pytest.mark.parametrize("seed", range(100, 120))
@pytest.mark.parametrize("intercept", [True, False])
def test_correlated_errors_against_iminuit(seed, intercept):
    x, y, covariance = random_problem(seed, correlated=True)
    line = our_fit(x, y, covariance, intercept=intercept)
    start = [line.slope * 1.02, line.intercept + 0.05]
    minuit = minuit_fit(x, y, covariance, start, intercept=intercept)
    assert line.slope == pytest.approx(minuit.values[0], rel=1e-6)
    assert line.chi2 == pytest.approx(minuit.fval, rel=1e-6)
    assert line.intercept == pytest.approx(minuit.values[1], abs=1e-6 * (1 + abs(line.intercept)))
    assert line.fitted_x == pytest.approx(np.array(minuit.values)[2:], rel=1e-5, abs=1e-6)


def test_exact_abscissae_give_generalised_least_squares():
    x, y, covariance = random_problem(7, correlated=True)
    n = x.size
    of_y = covariance[n:, n:]
    line = fit_straight_line(x, y, None, of_y)
    design = np.column_stack([x, np.ones(n)])
    information = design.T @ np.linalg.solve(of_y, design)
    solution = np.linalg.solve(information, design.T @ np.linalg.solve(of_y, y))
    assert [line.slope, line.intercept] == pytest.approx(solution, rel=1e-10)
    assert line.covariance == pytest.approx(np.linalg.inv(information), rel=1e-9)
    assert line.fitted_x == pytest.approx(x, rel=1e-15)


def test_vanishing_errors_in_x_lead_to_weighted_least_squares():
    x, y, covariance = random_problem(8, correlated=False)
    n = x.size
    weighted = fit_straight_line(x, y, None, covariance[n:, n:])
    nearly = fit_straight_line(x, y, 1e-16 * np.eye(n), covariance[n:, n:])
    assert nearly.slope == pytest.approx(weighted.slope, rel=1e-9)
    assert nearly.covariance == pytest.approx(weighted.covariance, rel=1e-9)


@pytest.mark.parametrize("intercept", [True, False])
def test_unit_weights_take_the_uncertainty_from_the_scatter(intercept):
    rng = np.random.default_rng(3)
    x = np.linspace(0.02, 0.06, 9)
    y = 1240.0 * x + rng.normal(0, 0.3, 9)
    line = fit_straight_line(x, y, intercept=intercept)
    stated = fit_straight_line(x, y, None, line.scatter**2 * np.eye(9), intercept=intercept)
    assert line.slope == pytest.approx(stated.slope, rel=1e-12)
    assert line.covariance == pytest.approx(stated.covariance, rel=1e-10)
    assert stated.scatter == pytest.approx(1.0, rel=1e-12)
    if not intercept:
        assert line.slope == pytest.approx(float(x @ y / (x @ x)), rel=1e-14)


@pytest.mark.parametrize("factor_x", [1e-34, 1e-12, 1e9])
@pytest.mark.parametrize("factor_y", [1e-34, 1.0, 1e12])
def test_units_do_not_matter(factor_x, factor_y):
    x, y, covariance = random_problem(11, correlated=True)
    n = x.size
    plain = our_fit(x, y, covariance)
    scaled = fit_straight_line(
        factor_x * x,
        factor_y * y,
        factor_x**2 * covariance[:n, :n],
        factor_y**2 * covariance[n:, n:],
        factor_x * factor_y * covariance[:n, n:],
    )
    assert scaled.slope == pytest.approx(plain.slope * factor_y / factor_x, rel=1e-9)
    assert scaled.intercept == pytest.approx(plain.intercept * factor_y, rel=1e-9)
    assert scaled.intercept_u == pytest.approx(plain.intercept_u * factor_y, rel=1e-7)


def test_the_stated_uncertainty_is_the_spread_of_the_fits():
    """Pulls of the slope over 800 draws, within four of their standard errors."""
    rng = np.random.default_rng(20)
    true = np.linspace(1.0, 9.0, 9)
    sigma = np.full(9, 0.08)
    pulls = []
    for _ in range(800):
        x = true + rng.normal(0, sigma)
        y = 2.0 - 1.5 * true + rng.normal(0, sigma)
        line = fit_straight_line(x, y, np.diag(sigma**2), np.diag(sigma**2))
        pulls.append((line.slope + 1.5) / line.slope_u)
    assert abs(np.mean(pulls)) < 4 / math.sqrt(800)
    assert np.std(pulls) == pytest.approx(1.0, abs=4 / math.sqrt(1600))


def test_no_freedom_left():
    line = fit_straight_line([1.0, 2.0], [3.0, 5.0], None, 0.01 * np.eye(2))
    assert (line.slope, line.intercept) == pytest.approx((2.0, 1.0))
    assert line.degrees_of_freedom == 0
    assert math.isnan(line.scatter)
    single = fit_straight_line([0.05], [62.0], None, [[0.04]], intercept=False)
    assert single.slope == pytest.approx(1240.0)
    assert single.slope_u == pytest.approx(4.0)


def test_value_at_carries_the_correlation():
    line = fit_straight_line([1, 2, 3, 4], [1.1, 1.9, 3.2, 3.9], None, 0.01 * np.eye(4))
    value, u = line.value_at(2.5)
    assert value == pytest.approx(np.mean([1.1, 1.9, 3.2, 3.9]))
    assert u == pytest.approx(0.05)


ONE = np.eye(3)
BAD = {
    "lengths": (([1, 2, 3], [1, 2]), {}, "one length"),
    "table": (([[1, 2], [3, 4]], [[1, 2], [3, 4]]), {}, "one length"),
    "nan": (([1, 2, math.nan], [1, 2, 3]), {}, "finite"),
    "inf": (([1, 2, 3], [1, math.inf, 3]), {}, "finite"),
    "one x": (([2, 2, 2], [1, 2, 3], None, ONE), {}, "one x"),
    "zero through origin": (([0, 0, 0], [1, 2, 3]), {"intercept": False}, "one x"),
    "too few": (([1], [2], None, [[1]]), {}, "at least 2 points"),
    "nothing": (([], []), {"intercept": False}, "at least 1 point"),
    "no scatter": (([1, 2], [1, 2]), {}, "no scatter"),
    "x alone": (([1, 2, 3], [1, 2, 3], ONE), {}, "covariance of y as well"),
    "shape": (([1, 2, 3], [1, 2, 3], None, np.eye(2)), {}, "3 by 3"),
    "nan covariance": (([1, 2, 3], [1, 2, 3], None, ONE * math.nan), {}, "finite 3 by 3"),
    "asymmetric": (([1, 2, 3], [1, 2, 3], None, ONE + np.eye(3, k=1)), {}, "symmetric"),
    "negative": (([1, 2, 3], [1, 2, 3], None, -ONE), {}, "covariance matrix"),
    "zero": (([1, 2, 3], [1, 2, 3], None, 0 * ONE), {}, "positive definite"),
    "impossible": (([1, 2, 3], [1, 2, 3], ONE, ONE, 2 * ONE), {}, "positive definite"),
}


@pytest.mark.parametrize("case", BAD)
def test_bad_input_is_said_in_one_sentence(case):
    arguments, options, words = BAD[case]
    with pytest.raises(InputError, match=words) as caught:
        fit_straight_line(*arguments, **options)
    assert "\n" not in str(caught.value)
