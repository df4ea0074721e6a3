"""The posterior route: agreement with the others, reproducibility, convergence."""

import json
from dataclasses import replace

import numpy as np
import pytest
from hand_model import make_model, with_input

from hdetermine.budget.planck import planck_budget
from hdetermine.errors import InputError
from hdetermine.inference import measurement
from hdetermine.inference.chain import convergence, run_chain
from hdetermine.inference.density import posterior_density
from hdetermine.inference.montecarlo import monte_carlo_route
from hdetermine.inference.posterior import Effort, doubled_type_b, posterior_route
from hdetermine.inference.weights import with_gls_weights

SHORT = Effort(walkers=64, steps=300, maximum_steps=300)


@pytest.fixture(scope="module")
def gaussian():
    """A Gaussian model of seven voltages and its full posterior route."""
    model = make_model(7, gaussian=True, scatter_seed=11)
    return model, *posterior_route(model, 3)


def test_three_routes_agree_on_a_gaussian_model(gaussian):
    model, route, _, _ = gaussian
    linear = planck_budget(model)
    carlo = monte_carlo_route(model, linear, np.random.default_rng(1))
    u = linear.combined_standard_uncertainty
    for other in (carlo, route):
        assert other.usable, other.reason
        assert other.value_J_s == pytest.approx(linear.value, abs=0.05 * u)
        assert other.standard_uncertainty_J_s == pytest.approx(u, rel=0.03)
    assert route.interval_95_J_s == pytest.approx(
        (linear.value - 1.96 * u, linear.value + 1.96 * u), abs=0.12 * u
    )


def test_agreement_needs_no_luck_with_fixed_weights():
    # Dominant zero and offset, which the voltages tell apart: the posterior learns them from
    # the data, the other two through the weights.
    model = make_model(9, gaussian=True, scatter_seed=2, counting_deg=0.005)
    model = with_input(model, measurement.ZERO, standard_uncertainty=0.05)
    model = with_input(model, measurement.GAIN, standard_uncertainty=0.0005)
    model = with_gls_weights(model)
    linear = planck_budget(model)
    route, samples, names = posterior_route(model, 5)
    u = linear.combined_standard_uncertainty
    assert route.usable
    assert route.value_J_s == pytest.approx(linear.value, abs=0.06 * u)
    assert route.standard_uncertainty_J_s == pytest.approx(u, rel=0.04)
    learned = samples[:, names.index(measurement.ZERO)].std()
    assert learned < 0.6 * 0.05
    assert np.any(model.weights < 0.0)


def test_two_runs_agree_bit_for_bit_and_leave_the_global_generator_alone(gaussian):
    model = gaussian[0]
    everyone = np.random.mtrand._rand  # the generator behind NumPy's module-level functions
    saved = everyone.get_state()
    try:
        everyone.seed(1)
        before = everyone.get_state()
        first = posterior_route(model, 9, effort=SHORT)
        after = everyone.get_state()
        np.testing.assert_array_equal(after[1], before[1])
        assert after[2:] == before[2:]
        everyone.seed(2)
        second = posterior_route(model, 9, effort=SHORT)
    finally:
        everyone.set_state(saved)
    np.testing.assert_array_equal(first[1], second[1])
    assert first[0] == second[0]
    other = posterior_route(model, 10, effort=SHORT)
    assert not np.array_equal(first[1], other[1])


def test_skewed_cutoffs_pull_to_the_long_side():
    model = make_model(1, gaussian=True, skew=1.6, counting_deg=0.1)
    route, _, _ = posterior_route(model, 4)
    linear = planck_budget(model)
    carlo = monte_carlo_route(model, linear, np.random.default_rng(3))
    u = route.standard_uncertainty_J_s
    assert route.value_J_s > linear.value + 0.1 * u
    # One voltage: posterior and Monte Carlo propagate the same split normal.
    assert route.value_J_s == pytest.approx(carlo.value_J_s, abs=0.06 * u)
    assert u == pytest.approx(carlo.standard_uncertainty_J_s, rel=0.04)


