"""The Monte Carlo route: adaptive procedure, intervals, validation, and h."""

import json
import math
from dataclasses import replace

import numpy as np
import pytest
from hand_model import make_model, with_input

from hdetermine.budget.intervals import (
    numerical_tolerance,
    shortest_interval,
    symmetric_interval,
)
from hdetermine.budget.planck import planck_budget
from hdetermine.budget.propagation import linear_budget
from hdetermine.errors import InputError
from hdetermine.inference import measurement
from hdetermine.inference.montecarlo import (
    BLOCK,
    MINIMUM_BLOCKS,
    monte_carlo_route,
    propagate,
    validate,
)
from hdetermine.inference.spread import check_support, draw_inputs, split_normal
from hdetermine.records.quantity import Quantity


def q(name, value, u, distribution="normal", **more):
    return Quantity(name, name, value, u, "1", distribution, **more)


def rng(seed=1):
    return np.random.default_rng(seed)


@pytest.mark.parametrize(
    ("u", "digits", "delta"),
    [
        # JCGM 101:2008, 7.9.2: 0.000 35 g and 2 K (examples, from memory), then carried digits.
        (0.000_35, 2, 0.000_005),
        (2.0, 1, 0.5),
        (0.0754, 1, 0.005),
        (0.0754, 2, 0.0005),
        (0.0998, 2, 0.005),
        (9.96, 2, 0.5),
        (10.1, 2, 0.5),
        (0.0, 2, 0.0),
        (3.2e-36, 2, 5e-38),
    ],
)
def test_numerical_tolerance(u, digits, delta):
    assert numerical_tolerance(u, digits) == pytest.approx(delta)


def test_intervals_of_a_known_sample():
    values = np.arange(1.0, 101.0)
    low, high = symmetric_interval(values, 0.9)
    assert high - low == 90.0
    assert (low, high) == (5.0, 95.0)
    skewed = np.sort(np.concatenate([np.linspace(0, 1, 95), np.linspace(10, 20, 5)]))
    assert shortest_interval(skewed, 0.9)[1] <= 1.0


def test_asymmetric_output_has_two_intervals():
    drawn = propagate(lambda v: np.exp(v[0]), [q("x", 0.0, 0.5)], None, rng(), digits=1)
    assert drawn.symmetric == pytest.approx((math.exp(-0.98), math.exp(0.98)), rel=0.03)
    assert drawn.shortest[1] - drawn.shortest[0] < drawn.symmetric[1] - drawn.symmetric[0]
    assert drawn.shortest[0] < drawn.symmetric[0]


def test_adaptive_procedure_stops_when_stable_and_says_when_it_is_not():
    # u = 0.99: half a unit in the second digit is 0.005, that takes several blocks more.
    long = propagate(lambda v: v[0], [q("x", 0.0, 0.99)], None, rng())
    short = propagate(lambda v: v[0], [q("x", 0.0, 1.01)], None, rng())
    assert short.blocks == MINIMUM_BLOCKS
    assert long.blocks > 3 * MINIMUM_BLOCKS
    assert long.stable
    assert short.stable
    assert max(long.spreads) <= long.tolerance
    capped = propagate(
        lambda v: v[0], [q("x", 0.0, 0.99)], None, rng(), maximum_draws=MINIMUM_BLOCKS * BLOCK
    )
    assert not capped.stable
    assert capped.draws == MINIMUM_BLOCKS * BLOCK


def test_refinement_ends_but_stability_does_not():
    # u = 0.95: two digits ask for about a million draws, five times finer for 25 times as many.
    x = [q("x", 0.0, 0.95)]
    drawn = propagate(lambda v: v[0], x, None, rng(), tolerance_share=0.2, refining_draws=200_000)
    assert drawn.stable
    assert 200_000 < drawn.draws < 2_000_000
    easy = [q("x", 0.0, 0.12)]
    drawn = propagate(
        lambda v: v[0], easy, None, rng(), tolerance_share=0.01, refining_draws=200_000
    )
    assert drawn.draws == 200_000


def test_student_inputs_keep_their_tails():
    # Scale one, 5 degrees of freedom: standard deviation sqrt(5/3).
    nu = 5.0
    drawn = propagate(lambda v: v[0], [q("x", 0.0, 1.0, "t", degrees_of_freedom=nu)], None, rng())
    assert drawn.standard_uncertainty == pytest.approx(math.sqrt(5 / 3), abs=0.03)
    assert drawn.symmetric[1] == pytest.approx(2.5706, abs=0.05)  # table G.2 of JCGM 100


def test_the_same_generator_gives_the_same_figures():
    runs = [propagate(lambda v: v[0], [q("x", 1.0, 0.3)], None, rng(7)) for _ in range(2)]
    np.testing.assert_array_equal(runs[0].sorted_values, runs[1].sorted_values)
    with pytest.raises(ValueError, match="generator"):
        propagate(lambda v: v[0], [q("x", 1.0, 0.3)])


