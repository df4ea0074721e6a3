"""The inverse relation: exact points, its tests, leave-one-out, and the model behind it."""

import math
from dataclasses import replace

import numpy as np
import pytest
from hand_model import PLANCK, make_model, with_input
from iminuit import Minuit
from simulated import five_voltages

from hdetermine.budget.planck import planck_budget
from hdetermine.inference import measurement as names
from hdetermine.inference.anglescale import angle_scale
from hdetermine.inference.birge import birge_ratio
from hdetermine.inference.cutoffs import find_cutoffs
from hdetermine.inference.relation import build_model, relate
from hdetermine.inference.scatter import least_chi2, log_covariance_of
from hdetermine.inference.weights import single_planck_J_s, with_gls_weights
from hdetermine.physics.constants import PLANCK_PER_SLOPE

SLOPE = PLANCK / PLANCK_PER_SLOPE


def with_wavelengths(model, wavelengths):
    """The model with the readings at which these wavelengths (pm) stand."""
    value = {quantity.name: quantity.value for quantity in model.inputs}
    spacing = value[names.SPACING] * (
        1.0 + value[names.EXPANSION] * (value[names.TEMPERATURE] - model.reference_temperature_C)
    )
    sine = wavelengths / (2.0 * spacing * (1.0 - value[names.REFRACTION]))
    reading = np.degrees(np.arcsin(sine)) + value[names.ZERO]
    return with_gls_weights(replace(model, reading_deg=reading))


def voltages_of(model):
    return names.peak_voltage_kV(model, names.estimates(model))


@pytest.mark.parametrize("scans", [1, 2, 3, 9])
def test_exact_points_give_h_exactly(scans):
    relation = relate(make_model(scans), 0.0, None)
    assert relation.slope_pm_kV == pytest.approx(SLOPE, rel=1e-12)
    assert relation.chi2 == pytest.approx(0.0, abs=1e-15)
    assert relation.degrees_of_freedom == scans - 1
    assert relation.weights.sum() == pytest.approx(1.0)
    for one in relation.influence:
        assert one.value_without_J_s == pytest.approx(PLANCK, rel=1e-12)
        assert one.shift_in_u == pytest.approx(0.0, abs=1e-8)
    if scans >= 3:
        assert relation.intercept_pm == pytest.approx(0.0, abs=1e-9)
        assert relation.free_slope_pm_kV == pytest.approx(SLOPE, rel=1e-9)
        assert relation.exponent == pytest.approx(1.0, abs=1e-9)


@pytest.mark.parametrize("intercept", [-0.3, 0.2])
def test_an_exact_intercept_is_found(intercept):
    model = make_model(6)
    model = with_wavelengths(model, SLOPE / voltages_of(model) + intercept)
    relation = relate(model, 0.0, None)
    assert relation.intercept_pm == pytest.approx(intercept, rel=1e-4)
    assert relation.free_slope_pm_kV == pytest.approx(SLOPE, rel=1e-5)
    assert (relation.exponent - 1.0) * intercept < 0.0  # flatter where lambda has an offset


@pytest.mark.parametrize("exponent", [0.96, 1.03])
def test_an_exact_power_is_found(exponent):
    model = make_model(6)
    voltages = voltages_of(model)
    model = with_wavelengths(model, SLOPE / 27.0 * (voltages / 27.0) ** -exponent)
    relation = relate(model, 0.0, None)
    assert relation.exponent == pytest.approx(exponent, rel=1e-6)
    assert 0.0 < relation.exponent_u < 0.1


def test_one_voltage_gives_h_and_tests_nothing():
    relation = relate(make_model(1), 0.0, None)
    assert math.isnan(relation.birge_ratio)
    assert math.isnan(relation.intercept_pm)
    assert math.isnan(relation.exponent)
    assert relation.influence == ()
    assert relation.slope_u_pm_kV > 0.0


def test_two_voltages_scatter_but_make_no_line():
    relation = relate(make_model(2, scatter_seed=4), 0.0, None)
    assert relation.birge_ratio > 0.0
    assert math.isnan(relation.intercept_pm)
    assert np.all(np.isnan(relation.free_covariance))
    assert len(relation.influence) == 2


def test_repeats_of_two_voltages_make_no_line_either():
    model = make_model(4, scatter_seed=4)
    model = replace(model, displayed_kV=np.array([20.0, 20.0, 35.0, 35.0]))
    assert math.isnan(relate(model, 0.0, None).intercept_pm)


