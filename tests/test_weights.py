"""Least-variance weights of the voltages."""

from dataclasses import replace

import numpy as np
import pytest
from hand_model import PLANCK, make_model, with_input

from hdetermine.inference import measurement
from hdetermine.inference import weights as w
from hdetermine.inference.measurement import planck_J_s


def test_log_sensitivities_are_the_derivatives_of_the_measurement_equation():
    model = make_model(5, scatter_seed=1)
    estimates = measurement.estimates(model)
    analytic = w.log_sensitivities(model, model.reading_deg)
    for column, quantity in enumerate(model.inputs):
        step = 1e-3 * quantity.standard_uncertainty
        shifted = [estimates.copy(), estimates.copy()]
        shifted[0][column] += step
        shifted[1][column] -= step
        up, down = (
            measurement.cutoff_wavelength_pm(model, x) * measurement.peak_voltage_kV(model, x)
            for x in shifted
        )
        numerical = (np.log(up) - np.log(down)) / (2.0 * step)
        scale = np.abs(numerical).max() + 1e-6
        np.testing.assert_allclose(analytic[:, column], numerical, atol=1e-5 * scale)


def test_gradient_of_h_matches_differences():
    model = make_model(5, scatter_seed=2)
    estimates = measurement.estimates(model)
    gradient = w.planck_gradient(model)
    column = [q.name for q in model.inputs].index(measurement.GAIN)
    step = np.zeros(len(estimates))
    step[column] = 1e-4
    change = planck_J_s(model, estimates + step) - planck_J_s(model, estimates - step)
    assert gradient[column] == pytest.approx(change / 2e-4, rel=1e-6)


def test_independent_values_get_inverse_variances():
    variances = np.array([1.0, 4.0, 0.25])
    expected = (1.0 / variances) / np.sum(1.0 / variances)
    np.testing.assert_allclose(w.least_variance_weights(np.diag(variances)), expected)


def test_weights_solve_the_normal_equations():
    rng = np.random.default_rng(5)
    root = rng.normal(size=(6, 9))
    covariance = root @ root.T
    direct = np.linalg.solve(covariance, np.ones(6))
    np.testing.assert_allclose(w.least_variance_weights(covariance), direct / direct.sum())


@pytest.mark.parametrize(
    ("covariance", "expected"),
    [
        (np.zeros((4, 4)), np.full(4, 0.25)),
        (np.ones((3, 3)), np.full(3, 1 / 3)),  # one common error: nothing tells them apart
        (np.array([[2.5]]), np.ones(1)),
        (np.diag([0.0, 1.0, 1.0]), np.array([1.0, 0.0, 0.0])),  # an exact value takes all
        (np.diag([0.0, 0.0, 1.0]), np.array([0.5, 0.5, 0.0])),
    ],
)
def test_singular_covariances(covariance, expected):
    np.testing.assert_allclose(w.least_variance_weights(covariance), expected, atol=1e-9)


def test_a_large_common_error_does_not_spoil_the_weights():
    variances = np.array([1.0, 4.0, 0.25])
    expected = w.least_variance_weights(np.diag(variances))
    buried = np.diag(variances) + 1e10
    np.testing.assert_allclose(w.least_variance_weights(buried), expected, rtol=1e-4)


def test_common_relative_error_does_not_drag_the_mean_below_its_values():
    # Peelle's puzzle: two values with a large common relative error. Weights from derivatives
    # at the measured values put the mean outside both.
    model = make_model(2, counting_deg=0.15)
    model = with_input(model, measurement.GAIN, standard_uncertainty=0.2)
    model = replace(model, reading_deg=model.reading_deg + np.array([0.4, -0.2]))
    model = w.with_gls_weights(model)
    single = w.single_planck_J_s(model)
    mean = planck_J_s(model, measurement.estimates(model))
    assert single.min() < mean < single.max()
    assert np.all(model.weights > 0.0)


def test_a_cutoff_that_lies_low_by_chance_does_not_look_more_precise():
    # Two scans of one voltage differ by chance: the relation expects the same of both.
    model = make_model(2)
    displayed = np.full(2, 25.0)
    model = replace(model, displayed_kV=displayed, reading_deg=np.array([6.5, 7.3]))
    np.testing.assert_allclose(w.gls_weights(model), [0.5, 0.5], atol=0.005)


def test_weights_and_mean_of_a_scattered_run():
    model = make_model(9, scatter_seed=3)
    assert model.weights.sum() == pytest.approx(1.0, abs=1e-12)
    mean = planck_J_s(model, measurement.estimates(model))
    assert mean == pytest.approx(PLANCK, rel=0.01)
    # No other weights do better under the same covariance.
    sensitivities = w.log_sensitivities(model, model.reading_deg)
    covariance = sensitivities @ w.input_covariance(model) @ sensitivities.T
    best = w.least_variance_weights(covariance)
    even = np.full(9, 1 / 9)
    assert best @ covariance @ best <= even @ covariance @ even


def test_single_scan():
    np.testing.assert_array_equal(w.gls_weights(make_model(1)), [1.0])


def test_without_any_uncertainty_all_voltages_count_alike():
    model = make_model(4)
    exact = replace(model, inputs=tuple(q.with_uncertainty(0.0) for q in model.inputs))
    np.testing.assert_allclose(w.gls_weights(exact), np.full(4, 0.25))
