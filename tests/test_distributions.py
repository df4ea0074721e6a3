"""Distributions of input quantities (JCGM 101:2008, 6.4; clause numbers from memory)."""

import math
from dataclasses import replace

import numpy as np
import pytest
from scipy import stats

from hdetermine.budget import distributions as d
from hdetermine.errors import InputError
from hdetermine.records.quantity import Quantity

VALUE, U = 3.0, 0.4


def make(distribution, nu=math.inf):
    return Quantity("x", "x", VALUE, U, "1", distribution, degrees_of_freedom=nu)


def frozen(q):
    """The same distribution from an independent implementation."""
    a = q.half_width or 0.0
    return {
        "normal": lambda: stats.norm(VALUE, U),
        "t": lambda: stats.t(q.degrees_of_freedom, VALUE, U),
        "rectangular": lambda: stats.uniform(VALUE - a, 2 * a),
        "triangular": lambda: stats.triang(0.5, VALUE - a, 2 * a),
        "arcsine": lambda: stats.arcsine(VALUE - a, 2 * a),
    }[q.distribution]()


CASES = [
    make("normal"),
    make("t", 4.0),
    make("t", 2.5),
    make("rectangular"),
    make("triangular"),
    make("arcsine"),
]


@pytest.mark.parametrize("q", CASES, ids=lambda q: f"{q.distribution}-{q.degrees_of_freedom}")
def test_cdf_quantile_and_scores_agree_with_scipy(q):
    p = np.array([1e-9, 0.001, 0.1, 0.5, 0.77, 0.999, 1 - 1e-9])
    reference = frozen(q)
    np.testing.assert_allclose(d.quantile(q, p), reference.ppf(p), rtol=1e-9)
    x = reference.ppf(p[1:-1])
    np.testing.assert_allclose(d.cdf(q, x), p[1:-1], rtol=1e-9)
    z = stats.norm.ppf(p)
    np.testing.assert_allclose(d.from_normal(q, z), reference.ppf(p), rtol=1e-7)


@pytest.mark.parametrize("q", CASES, ids=lambda q: f"{q.distribution}-{q.degrees_of_freedom}")
def test_draws_follow_their_distribution(q):
    x = d.draw([q], None, np.random.default_rng(8), 40_000)[0]
    assert stats.kstest(x, frozen(q).cdf).pvalue > 1e-3
    low, high = d.support(q)
    assert low <= x.min()
    assert x.max() <= high


@pytest.mark.parametrize("q", CASES[3:], ids=lambda q: q.distribution)
def test_bounded_distributions_have_the_stated_standard_uncertainty(q):
    assert frozen(q).std() == pytest.approx(U)
    assert d.cdf(q, VALUE - 10.0) == 0.0
    assert d.cdf(q, VALUE + 10.0) == 1.0


def test_far_tails_stay_symmetric():
    q = make("t", 3.0)
    z = np.array([-9.0, 9.0])
    low, high = d.from_normal(q, z) - VALUE
    assert math.isfinite(high)
    assert high == pytest.approx(-low)


def test_t_of_infinite_freedom_is_normal():
    z = np.array([-1.0, 0.5])
    np.testing.assert_allclose(d.from_normal(make("t"), z), VALUE + U * z)


def test_correlated_draws():
    inputs = [make("normal"), make("rectangular"), make("normal"), make("rectangular")]
    matrix = np.eye(4)
    matrix[0, 2] = matrix[2, 0] = -0.8
    matrix[1, 3] = matrix[3, 1] = 0.6
    x = d.draw(inputs, matrix, np.random.default_rng(3), 200_000)
    r = np.corrcoef(x)
    assert r[0, 2] == pytest.approx(-0.8, abs=0.005)
    # Gaussian copula with uniform margins: Pearson's r is (6/pi) arcsin(rho/2).
    assert r[1, 3] == pytest.approx(6 / math.pi * math.asin(0.3), abs=0.005)
    assert abs(r[0, 1]) < 0.01
    assert stats.kstest(x[3], frozen(inputs[3]).cdf).pvalue > 1e-3


def test_fully_correlated_inputs_move_together():
    x = d.draw([make("normal"), make("normal")], np.ones((2, 2)), np.random.default_rng(1), 100)
    np.testing.assert_allclose(x[0], x[1])


def test_draws_depend_on_the_generator_only():
    one = d.draw(CASES, None, np.random.default_rng(11), 10)
    np.testing.assert_array_equal(one, d.draw(CASES, None, np.random.default_rng(11), 10))


def test_an_exact_input_stays():
    exact = replace(make("rectangular"), standard_uncertainty=0.0)
    assert set(d.draw([exact], None, np.random.default_rng(1), 5)[0]) == {VALUE}
    assert d.support(exact) == (VALUE, VALUE)


@pytest.mark.parametrize(
    ("changes", "match"),
    [
        ({"distribution": "gaussian"}, "'gaussian' is unknown; use one of normal"),
        ({"standard_uncertainty": -0.1}, "must be zero or a positive"),
        ({"standard_uncertainty": math.nan}, "must be zero or a positive"),
        ({"value": math.inf}, "not a finite number"),
        ({"degrees_of_freedom": 0.0}, "degrees of freedom"),
        ({"degrees_of_freedom": math.nan}, "degrees of freedom"),
    ],
)
def test_bad_quantities(changes, match):
    with pytest.raises(InputError, match=match):
        d.checked_quantity(replace(make("normal"), **changes))