def without(model, row):
    """The same run as if one scan had never been made."""
    keep = np.arange(len(model.scans)) != row
    prefix = f"scan.{model.scans[row]}."
    columns = np.array([not quantity.name.startswith(prefix) for quantity in model.inputs])
    rest = replace(
        model,
        scans=tuple(np.array(model.scans)[keep].tolist()),
        displayed_kV=model.displayed_kV[keep],
        reading_deg=model.reading_deg[keep],
        inputs=tuple(q for q, kept in zip(model.inputs, columns, strict=True) if kept),
        correlation=model.correlation[np.ix_(columns, columns)],
        responses_deg=model.responses_deg[np.ix_(keep, columns)],
        weights=np.full(int(keep.sum()), 1.0 / int(keep.sum())),
        skew=model.skew[keep],
    )
    return with_gls_weights(rest)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_leave_one_out_against_literal_refits(seed):
    model = make_model(5, scatter_seed=seed)
    relation = relate(model, 0.0, None)
    planck = relation.slope_pm_kV * PLANCK_PER_SLOPE
    u = planck * relation.slope_u_pm_kV / relation.slope_pm_kV
    for row, one in enumerate(relation.influence):
        rest = relate(without(model, row), 0.0, None)
        value = rest.slope_pm_kV * PLANCK_PER_SLOPE
        assert one.scan == model.scans[row]
        assert one.tube_voltage_kV == model.displayed_kV[row]
        assert one.weight == model.weights[row]
        # The derivatives are taken at the relation of all scans, not of the rest.
        assert one.value_without_J_s == pytest.approx(value, abs=0.02 * u)
        assert one.shift_in_u == pytest.approx((planck - value) / u, abs=0.02)
    assert max(abs(one.shift_in_u) for one in relation.influence) > 0.05


def test_covariances_against_draws_of_the_inputs():
    """Linear propagation of every input, against a sample of 40 000 draws."""
    model = make_model(4, gaussian=True)
    relation = relate(model, 0.0, None)
    rng = np.random.default_rng(9)
    u = np.array([quantity.standard_uncertainty for quantity in model.inputs])
    draws = rng.multivariate_normal(
        names.estimates(model), model.correlation * np.outer(u, u), 40_000, method="cholesky"
    ).T
    wavelengths = names.cutoff_wavelength_pm(model, draws)
    voltages = names.peak_voltage_kV(model, draws)
    for matrix, sample in (
        (relation.covariance_pm2, wavelengths),
        (relation.voltage_covariance_kV2, voltages),
    ):
        seen = np.cov(sample)
        np.testing.assert_allclose(np.diag(matrix), np.diag(seen), rtol=0.05)
        scale = np.sqrt(np.outer(np.diag(seen), np.diag(seen)))
        np.testing.assert_allclose(matrix / scale, seen / scale, atol=0.03)


def test_uncertainty_is_that_of_the_budget():
    model = make_model(5, scatter_seed=2)
    relation = relate(model, 0.0, None)
    budget = planck_budget(model)
    assert relation.slope_pm_kV * PLANCK_PER_SLOPE == pytest.approx(budget.value, rel=1e-12)
    assert relation.slope_u_pm_kV / relation.slope_pm_kV == pytest.approx(
        budget.combined_standard_uncertainty / budget.value, rel=0.02
    )


@pytest.mark.parametrize("seed", range(4))
def test_chi_square_against_a_general_minimiser(seed):
    model = make_model(6, scatter_seed=seed)
    covariance = log_covariance_of(model)
    log_h = np.log(single_planck_J_s(model))
    inverse = np.linalg.inv(covariance)
    # In units of 1e-3 about the first value, for the minimiser's sake.
    origin = log_h[0]

    def cost(mean):
        residual = log_h - origin - 1e-3 * mean
        return float(residual @ inverse @ residual)

    minuit = Minuit(cost, 0.0)
    minuit.errordef = Minuit.LEAST_SQUARES
    minuit.tol = 1e-10
    minuit.migrad()
    relation = relate(model, 0.0, None)
    assert relation.chi2 == pytest.approx(minuit.fval, rel=1e-6)
    assert relation.birge_ratio == pytest.approx(math.sqrt(minuit.fval / 5.0), rel=1e-6)
    # The mean with the least-variance weights is the minimiser's.
    mean = float(model.weights @ log_h)
    assert mean == pytest.approx(origin + 1e-3 * minuit.values[0], abs=1e-6)


def test_birge_ratio_of_independent_values():
    """With nothing in common it is the textbook's (R. T. Birge, Phys. Rev. 40, 207 (1932))."""
    model = make_model(6, scatter_seed=5)
    inputs = tuple(q.with_uncertainty(0.0) if q.common else q for q in model.inputs)
    model = with_gls_weights(replace(model, inputs=inputs))
    variance = np.diag(log_covariance_of(model))
    expected = birge_ratio(np.log(single_planck_J_s(model)), np.sqrt(variance))
    assert relate(model, 0.0, None).birge_ratio == pytest.approx(expected, rel=1e-6)


