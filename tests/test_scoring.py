"""Fisher scoring: fits whose answer is known in closed form, and a general library."""

import math

import numpy as np
import pytest
from iminuit import Minuit

from hdetermine.inference.likelihood import poisson_deviance
from hdetermine.inference.scoring import maximise

# The counts of the Poisson deviance example (S. Baker and R. D. Cousins, 1984, computed).
COUNTS = np.array([12.0, 8.0, 15.0, 10.0, 9.0])
TIMES = np.array([1.0, 0.5, 2.0, 1.0, 0.7])


def flat(parameters):
    """No prior at all."""
    return 0.0, np.zeros(parameters.size), np.zeros(parameters.size)


def level(parameters):
    """A constant mean."""
    return np.full(5, parameters[0]), np.ones((5, 1))


def log_rate(parameters):
    """A constant rate, by its logarithm, over unequal times."""
    mean = TIMES * math.exp(parameters[0])
    return mean, mean[:, np.newaxis]


def two_groups(parameters):
    """Two rates in turn: the first three points and the last two."""
    design = np.array([[1, 0], [1, 0], [1, 0], [0, 1], [0, 1]], dtype=float)
    mean = TIMES * np.exp(design @ parameters)
    return mean, mean[:, np.newaxis] * design


def fit(model, start, prior=flat, **more):
    start = np.array(start, dtype=float)
    return maximise(COUNTS, model, prior, start, np.full(start.size, 5.0), **more)


@pytest.mark.parametrize("start", [1.0, 10.8, 60.0])
def test_a_constant_is_the_mean(start):
    found = fit(level, [start])
    assert found.converged
    assert found.parameters[0] == pytest.approx(10.8, rel=1e-4)
    assert found.deviance == pytest.approx(2.761092, abs=1e-4)
    # Variance of the mean of n Poisson counts: mean over n.
    assert found.covariance()[0, 0] == pytest.approx(10.8 / 5, rel=1e-3)
    np.testing.assert_allclose(found.expected, found.parameters[0])


def test_a_rate_is_counts_over_time():
    found = fit(log_rate, [0.0])
    assert math.exp(found.parameters[0]) == pytest.approx(54.0 / 5.2, rel=1e-4)
    # u(ln rate) = 1/sqrt(counts).
    assert found.covariance()[0, 0] == pytest.approx(1.0 / 54.0, rel=1e-3)


def test_two_groups_do_not_disturb_each_other():
    found = fit(two_groups, [0.0, 5.0])
    np.testing.assert_allclose(np.exp(found.parameters), [35.0 / 3.5, 19.0 / 1.7], rtol=1e-4)
    np.testing.assert_allclose(
        found.covariance(), np.diag([1.0 / 35.0, 1.0 / 19.0]), rtol=1e-3, atol=1e-9
    )


def test_zero_counts_with_a_gamma_prior():
    """Prior rate^k: the maximum is (counts + k)/time, k/time without any count."""
    k = 0.1

    def gamma(parameters):
        return -2.0 * k * float(parameters[0]), np.array([-k]), np.zeros(1)

    for counts in (np.zeros(5), COUNTS):
        found = maximise(counts, log_rate, gamma, np.zeros(1), np.full(1, 3.0))
        assert found.converged
        assert math.exp(found.parameters[0]) == pytest.approx(
            (counts.sum() + k) / TIMES.sum(), rel=0.02
        )
        assert found.penalty == pytest.approx(-2.0 * k * found.parameters[0])


def test_a_normal_prior_pulls_to_where_both_forces_balance():
    centre, precision = math.log(20.0), 30.0

    def normal(parameters):
        pull = precision * (parameters - centre)
        return float(pull @ (parameters - centre)), pull, np.full(1, precision)

    found = fit(log_rate, [0.0], normal)
    theta = found.parameters[0]
    # d(ln L)/d(theta) = sum(d) - sum(t) e^theta = precision (theta - centre).
    assert 54.0 - 5.2 * math.exp(theta) == pytest.approx(precision * (theta - centre), abs=0.05)
    assert found.information[0, 0] == pytest.approx(5.2 * math.exp(theta) + precision, rel=1e-9)
    assert math.log(54.0 / 5.2) < theta < centre