def test_bounded_priors_stay_within_their_bounds():
    model = with_input(
        make_model(4, scatter_seed=6),
        measurement.GAIN,
        standard_uncertainty=0.01,
        distribution="rectangular",
    )
    route, samples, names = posterior_route(with_gls_weights(model), 8)
    assert route.usable, route.reason
    gain = samples[:, names.index(measurement.GAIN)]
    half_width = 0.01 * 3**0.5
    assert np.abs(gain - 1.0).max() <= half_width
    assert gain.std() == pytest.approx(0.01, rel=0.05)
    for name in (measurement.KERNEL, measurement.EXCESS):
        quantity = next(q for q in model.inputs if q.name == name)
        spread = np.abs(samples[:, names.index(name)] - quantity.value)
        assert spread.max() <= quantity.half_width


def test_diagnostics(gaussian):
    _, route, samples, names = gaussian
    figures = route.diagnostics
    json.dumps(figures, allow_nan=False)
    assert figures["converged"] is True
    assert figures["steps"] - figures["steps_discarded"] >= 50 * max(
        figures["autocorrelation_steps"].values()
    )
    assert set(figures["split_rhat"]) == set(names)
    assert min(figures["effective_sample_size"].values()) > 1000
    assert 0.2 < figures["acceptance_fraction"] < 1.0
    assert names[0] == "h"
    assert samples.shape[1] == len(names)
    assert 2000 < len(samples) <= 4000
    assert samples[:, 0].mean() == pytest.approx(route.value_J_s, rel=1e-3)


def test_prior_table_holds_every_input_with_an_uncertainty(gaussian):
    model, route, _, _ = gaussian
    table = route.diagnostics["priors"]
    counting = {measurement.counting_name(scan) for scan in model.scans}
    expected = {q.name for q in model.inputs if q.standard_uncertainty > 0} - counting
    assert {row["quantity"] for row in table} == expected | {"h"}
    by_name = {row["quantity"]: row for row in table}
    assert by_name[measurement.voltage_name("v0")]["sampled"] is False
    offset = by_name[measurement.OFFSET]
    assert offset["posterior_standard_uncertainty"] <= 1.05 * offset["standard_uncertainty"]


def test_prior_sensitivity(gaussian):
    model, route, _, _ = gaussian
    found = route.diagnostics["prior_sensitivity"]
    type_b = frozenset(q.name for q in model.inputs if q.evaluation == "B")
    doubled = planck_budget(doubled_type_b(model, type_b))
    assert found["all_doubled"]["standard_uncertainty_J_s"] == pytest.approx(
        doubled.combined_standard_uncertainty, rel=0.05
    )
    each = {row["quantity"]: row for row in found["each_doubled_linear"]}
    base = planck_budget(model).expanded_uncertainty
    assert each[measurement.GAIN]["expanded_uncertainty_J_s"] > 1.3 * base
    assert measurement.ZERO not in each  # Type A


def test_progress_is_told(gaussian):
    told = []
    posterior_route(gaussian[0], 1, lambda *step: told.append(step), effort=SHORT)
    assert told[0] == ("posterior", 100, 300)
    assert ("posterior", 300, 300) in told


def test_a_chain_that_has_not_converged_is_not_usable(gaussian):
    route, _, _ = posterior_route(
        gaussian[0], 1, effort=Effort(walkers=64, steps=60, maximum_steps=60)
    )
    assert not route.usable
    assert route.reason.startswith("The chain has not converged: 48 steps are fewer than")
    assert route.diagnostics["converged"] is False


def test_a_chain_is_lengthened_until_it_converges(gaussian):
    route, _, _ = posterior_route(
        gaussian[0], 1, effort=Effort(walkers=128, steps=200, maximum_steps=3200)
    )
    assert route.usable
    assert route.diagnostics["steps"] in (400, 800, 1600)


def test_convergence_sees_walkers_that_stay_apart():
    points = np.random.default_rng(0).normal(size=(800, 16, 2))
    assert convergence(points).failure == ""
    stuck = points.copy()
    stuck[:, :8, 1] += 3.0
    judged = convergence(stuck)
    assert "split R-hat" in judged.failure
    assert judged.rhat[0] < 1.01 < judged.rhat[1]
    assert convergence(np.zeros((800, 16, 2))).failure != ""


