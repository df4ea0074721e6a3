"""Draws of the inputs of h, and where they leave the measurement equation undefined."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hdetermine.budget.distributions import draw, support
from hdetermine.errors import InputError
from hdetermine.inference import measurement
from hdetermine.physics.constants import PLANCK_PER_SLOPE
from hdetermine.records.results import MeasurementModel

FloatArray = NDArray[np.float64]

# An unbounded distribution counts as reaching so many standard uncertainties.
REACH = 5.0


def check_support(model: MeasurementModel) -> None:
    """Refuse a spacing whose distribution reaches zero.

    Raises
    ------
    InputError
        If it does: within its bounds, or within five standard uncertainties.
    """
    for quantity in model.inputs:
        if quantity.name != measurement.SPACING:
            continue
        lowest = support(quantity)[0]
        if math.isinf(lowest):
            lowest = quantity.value - REACH * quantity.standard_uncertainty
        if lowest <= 0.0:
            raise InputError(
                f"{quantity.name}: the {quantity.distribution} distribution around "
                f"{quantity.value:g} {quantity.unit} reaches d <= 0, where h is not defined; "
                "state a smaller uncertainty."
            )


def split_normal(lower: float, upper: float, rng: np.random.Generator, draws: int) -> FloatArray:
    """Draw deviations from the mode of a split normal distribution.

    Parameters
    ----------
    lower, upper : float
        Standard deviations of the two halves; the mode divides the probability as
        lower : upper, so that the density is continuous.
    rng : numpy.random.Generator
    draws : int

    Returns
    -------
    ndarray, shape (draws,)
    """
    size = np.abs(rng.standard_normal(draws))
    above = rng.random(draws) * (lower + upper) < upper
    return np.asarray(np.where(above, upper * size, -lower * size))


def cutoff_sides(model: MeasurementModel) -> FloatArray:
    """Lower and upper standard deviation of each cutoff from its counts, degrees, shape (n, 2).

    The two sides of the likelihood where both are known; else the standard uncertainty of the
    counting input on both sides; zero where that input has none.
    """
    u = {quantity.name: quantity.standard_uncertainty for quantity in model.inputs}
    counting = np.array([u.get(measurement.counting_name(scan), 0.0) for scan in model.scans])
    known = np.all(np.isfinite(model.skew) & (model.skew > 0.0), axis=1) & (counting > 0.0)
    even = np.repeat(counting[:, np.newaxis], 2, axis=1)
    return np.asarray(np.where(known[:, np.newaxis], model.skew, even))


def draw_inputs(model: MeasurementModel, rng: np.random.Generator, draws: int) -> FloatArray:
    """Draw all inputs of h, shape (m, draws).

    Each from its own distribution, except the counting statistics of each cutoff: those follow
    the two sides of the likelihood of that cutoff, a split normal distribution.
    """
    index = {quantity.name: i for i, quantity in enumerate(model.inputs)}
    values = draw(model.inputs, model.correlation, rng, draws)
    for scan, (lower, upper) in zip(model.scans, cutoff_sides(model), strict=True):
        row = index.get(measurement.counting_name(scan))
        if row is not None and lower > 0.0 and np.count_nonzero(model.correlation[row]) == 1:
            values[row] = model.inputs[row].value + split_normal(lower, upper, rng, draws)
    return values


def planck_draws(model: MeasurementModel, values: Any) -> FloatArray:
    """Evaluate h for draws of the inputs, J s, shape (draws,).

    Raises
    ------
    InputError
        If some draws leave no voltage or no angle.
    """
    peak = measurement.peak_voltage_kV(model, values)
    wavelength = measurement.cutoff_wavelength_pm(model, values)
    for array, what, where in (
        (peak, "tube voltage", "tube.voltage"),
        (wavelength, "cutoff angle", "goniometer.zero_deg, crystal or the counting statistics"),
    ):
        lowest = array.min(axis=1)
        if not np.all(lowest > 0.0):
            scan = model.scans[int(np.argmin(lowest))]
            raise InputError(
                f"The {what} of scan {scan} reaches zero within the uncertainties of {where}; "
                "state smaller ones, or leave the scan out."
            )
    return np.asarray(model.weights @ (wavelength * peak)) * PLANCK_PER_SLOPE
