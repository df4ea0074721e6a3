"""The measurement equation: hand-worked values, its inverse, its derivatives."""

import math
from dataclasses import replace

import numpy as np
import pytest
from hand_model import PLANCK, make_model
from uncertainties import ufloat, unumpy

from hdetermine.inference import measurement as m
from hdetermine.inference.weights import planck_gradient


def worked_model():
    """One scan, numbers that can be followed by hand."""
    model = make_model(1)
    values = {
        m.GAIN: 1.01, m.OFFSET: 0.1, m.RIPPLE: 0.002, m.WORK_FUNCTION: 4.5, m.SPACING: 200.0,
        m.TEMPERATURE: 30.0, m.EXPANSION: 3e-5, m.REFRACTION: 1e-4, m.ZERO: 0.2,
    }  # fmt: skip
    inputs = tuple(replace(q, value=values.get(q.name, q.value)) for q in model.inputs)
    return replace(model, inputs=inputs, displayed_kV=np.array([25.0]), reading_deg=np.array([7.2]))


def test_hand_worked():
    """h = (e/c) lambda (g U + o)(1 + s) + phi; e/c = 1.602176634e-19/299792458 C s/m."""
    model = worked_model()
    values = m.estimates(model)
    peak_kV = (1.01 * 25.0 + 0.1) * 1.002 + 0.0045
    assert m.peak_voltage_kV(model, values) == pytest.approx([peak_kV], rel=1e-14)
    spacing = 200.0 * (1.0 + 3e-5 * 10.0) * (1.0 - 1e-4)
    wavelength = 2.0 * spacing * math.sin(math.radians(7.0))
    assert m.cutoff_wavelength_pm(model, values) == pytest.approx([wavelength], rel=1e-14)
    planck = 1.602176634e-19 / 299792458 * wavelength * 1e-12 * peak_kV * 1e3
    assert m.planck_J_s(model, values) == pytest.approx(planck, rel=1e-14)


def test_published_product():
    """h c/e = 1239.841 984 332 pm kV (exact SI constants) gives the SI value of h."""
    model = worked_model()
    values = m.estimates(model)
    product = float(m.cutoff_wavelength_pm(model, values)[0] * m.peak_voltage_kV(model, values)[0])
    assert m.planck_J_s(model, values) * 1239.841984332 / product == pytest.approx(
        6.62607015e-34, rel=1e-12
    )


def test_weights_make_the_mean():
    model = make_model(4, scatter_seed=1)
    values = m.estimates(model)
    single = [m.planck_J_s(replace(model, weights=np.eye(4)[i]), values) for i in range(4)]
    assert m.planck_J_s(model, values) == pytest.approx(float(model.weights @ single), rel=1e-13)
    assert max(single) / min(single) > 1.001


def random_inputs(model, draws, seed=3):
    rng = np.random.default_rng(seed)
    u = np.array([quantity.standard_uncertainty for quantity in model.inputs])
    return m.estimates(model)[:, np.newaxis] + u[:, np.newaxis] * rng.standard_normal(
        (u.size, draws)
    )


def test_many_draws_are_many_single_ones():
    model = make_model(3, scatter_seed=2)
    draws = random_inputs(model, 5)
    whole = m.planck_J_s(model, draws)
    assert whole.shape == (5,)
    for column in range(5):
        assert whole[column] == pytest.approx(m.planck_J_s(model, draws[:, column]), rel=1e-13)


@pytest.mark.parametrize("scans", [1, 4])
def test_predicted_reading_inverts_the_equation(scans):
    """A fit that finds the predicted readings at these inputs gives back h, scan by scan."""
    model = make_model(scans, scatter_seed=1)
    draws = random_inputs(model, 6)
    planck = PLANCK * np.linspace(0.98, 1.02, 6)
    readings = m.predicted_reading_deg(model, planck, draws)
    assert readings.shape == (scans, 6)
    for column in range(6):
        found = replace(model, reading_deg=readings[:, column])
        for row in range(scans):
            alone = replace(found, weights=np.eye(scans)[row])
            assert m.planck_J_s(alone, draws[:, column]) == pytest.approx(planck[column], rel=1e-12)


def test_a_wavelength_beyond_reach_has_no_reading():
    model = make_model(2)
    far = m.predicted_reading_deg(
        model, np.array([PLANCK, 50.0 * PLANCK]), np.tile(m.estimates(model), (2, 1)).T
    )
    assert np.all(np.isfinite(far[:, 0]))
    assert np.all(np.isnan(far[:, 1]))


def test_derivatives_against_a_library_of_numbers_with_uncertainty():
    """Derivatives carried through the whole equation by `uncertainties`, input by input."""
    model = make_model(5, scatter_seed=2)
    numbers = np.array([ufloat(q.value, q.standard_uncertainty) for q in model.inputs])
    planck = m.planck_J_s(model, numbers, unumpy.sin)
    ours = planck_gradient(model)
    for number, quantity, derivative in zip(numbers, model.inputs, ours, strict=True):
        assert planck.derivatives[number] == pytest.approx(
            derivative, rel=1e-9, abs=1e-12 * PLANCK / quantity.standard_uncertainty
        )


def test_responses_shift_the_readings():
    """An input that the edge fit had to assume moves the reading by its response."""
    model = make_model(2)
    values = m.estimates(model)
    at = [q.name for q in model.inputs].index(m.RESOLUTION)
    moved = values.copy()
    moved[at] += 0.01
    shifted = replace(model, reading_deg=model.reading_deg + 0.25 * 0.01)
    assert m.cutoff_wavelength_pm(model, moved) == pytest.approx(
        m.cutoff_wavelength_pm(shifted, values), rel=1e-12
    )


def test_names():
    scans = ("a", "b")
    required = m.required_inputs(scans)
    assert len(set(required)) == len(required) == 11
    assert m.voltage_name("a") == "scan.a.voltage_kV"
    per_scan = {
        name("a") for name in (m.counting_name, m.window_name, m.background_name, m.scatter_name)
    }
    assert per_scan == {
        "scan.a.counting_deg", "scan.a.window_deg", "scan.a.background_deg", "scan.a.scatter_deg",
    }  # fmt: skip
    model = make_model(2)
    assert set(m.required_inputs(model.scans)) <= {q.name for q in model.inputs}