def test_convergence_figures_of_a_known_process():
    # AR(1) with coefficient 0.8 has the autocorrelation time (1 + 0.8)/(1 - 0.8) = 9.
    rng = np.random.default_rng(1)
    steps, walkers = 4000, 20
    noise = rng.normal(size=(steps, walkers)) * 0.6
    points = np.empty((steps, walkers, 1))
    points[0, :, 0] = rng.normal(size=walkers)
    for i in range(1, steps):
        points[i, :, 0] = 0.8 * points[i - 1, :, 0] + noise[i]
    judged = convergence(points)
    assert judged.failure == ""
    assert judged.tau[0] == pytest.approx(9.0, rel=0.1)
    assert judged.ess[0] == pytest.approx(steps * walkers / 9.0, rel=0.1)


def test_density_against_its_definition():
    model = make_model(3, scatter_seed=1, skew=1.5)
    density = posterior_density(model)
    t = np.zeros((2, density.dimensions))
    t[0, 0], t[0, 1] = 0.7, -1.2  # gain down by 1.2 u, h above what the cutoffs then say
    inputs = measurement.estimates(model)
    inputs[0] = 1.0 - 1.2 * 0.004
    planck = measurement.planck_J_s(model, inputs) * (1.0 + 0.7 * density.scale)
    assert density.points(t)[0][0] == pytest.approx(planck)
    assert density.points(t)[1][0, 0] == pytest.approx(inputs[0])

    def expected(planck, inputs, z):
        predicted = measurement.predicted_reading_deg(model, np.array([planck]), inputs[:, None])
        total = -0.5 * z**2 + np.log(measurement.planck_J_s(model, inputs))
        for i, deviation in enumerate(predicted[:, 0] - model.reading_deg):
            side = model.skew[i, 0] if deviation < 0 else model.skew[i, 1]
            # d(reading)/d(voltage) = -tan(theta)/E, in degrees.
            theta = np.radians(model.reading_deg[i] - 0.03)
            per_kV = np.degrees(np.tan(theta)) / (model.displayed_kV[i] + 4.5e-3)
            variance = side**2 + 0.008**2 + 0.004**2 + (per_kV * 0.02) ** 2
            total -= 0.5 * deviation**2 / variance
        return total

    estimates = measurement.estimates(model)
    centre = measurement.planck_J_s(model, estimates)
    assert density(t) == pytest.approx(
        [expected(planck, inputs, 1.2), expected(centre, estimates, 0.0)], rel=1e-9
    )


def test_out_of_reach_is_impossible_not_an_error():
    model = make_model(2)
    density = posterior_density(model)
    far = np.zeros((1, density.dimensions))
    far[0, 0] = 1e4
    assert density(far)[0] == -np.inf


def test_without_any_width_there_is_no_posterior():
    model = make_model(2)
    exact = replace(model, inputs=tuple(q.with_uncertainty(0.0) for q in model.inputs))
    route, samples, names = posterior_route(exact, 1)
    assert not route.usable
    assert "width" in route.reason
    assert samples.shape == (0, 1)
    assert names == ("h",)


def test_a_spacing_that_may_vanish_is_refused():
    model = with_input(make_model(2), measurement.SPACING, standard_uncertainty=50.0)
    with pytest.raises(InputError, match="reaches d <= 0"):
        posterior_route(model, 1)


def test_an_interruption_of_a_chain_prints_no_traceback(capfd, monkeypatch):
    """emcee's own wrapper of a density prints one (found by the kill campaign)."""
    density = posterior_density(make_model(2))

    def interrupted(_density, _places):
        raise KeyboardInterrupt

    monkeypatch.setattr(type(density), "__call__", interrupted)
    with pytest.raises(KeyboardInterrupt):
        run_chain(density, np.random.SeedSequence(1), 3, 100)
    assert capfd.readouterr() == ("", "")


def test_one_walker_count_fits_all_dimensions():
    density = posterior_density(make_model(2))
    chain = run_chain(density, np.random.SeedSequence(1), 3, 20)
    assert chain.walkers == 4 * density.dimensions