def test_an_exact_output_is_stable_at_once():
    drawn = propagate(lambda v: v[0] * 0 + 2.0, [q("x", 1.0, 0.3)], None, rng())
    assert drawn.stable
    assert drawn.symmetric == (2.0, 2.0)


def test_validation_fails_on_curvature_and_passes_without():
    def line(v):
        return 2.0 * v[0] + 1.0

    inputs = [q("x", 0.0, 1.0)]
    straight = linear_budget(line, inputs, measurand="y", unit="1")
    drawn = propagate(line, inputs, None, rng(), tolerance_share=0.2)
    verdict = validate(straight, drawn)
    assert verdict.passed
    assert max(verdict.low_difference, verdict.high_difference) <= verdict.tolerance

    def bent(v):
        return 2.0 * v[0] + 0.2 * v[0] ** 2

    linear = linear_budget(bent, inputs, measurand="y", unit="1")
    assert not validate(linear, propagate(bent, inputs, None, rng())).passed


def test_undefined_draws_are_refused():
    with pytest.raises(InputError, match=r"not defined for \d+ of 10000 draws"):
        propagate(lambda v: np.log(v[0]), [q("x", 1.0, 0.5)], None, rng())


# --- h ----------------------------------------------------------------------------------------


def test_split_normal_moments():
    lower, upper = 1.0, 2.0
    x = split_normal(lower, upper, rng(), 400_000)
    mean = math.sqrt(2 / math.pi) * (upper - lower)
    variance = (1 - 2 / math.pi) * (upper - lower) ** 2 + lower * upper
    assert x.mean() == pytest.approx(mean, abs=0.01)
    assert x.var() == pytest.approx(variance, abs=0.02)
    assert np.mean(x < 0) == pytest.approx(1 / 3, abs=0.005)


def test_counting_inputs_follow_the_two_sides_of_the_likelihood():
    model = make_model(2, skew=2.0)
    values = draw_inputs(model, rng(), 100_000)
    row = [x.name for x in model.inputs].index(measurement.counting_name("v1"))
    lower, upper = model.skew[1]
    assert np.mean(values[row] < 0) == pytest.approx(lower / (lower + upper), abs=0.01)
    perfect = with_input(model, measurement.counting_name("v1"), standard_uncertainty=0.0)
    assert set(draw_inputs(perfect, rng(), 10)[row]) == {0.0}


def test_gaussian_model_gives_the_linear_result():
    model = make_model(9, gaussian=True, scatter_seed=5)
    linear = planck_budget(model)
    route = monte_carlo_route(model, linear, rng(2))
    u = linear.combined_standard_uncertainty
    assert route.usable
    assert route.value_J_s == pytest.approx(linear.value, abs=0.02 * u)
    assert route.standard_uncertainty_J_s == pytest.approx(u, rel=0.01)
    low, high = route.interval_95_J_s
    assert high - low == pytest.approx(2 * linear.expanded_uncertainty, rel=0.01)
    json.dumps(route.diagnostics, allow_nan=False)
    assert route.diagnostics["draws"] == 300_000


def test_a_dominant_rectangular_input_fails_the_validation():
    model = make_model(5)
    model = with_input(
        model, measurement.GAIN, standard_uncertainty=0.01, distribution="rectangular"
    )
    linear = planck_budget(model)
    route = monte_carlo_route(model, linear, rng(3))
    verdict = route.diagnostics["validation"]
    assert verdict["passed"] is False
    assert route.interval_95_J_s[1] < linear.value + linear.expanded_uncertainty


@pytest.mark.parametrize(
    "changes",
    [
        {"standard_uncertainty": 120.0, "distribution": "rectangular"},  # 201 +- 208 pm
        {"standard_uncertainty": 45.0},
    ],
)
def test_a_spacing_that_may_vanish_is_refused(changes):
    model = with_input(make_model(2), measurement.SPACING, **changes)
    with pytest.raises(InputError, match=r"crystal.spacing_pm: .* reaches d <= 0"):
        check_support(model)
    with pytest.raises(InputError, match="reaches d <= 0"):
        monte_carlo_route(model, planck_budget(model), rng())


def test_a_voltage_or_angle_that_may_vanish_is_refused():
    model = with_input(make_model(2), measurement.OFFSET, standard_uncertainty=13.0)
    with pytest.raises(InputError, match="tube voltage of scan v0 reaches zero"):
        monte_carlo_route(model, planck_budget(model), rng())
    model = make_model(2)
    model = replace(model, skew=model.skew * 200.0)
    with pytest.raises(InputError, match="cutoff angle of scan v1 reaches zero"):
        monte_carlo_route(model, planck_budget(model), rng())
