"""Scatter of the single values of h: from repeats, and beyond what the inputs allow.

Repeated scans of one voltage tell how well the supply returns to it. Where all values together
scatter more than their inputs allow (Birge, Phys. Rev. 40, 207, 1932), a further input takes up
the excess.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray
from scipy.stats import chi2 as chi2_distribution

from hdetermine.inference import measurement as names
from hdetermine.inference.weights import (
    input_covariance,
    log_sensitivities,
    single_planck_J_s,
    with_gls_weights,
)
from hdetermine.records.quantity import Quantity
from hdetermine.records.results import MeasurementModel

FloatArray = NDArray[np.float64]

SCATTER_CHANCE = 0.01  # scatter beyond the inputs is added below this chance of its chi-square
REPEAT_CHANCE = 0.05


def learn_repeatability(model: MeasurementModel) -> tuple[MeasurementModel, float | None]:
    """Take the repeatability of the voltage from repeated scans where they show more of it.

    Returns
    -------
    model : MeasurementModel
        With the repeatability raised, if the repeats scatter more than the inputs allow with a
        chance below 5 %.
    relative : float or None
        Scatter between repeats, relative; None without repeats.
    """
    log_h = np.log(single_planck_J_s(model))
    sensitivities = log_sensitivities(model, model.reading_deg)
    independent = np.array([not quantity.common for quantity in model.inputs])
    variance = (sensitivities[:, independent] ** 2) @ (
        np.array([quantity.standard_uncertainty for quantity in model.inputs])[independent] ** 2
    )
    squares, freedom, chi2 = 0.0, 0, 0.0
    for voltage in dict.fromkeys(model.displayed_kV.tolist()):
        group = np.flatnonzero(model.displayed_kV == voltage)
        if group.size > 1:
            deviation = log_h[group] - log_h[group].mean()
            squares += float(np.sum(deviation**2))
            chi2 += float(np.sum(deviation**2 / variance[group]))
            freedom += group.size - 1
    if freedom == 0:
        return model, None
    relative = math.sqrt(squares / freedom)
    if chi2_distribution.sf(chi2, freedom) >= REPEAT_CHANCE:
        return model, relative
    missing = max(relative**2 - float(np.mean(variance)), 0.0)
    voltages = {
        names.voltage_name(scan): kV
        for scan, kV in zip(model.scans, model.displayed_kV.tolist(), strict=True)
    }
    inputs = tuple(
        replace(
            quantity,
            standard_uncertainty=math.hypot(
                quantity.standard_uncertainty, math.sqrt(missing) * voltages[quantity.name]
            ),
            evaluation="A",
            degrees_of_freedom=float(freedom),
            source="repeated scans",
            is_default=False,
        )
        if quantity.name in voltages
        else quantity
        for quantity in model.inputs
    )
    return with_gls_weights(replace(model, inputs=inputs)), relative


def add_scatter(model: MeasurementModel) -> tuple[MeasurementModel, float]:
    """Add an input for scatter between scans that no other input explains.

    The scatter is taken as one of the angle, the same for every scan, as backlash or a badly
    seated crystal would make it, and so large that chi-square comes down to its degrees of
    freedom (R. C. Paule and J. Mandel, J. Res. NBS 87, 377 (1982)); being itself estimated from
    n values it is widened by sqrt((n - 1)/(n - 3)) (O. Bodnar and C. Elster, Metrologia 51, 516
    (2014)). It is added only if chi-square is so large by chance in less than 1 % of cases.

    Returns
    -------
    model : MeasurementModel
        Unchanged, or with inputs ``scan.<name>.scatter_deg``.
    scatter_deg : float
        Its standard uncertainty; zero if none was added.
    """
    n = len(model.scans)
    base = log_covariance_of(model)
    log_h = np.log(single_planck_J_s(model))
    chi2 = least_chi2(log_h, base)
    if n < 3 or chi2_distribution.sf(chi2, n - 1) >= SCATTER_CHANCE:
        return model, 0.0
    zero = next(quantity.value for quantity in model.inputs if quantity.name == names.ZERO)
    per_degree = np.pi / 180.0 / np.tan(np.radians(model.reading_deg - zero))
    extra = np.diag(per_degree**2)
    low, high = 0.0, 25.0
    for _ in range(60):
        middle = 0.5 * (low + high)
        if least_chi2(log_h, base + middle * extra) > n - 1:
            low = middle
        else:
            high = middle
    scatter_deg = math.sqrt(high) * (math.sqrt((n - 1) / (n - 3)) if n > 3 else 2.0)
    own = tuple(
        Quantity(
            names.scatter_name(scan),
            "δθ_s",
            0.0,
            scatter_deg,
            "°",
            evaluation="A",
            common=False,
            source="scatter between scans",
        )
        for scan in model.scans
    )
    m = len(model.inputs)
    correlation = np.eye(m + n)
    correlation[:m, :m] = model.correlation
    widened = replace(
        model,
        inputs=model.inputs + own,
        correlation=correlation,
        responses_deg=np.concatenate([model.responses_deg, np.eye(n)], axis=1),
    )
    return with_gls_weights(widened), scatter_deg


def birge_ratio_of(model: MeasurementModel) -> float:
    """Root of chi-square per degree of freedom of the single values of h; nan for one scan."""
    n = len(model.scans)
    if n < 2:
        return math.nan
    return math.sqrt(
        least_chi2(np.log(single_planck_J_s(model)), log_covariance_of(model)) / (n - 1)
    )


def log_covariance_of(model: MeasurementModel) -> FloatArray:
    """Covariance of ln h_i at the fitted relation."""
    planck = np.array([model.weights @ single_planck_J_s(model)])
    values = names.estimates(model)[:, np.newaxis]
    fitted = names.predicted_reading_deg(model, planck, values)[:, 0]
    reading = fitted if bool(np.all(np.isfinite(fitted))) else model.reading_deg
    sensitivities = log_sensitivities(model, reading)
    return np.asarray(sensitivities @ input_covariance(model) @ sensitivities.T)


def least_chi2(log_h: FloatArray, covariance: FloatArray) -> float:
    """Least chi-square of equal values with a covariance."""
    inverse = np.linalg.pinv(covariance, rcond=1e-14, hermitian=True)
    ones = np.ones_like(log_h)
    mean = float(ones @ inverse @ log_h) / float(ones @ inverse @ ones)
    return float((log_h - mean) @ inverse @ (log_h - mean))