def test_a_common_error_leaves_chi_square_alone():
    model = make_model(6, scatter_seed=5)
    before = relate(model, 0.0, None).chi2
    loose = with_input(model, names.GAIN, standard_uncertainty=0.05)
    assert relate(with_gls_weights(loose), 0.0, None).chi2 == pytest.approx(before, rel=1e-3)


def test_least_chi2_of_a_covariance():
    """Two values, hand-worked: (a - b)^2 over the variance of their difference."""
    covariance = np.array([[4.0, 1.0], [1.0, 2.0]])
    assert least_chi2(np.array([3.0, 1.0]), covariance) == pytest.approx(4.0 / (4 + 2 - 2))
    assert least_chi2(np.array([2.0]), np.array([[3.0]])) == pytest.approx(0.0)


def test_what_was_learnt_is_carried():
    relation = relate(make_model(3), 0.021, 0.003)
    assert relation.scatter_deg == 0.021
    assert relation.repeat_u_relative == 0.003


@pytest.fixture(scope="module")
def stages():
    run, _ = five_voltages()
    scale, shared, cutoffs = find_cutoffs(run, angle_scale(run))
    return run, scale, shared, cutoffs


def test_model_of_a_run(stages):
    run, scale, shared, cutoffs = stages
    refused = (replace(cutoffs[0], used=False, reason="for this test"), *cutoffs[1:])
    model = build_model(run.apparatus, scale, shared, refused)
    assert model.scans == tuple(cutoff.scan for cutoff in cutoffs[1:])
    every = [quantity.name for quantity in model.inputs]
    assert len(set(every)) == len(every)
    assert set(names.required_inputs(model.scans)) <= set(every)
    assert not any("u22.5" in name for name in every)
    column = {name: i for i, name in enumerate(every)}
    for row, cutoff in enumerate(refused[1:]):
        for name, response in cutoff.responses_deg.items():
            assert model.responses_deg[row, column[name]] == response
        for own, u in (
            (names.counting_name, cutoff.counting_u_deg),
            (names.window_name, cutoff.window_u_deg),
            (names.background_name, cutoff.background_u_deg),
        ):
            at = column[own(cutoff.scan)]
            assert model.inputs[at].standard_uncertainty == u
            assert not model.inputs[at].common
            assert np.flatnonzero(model.responses_deg[:, at]).tolist() == [row]
        repeat = model.inputs[column[names.voltage_name(cutoff.scan)]]
        assert repeat.standard_uncertainty == 0.02
    # Wavelengths of the model are those of the cutoffs.
    wavelengths = names.cutoff_wavelength_pm(model, names.estimates(model))
    np.testing.assert_allclose(wavelengths, [c.wavelength_pm for c in cutoffs[1:]], rtol=1e-6)


def test_correlations_of_a_run(stages):
    run, scale, shared, cutoffs = stages
    model = build_model(run.apparatus, scale, shared, cutoffs)
    every = [quantity.name for quantity in model.inputs]
    for inputs, block in (
        (scale.inputs, scale.correlation),
        (shared.inputs, shared.correlation()),
    ):
        places = [every.index(quantity.name) for quantity in inputs]
        np.testing.assert_allclose(model.correlation[np.ix_(places, places)], block)
    np.testing.assert_allclose(model.correlation, model.correlation.T)
    assert np.linalg.eigvalsh(model.correlation)[0] > -1e-9


def test_reference_wavelengths_act_through_the_zero(stages):
    """Longer lines in the table: their angles are larger, the zero smaller, h larger."""
    run, scale, shared, cutoffs = stages
    model = build_model(run.apparatus, scale, shared, cutoffs)
    values = names.estimates(model)
    at = [quantity.name for quantity in model.inputs].index(names.WAVELENGTH_SCALE)
    moved = values.copy()
    moved[at] += 1e-4
    ratio = names.planck_J_s(model, moved) / names.planck_J_s(model, values) - 1.0
    # The zero moves by -0.0001 x 7.3 degrees, the cutoffs of some 4 degrees by that.
    assert scale.zero_by_wavelength_deg < 0.0
    assert 5e-5 < ratio < 4e-4


def test_a_width_that_the_edges_found_stands_once(stages):
    run, scale, shared, cutoffs = stages
    width = replace(scale.resolution, name=names.RESOLUTION)
    free = replace(
        shared,
        inputs=(width, *shared.inputs),
        covariance=np.diag([width.standard_uncertainty**2, *np.diag(shared.covariance)]),
    )
    model = build_model(run.apparatus, scale, free, cutoffs)
    assert [quantity.name for quantity in model.inputs].count(names.RESOLUTION) == 1