@pytest.mark.parametrize(
    ("bounds", "expected"), [((0.0, 9.0), 9.0), ((12.0, 40.0), 12.0), ((0.0, 40.0), 10.8)]
)
def test_bounds_hold(bounds, expected):
    seen = []

    def watched(parameters):
        seen.append(float(parameters[0]))
        return level(parameters)

    found = fit(watched, [min(max(20.0, bounds[0]), bounds[1])], bounds=bounds)
    assert found.parameters[0] == pytest.approx(expected, rel=1e-4)
    assert min(seen) >= bounds[0]
    assert max(seen) <= bounds[1]


def test_a_held_parameter_stays_and_the_others_settle():
    found = fit(two_groups, [1.0, 0.0], hold=0)
    assert found.parameters[0] == 1.0
    assert math.exp(found.parameters[1]) == pytest.approx(19.0 / 1.7, rel=1e-4)
    assert found.converged


def test_no_step_is_longer_than_its_limit():
    places = [np.array([40.0])]

    def watched(parameters):
        places.append(parameters.copy())
        return level(parameters)

    maximise(COUNTS, watched, flat, places[0], np.array([0.5]), iterations=200)
    assert np.abs(np.diff(places, axis=0)).max() <= 0.5 + 1e-12
    assert places[-1][0] == pytest.approx(10.8, rel=1e-3)


def test_too_few_iterations_are_admitted():
    assert not fit(log_rate, [-8.0], iterations=2).converged


def test_a_flat_likelihood_does_not_break_it():
    """A parameter that the data do not see: the others are found, its variance is not."""

    def blind(parameters):
        mean, jacobian = log_rate(parameters[:1])
        return mean, np.column_stack([jacobian, np.zeros(5)])

    found = fit(blind, [0.0, 3.0])
    assert math.exp(found.parameters[0]) == pytest.approx(54.0 / 5.2, rel=1e-4)
    assert found.parameters[1] == pytest.approx(3.0)


def test_a_kink_at_the_maximum_is_no_failure():
    """A tent whose top stands on a point, as that of a triangular kernel may: no step gains."""
    x = np.linspace(-1.0, 1.0, 9)

    def tent(parameters):
        distance = x - parameters[0]
        mean = 200.0 * np.maximum(1.0 - np.abs(distance), 0.0) + 5.0
        return mean, (200.0 * np.sign(distance) * (np.abs(distance) < 1.0))[:, np.newaxis]

    counts = tent(np.array([0.0]))[0]
    counts[4] += 25.0  # more on the top than any tent explains
    for start in (0.03, -0.08):
        found = maximise(counts, tent, flat, np.array([start]), np.full(1, 0.1))
        assert found.converged
        u = float(np.sqrt(found.covariance()[0, 0]))
        assert found.parameters[0] == pytest.approx(0.0, abs=0.3 * u)


@pytest.mark.parametrize("seed", range(6))
def test_against_a_general_minimiser(seed):
    """A line on a decaying background: iminuit on the same deviance."""
    rng = np.random.default_rng(seed)
    x = np.linspace(0.0, 4.0, 30)
    true = np.array([rng.uniform(1.0, 4.0), rng.uniform(-1.0, 0.5), rng.uniform(2.0, 5.0)])

    def model(p):
        background = np.exp(p[0] + p[1] * x)
        peak = np.exp(p[2] - 0.5 * ((x - 2.2) / 0.3) ** 2)
        return background + peak, np.stack([background, background * x, peak], axis=1)

    counts = rng.poisson(model(true)[0]).astype(float)
    found = maximise(counts, model, flat, np.zeros(3), np.full(3, 1.0))
    minuit = Minuit(lambda p: poisson_deviance(counts, model(p)[0]), found.parameters + 0.05)
    minuit.errordef = Minuit.LEAST_SQUARES  # a deviance, like chi-square, rises by one
    minuit.tol = 1e-6
    minuit.migrad()
    minuit.hesse()
    assert found.converged
    u = np.array(minuit.errors)
    np.testing.assert_allclose(
        found.parameters, np.array(minuit.values), atol=float(0.02 * u.min())
    )
    assert found.deviance == pytest.approx(minuit.fval, abs=1e-3)
    # Expected information against the curvature that was seen: they differ by the noise.
    np.testing.assert_allclose(np.sqrt(np.diag(found.covariance())), u, rtol=0.15)
