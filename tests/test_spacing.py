"""The spacing at its temperature, and what lines tell of it."""

import math
from dataclasses import replace

import numpy as np
import pytest
from simulated import five_voltages

from hdetermine.inference.spacing import (
    crystal_spacing_pm,
    free_fit,
    joint_inputs,
    spacing_gradient,
    spacing_u,
)


def crystal():
    return five_voltages()[0].apparatus.crystal


def test_spacing_at_its_temperature():
    one = crystal()
    warmth = one.temperature_C.value - one.reference_temperature_C
    assert warmth != 0.0
    expected = one.spacing_pm.value * (1.0 + one.expansion_per_K.value * warmth)
    assert crystal_spacing_pm(one) == pytest.approx(expected)
    parts = ("spacing_pm", "temperature_C", "expansion_per_K")
    for part, slope in zip(parts, spacing_gradient(one), strict=True):
        quantity = getattr(one, part)
        step = 1e-3 * abs(quantity.value)
        up = replace(one, **{part: replace(quantity, value=quantity.value + step)})
        relative = crystal_spacing_pm(up) / crystal_spacing_pm(one) - 1.0
        assert slope == pytest.approx(relative / step, rel=2e-3)


def test_joint_inputs_keep_what_is_known_and_add_what_was_learnt():
    """The variance of the relative spacing after the lines is shared out among its inputs."""
    one = crystal()
    gradient = spacing_gradient(one)
    prior = float(np.sum((gradient * spacing_u(one)) ** 2))
    zero = five_voltages()[0].apparatus.goniometer.zero_deg
    for learnt in (1.0, 0.3, 0.01):
        covariance = np.array([[4e-6, 0.4 * math.sqrt(4e-6 * learnt * prior)], [0.0, 0.0]])
        covariance[1] = [covariance[0, 1], learnt * prior]
        inputs, correlation = joint_inputs(one, zero, gradient, covariance, 1e-4)
        u = np.array([2e-3, *(q.standard_uncertainty for q in inputs[1:])])
        whole = correlation * np.outer(u, u)
        towards = np.concatenate([[0.0], gradient])
        assert towards @ whole @ towards == pytest.approx(learnt * prior, rel=1e-9)
        assert whole[0] @ towards == pytest.approx(covariance[0, 1], rel=1e-9)
        moved = sum(
            slope * (q.value - part.value)
            for slope, q, part in zip(
                gradient, inputs[1:], (one.spacing_pm, one.temperature_C, one.expansion_per_K),
                strict=True,
            )
        )  # fmt: skip
        assert moved == pytest.approx(1e-4, rel=1e-9)
        assert np.linalg.eigvalsh(correlation)[0] > -1e-9


def test_an_exact_spacing_stays_exact():
    one = crystal()
    exact = replace(
        one,
        spacing_pm=one.spacing_pm.with_uncertainty(0.0),
        temperature_C=one.temperature_C.with_uncertainty(0.0),
        expansion_per_K=one.expansion_per_K.with_uncertainty(0.0),
    )
    zero = five_voltages()[0].apparatus.goniometer.zero_deg
    inputs, correlation = joint_inputs(
        exact, zero, spacing_gradient(exact), np.diag([1e-6, 0.0]), 0.0
    )
    assert [q.value for q in inputs[1:]] == [
        exact.spacing_pm.value, exact.temperature_C.value, exact.expansion_per_K.value,
    ]  # fmt: skip
    np.testing.assert_array_equal(correlation, np.eye(4))


def test_free_fit():
    """Two lines at different angles solve for zero and spacing; one alone does not."""
    by_spacing, shift, weight = np.array([-10.0, -60.0]), np.array([0.05, 0.02]), np.full(2, 1e6)
    design = np.stack([np.ones(2), by_spacing], axis=1)
    rho, u = free_fit(design, shift, weight)
    assert rho == pytest.approx((0.05 - 0.02) / 50.0)
    assert u == pytest.approx(math.sqrt(2.0) * 1e-3 / 50.0)
    assert free_fit(design[:1], shift[:1], weight[:1]) is None
    near = np.array([[1.0, -10.0], [1.0, -10.02]])
    assert free_fit(near, shift, weight) is None


def test_free_fit_is_widened_by_scatter_about_it():
    by_spacing = np.array([-10.0, -20.0, -40.0, -60.0])
    design = np.stack([np.ones(4), by_spacing], axis=1)
    line = 0.05 - 2e-4 * by_spacing
    weight = np.full(4, 1e6)
    rho, u = free_fit(design, line, weight)
    # Off the line by three standard uncertainties each, without a trend.
    off = 3e-3 * np.array([0.4, -0.8, 0.6, -0.2])
    off = off - design @ np.linalg.lstsq(design, off, rcond=None)[0]
    wide = free_fit(design, line + off, weight)
    chi2 = float(np.sum(off**2 * 1e6))
    assert chi2 / 2.0 > 1.0
    assert wide[0] == pytest.approx(rho, abs=1e-9)
    assert wide[1] == pytest.approx(u * math.sqrt(chi2 / 2.0), rel=1e-6)
