"""Derivatives of a measurement function of named inputs.

First derivatives are carried through the function by the `uncertainties` package wherever the
function accepts its numbers, and taken by central differences where it does not.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray
from uncertainties import UFloat, ufloat

from hdetermine.errors import InputError
from hdetermine.records.quantity import Quantity

FloatArray = NDArray[np.float64]
MeasurementFunction = Callable[[Any], Any]

# Steps in units of the standard uncertainty: far above rounding, far below the curvature.
_FIRST_STEP = 0.01
_HIGHER_STEP = 0.1


def evaluate(model: MeasurementFunction, values: Any) -> FloatArray:
    """Call a measurement function and return its outputs as an array of floats, shape (k,).

    Raises
    ------
    InputError
        If the function is not defined there.
    """
    with np.errstate(all="ignore"):
        result = np.atleast_1d(np.asarray(model(values), dtype=float))
    if not np.all(np.isfinite(result)):
        raise InputError(
            "The measurement function is not defined at the estimates of its inputs, or within "
            "their uncertainty; check the values."
        )
    return np.asarray(result)


def jacobian(
    model: MeasurementFunction, inputs: Sequence[Quantity]
) -> tuple[FloatArray, FloatArray]:
    """Outputs at the inputs' estimates, and their derivatives by every input.

    Parameters
    ----------
    model : callable
        Takes an array of m values in the order of `inputs`, returns one number or k numbers.
        If it fails with TypeError or AttributeError on numbers with uncertainty (NumPy's sine
        does; `uncertainties.umath` and `uncertainties.unumpy` do not), the derivatives are
        central differences of fourth order with a step of 1 % of each standard uncertainty.
    inputs : sequence of Quantity
        m named inputs.

    Returns
    -------
    values : ndarray, shape (k,)
    derivatives : ndarray, shape (k, m)
    """
    estimates = np.array([quantity.value for quantity in inputs])
    values = evaluate(model, estimates)
    # The budget brings the uncertainties in itself; here each variable has a deviation of one,
    # so that an input without uncertainty keeps its sensitivity.
    variables = [ufloat(quantity.value, 1.0, quantity.name) for quantity in inputs]
    try:
        outputs = np.atleast_1d(np.asarray(model(np.array(variables, dtype=object)))).tolist()
    except (TypeError, AttributeError):
        return values, _central_differences(model, inputs, estimates)
    rows = []
    for output in outputs:
        carried = output.derivatives if isinstance(output, UFloat) else {}
        rows.append([float(carried.get(variable, 0.0)) for variable in variables])
    derivatives = np.array(rows)
    if not np.all(np.isfinite(derivatives)):
        return values, _central_differences(model, inputs, estimates)
    return values, derivatives


def _central_differences(
    model: MeasurementFunction, inputs: Sequence[Quantity], estimates: FloatArray
) -> FloatArray:
    columns = []
    for index, quantity in enumerate(inputs):
        step = _FIRST_STEP * quantity.standard_uncertainty
        if step == 0.0:
            step = 1e-4 * (abs(quantity.value) or 1.0)
        shifted = np.tile(estimates, (4, 1))
        shifted[:, index] += np.array([2.0, 1.0, -1.0, -2.0]) * step
        far_up, up, down, far_down = (evaluate(model, point) for point in shifted)
        columns.append((8.0 * (up - down) - (far_up - far_down)) / (12.0 * step))
    return np.array(columns).T


def second_order_variance(
    model: MeasurementFunction, estimates: FloatArray, directions: FloatArray
) -> float:
    """Next terms of the variance after the linear ones, for one output.

    sum_ij [ f_ij^2 / 2 + f_i f_ijj ] for the function of independent standard normal scores z,
    f(x + L z): for independent inputs this is the expression in the note to JCGM 100:2008,
    5.1.2, with u_i^2 u_j^2 inside; with the columns of a square root of the covariance matrix
    as directions it holds for correlated inputs too. Derivatives are central differences.

    Parameters
    ----------
    model : callable
        As in `jacobian`, with one output.
    estimates : ndarray, shape (m,)
    directions : ndarray, shape (m, r)
        Columns L of a square root of the covariance matrix of the inputs.

    Returns
    -------
    float
        Variance; it may be negative.
    """
    h = _HIGHER_STEP
    steps = [h * column for column in directions.T if np.any(column)]

    def at(point: FloatArray) -> float:
        return float(evaluate(model, point)[0])

    centre = at(estimates)
    total = 0.0
    for i, first in enumerate(steps):
        up, down = at(estimates + first), at(estimates - first)
        slope = (up - down) / (2.0 * h)
        curvature = (up - 2.0 * centre + down) / h**2
        far = at(estimates + 2.0 * first) - at(estimates - 2.0 * first)
        third = (far - 2.0 * (up - down)) / (2.0 * h**3)
        total += 0.5 * curvature**2 + slope * third
        for j, second in enumerate(steps):
            if j == i:
                continue
            plus_up, plus_down = at(estimates + first + second), at(estimates + first - second)
            minus_up, minus_down = at(estimates - first + second), at(estimates - first - second)
            mixed = (plus_up - plus_down - minus_up + minus_down) / (4.0 * h**2)
            # f_jj on both sides of the centre along i; the centre values give the slope.
            change = (plus_up + plus_down - 2.0 * up) - (minus_up + minus_down - 2.0 * down)
            total += 0.5 * mixed**2 + slope * change / (2.0 * h**3)
    return total
