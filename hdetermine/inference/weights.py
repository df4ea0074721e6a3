"""Weights of the voltages: the mean of the single values of h with the smallest variance.

Every voltage gives its own h_i. Their logarithms have the covariance C = J V J^T, with V the
covariance of the inputs and J the derivatives of ln h_i, and the weights minimise w^T C w with
sum w = 1 (generalised least squares). Two precautions: logarithms, so that a relative error
common to all voltages has the same derivative everywhere; and J taken at the *fitted* cutoffs,
not at the measured ones, so that a cutoff that happens to lie low does not look more precise
than its neighbours. Without them common errors pull the mean below all its values (R. W.
Peelle, 1987; G. D'Agostini, Nucl. Instrum. Methods A 346, 306 (1994)).
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from hdetermine.inference import measurement
from hdetermine.physics.constants import PLANCK_PER_SLOPE
from hdetermine.records.results import MeasurementModel

FloatArray = NDArray[np.float64]

_ITERATIONS = 20
_SETTLED = 1e-8
_RESOLVED = 1e-13


def input_covariance(model: MeasurementModel) -> FloatArray:
    """Covariance matrix of the inputs, shape (m, m)."""
    u = np.array([quantity.standard_uncertainty for quantity in model.inputs])
    return np.asarray(model.correlation * np.outer(u, u))


def single_planck_J_s(model: MeasurementModel) -> FloatArray:
    """Return h from each voltage alone, at the estimates of the inputs, shape (n,), J s."""
    values = measurement.estimates(model)
    product = measurement.cutoff_wavelength_pm(model, values) * measurement.peak_voltage_kV(
        model, values
    )
    return np.asarray(product * PLANCK_PER_SLOPE)


def log_per_degree(model: MeasurementModel, reading_deg: FloatArray) -> FloatArray:
    """Change of ln h_i per degree of the cutoff's reading, shape (n,)."""
    zero = next(q.value for q in model.inputs if q.name == measurement.ZERO)
    return np.asarray(np.pi / 180.0 / np.tan(np.radians(reading_deg - zero)))


def log_sensitivities(model: MeasurementModel, reading_deg: FloatArray) -> FloatArray:
    """Derivatives of ln h_i by every input, at given readings of the cutoffs.

    Parameters
    ----------
    model : MeasurementModel
        With n scans and m inputs.
    reading_deg : ndarray, shape (n,)
        Where on the scale the derivatives are taken: measured or fitted readings.

    Returns
    -------
    ndarray, shape (n, m)
        Per unit of each input.
    """
    index = {quantity.name: i for i, quantity in enumerate(model.inputs)}
    value = {quantity.name: quantity.value for quantity in model.inputs}
    supplied = (
        value[measurement.GAIN] * model.displayed_kV
        + value[measurement.OFFSET]
        + np.array([value[measurement.voltage_name(scan)] for scan in model.scans])
    )
    swing = 1.0 + value[measurement.RIPPLE]
    peak = supplied * swing + value[measurement.WORK_FUNCTION] * 1e-3
    warmth = value[measurement.TEMPERATURE] - model.reference_temperature_C
    stretch = 1.0 + value[measurement.EXPANSION] * warmth
    per_degree = log_per_degree(model, reading_deg)

    result = per_degree[:, np.newaxis] * model.responses_deg
    result[:, index[measurement.ZERO]] -= per_degree
    result[:, index[measurement.SPACING]] += 1.0 / value[measurement.SPACING]
    result[:, index[measurement.TEMPERATURE]] += value[measurement.EXPANSION] / stretch
    result[:, index[measurement.EXPANSION]] += warmth / stretch
    result[:, index[measurement.REFRACTION]] -= 1.0 / (1.0 - value[measurement.REFRACTION])
    result[:, index[measurement.GAIN]] += model.displayed_kV * swing / peak
    result[:, index[measurement.OFFSET]] += swing / peak
    result[:, index[measurement.RIPPLE]] += supplied / peak
    result[:, index[measurement.WORK_FUNCTION]] += 1e-3 / peak
    for row, scan in enumerate(model.scans):
        result[row, index[measurement.voltage_name(scan)]] += swing / peak[row]
    return np.asarray(result)


def planck_gradient(model: MeasurementModel) -> FloatArray:
    """Derivatives of h by every input with the weights held, shape (m,), J s per unit."""
    weighted = model.weights * single_planck_J_s(model)
    return np.asarray(weighted @ log_sensitivities(model, model.reading_deg))


def least_variance_weights(covariance: FloatArray) -> FloatArray:
    """Weights of a mean that minimise its variance; they sum to one.

    Parameters
    ----------
    covariance : ndarray, shape (n, n)
        Positive semi-definite; singular ones are allowed.

    Returns
    -------
    ndarray, shape (n,)
        Where several sets of weights do equally well, the most even one: all equal if the
        values differ by nothing that the covariance can see.

    Notes
    -----
    With w = 1/n + B z, B an orthonormal basis of the weights' differences, a component common
    to all values drops out of B^T C before anything is inverted; so a large common uncertainty
    does not spoil the weights, and directions without resolvable variance are left alone.
    """
    n = len(covariance)
    even = np.full(n, 1.0 / n)
    total = float(np.trace(covariance))
    if n == 1 or not total > 0.0:
        return even
    differences = np.linalg.qr(np.column_stack([np.ones(n), np.eye(n)[:, : n - 1]]))[0][:, 1:]
    inner = differences.T @ covariance @ differences
    values, vectors = np.linalg.eigh(inner)
    slope = vectors.T @ (differences.T @ (covariance @ even))
    resolved = values > _RESOLVED * total
    step = np.zeros(n - 1)
    step[resolved] = slope[resolved] / values[resolved]
    return np.asarray(even - differences @ (vectors @ step))


def gls_weights(model: MeasurementModel) -> FloatArray:
    """Weights of the voltages from the inputs' covariance, at the fitted relation.

    Parameters
    ----------
    model : MeasurementModel
        Its own weights are not used.

    Returns
    -------
    ndarray, shape (n,)
        They sum to one; some may be negative where common errors dominate.
    """
    covariance = input_covariance(model)
    inputs = measurement.estimates(model)[:, np.newaxis]
    single = single_planck_J_s(model)
    reading = model.reading_deg
    weights = np.full(len(single), 1.0 / len(single))
    for _ in range(_ITERATIONS):
        sensitivities = log_sensitivities(model, reading)
        previous = weights
        weights = least_variance_weights(sensitivities @ covariance @ sensitivities.T)
        fitted = measurement.predicted_reading_deg(model, np.array([weights @ single]), inputs)[
            :, 0
        ]
        if not np.all(np.isfinite(fitted)):
            break
        reading = fitted
        if np.max(np.abs(weights - previous)) < _SETTLED:
            break
    return weights


def with_gls_weights(model: MeasurementModel) -> MeasurementModel:
    """Return the same model with the weights that its inputs ask for."""
    return replace(model, weights=gls_weights(model))
