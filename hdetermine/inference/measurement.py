"""The measurement equation: h from the inputs of the budget, and the cutoffs from h.

One equation serves all three routes. With the peak accelerating energy

    E_i/e = (g U_i + o + r_i)(1 + s) + phi,

and the wavelength at the cutoff

    lambda_i = 2 d(T) (1 - refraction) sin(theta_i - z),

each voltage gives h_i = (e/c) lambda_i E_i/e (Duane and Hunt 1915), and h is their weighted
mean. `theta_i` is the reading that the edge fit found, corrected to first order for every input
that the fit had to assume.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hdetermine.physics.constants import PLANCK_PER_SLOPE
from hdetermine.records.results import MeasurementModel

FloatArray = NDArray[np.float64]

GAIN = "tube.voltage.gain"
OFFSET = "tube.voltage.offset_kV"
RIPPLE = "tube.voltage.ripple"
WORK_FUNCTION = "tube.cathode_work_function_eV"
SPACING = "crystal.spacing_pm"
TEMPERATURE = "crystal.temperature_C"
EXPANSION = "crystal.expansion_per_K"
REFRACTION = "crystal.refraction"
ZERO = "goniometer.zero_deg"
RESOLUTION = "goniometer.resolution_deg"
KERNEL = "goniometer.kernel_triangular_fraction"
DEAD_TIME = "counter.dead_time_us"
EXCESS = "continuum.near_limit_excess"
EXCESS_ENERGY = "continuum.near_limit_energy_keV"
WAVELENGTH_SCALE = "lines.wavelength_scale"


def counting_name(scan: str) -> str:
    """Name of the input that carries the counting statistics of one cutoff, degrees."""
    return f"scan.{scan}.counting_deg"


def window_name(scan: str) -> str:
    """Name of the input that carries the spread between fit windows, degrees."""
    return f"scan.{scan}.window_deg"


def background_name(scan: str) -> str:
    """Name of the input that carries the choice of background shape, degrees."""
    return f"scan.{scan}.background_deg"


def scatter_name(scan: str) -> str:
    """Name of the input that carries scatter between scans beyond all others, degrees."""
    return f"scan.{scan}.scatter_deg"


def voltage_name(scan: str) -> str:
    """Name of the input that carries the repeatability of the voltage, kV."""
    return f"scan.{scan}.voltage_kV"


def required_inputs(scans: tuple[str, ...]) -> list[str]:
    """Names of the inputs without which `planck_J_s` is undefined."""
    common = [GAIN, OFFSET, RIPPLE, WORK_FUNCTION]
    common += [SPACING, TEMPERATURE, EXPANSION, REFRACTION, ZERO]
    return common + [voltage_name(scan) for scan in scans]


def estimates(model: MeasurementModel) -> FloatArray:
    """Estimates of the inputs, shape (m,)."""
    return np.array([quantity.value for quantity in model.inputs])


def _numpy_sine(angle: Any) -> Any:
    return np.sin(angle)


def peak_voltage_kV(model: MeasurementModel, inputs: Any) -> Any:
    """Peak accelerating energy over e, work function included, kV.

    Parameters
    ----------
    model : MeasurementModel
        With n scans and m inputs.
    inputs : array, shape (m,) or (m, draws)
        Values of the inputs: floats, or numbers with uncertainty as objects.

    Returns
    -------
    array, shape (n,) or (n, draws)
    """
    index = {quantity.name: i for i, quantity in enumerate(model.inputs)}
    own = np.array([index[voltage_name(scan)] for scan in model.scans])
    displayed = model.displayed_kV.reshape((-1,) + (1,) * (np.ndim(inputs) - 1))
    supplied = inputs[index[GAIN]] * displayed + inputs[index[OFFSET]] + inputs[own]
    return supplied * (1.0 + inputs[index[RIPPLE]]) + inputs[index[WORK_FUNCTION]] * 1e-3


def cutoff_wavelength_pm(
    model: MeasurementModel, inputs: Any, sine: Callable[[Any], Any] = _numpy_sine
) -> Any:
    """Cutoff wavelengths, pm; shapes as in `peak_voltage_kV`.

    `sine` takes radians; pass ``uncertainties.unumpy.sin`` for numbers with uncertainty.
    """
    index = {quantity.name: i for i, quantity in enumerate(model.inputs)}
    reference = estimates(model).reshape((-1,) + (1,) * (np.ndim(inputs) - 1))
    fitted = model.reading_deg.reshape((-1,) + (1,) * (np.ndim(inputs) - 1))
    reading = fitted + np.dot(model.responses_deg, inputs - reference)
    warmth = inputs[index[TEMPERATURE]] - model.reference_temperature_C
    spacing = inputs[index[SPACING]] * (1.0 + inputs[index[EXPANSION]] * warmth)
    grating = 2.0 * spacing * (1.0 - inputs[index[REFRACTION]])
    return grating * sine((reading - inputs[index[ZERO]]) * (np.pi / 180.0))


def planck_J_s(
    model: MeasurementModel, inputs: Any, sine: Callable[[Any], Any] = _numpy_sine
) -> Any:
    """Return h from one set, or many sets, of input values, J s.

    Parameters
    ----------
    model : MeasurementModel
        With n scans and m inputs.
    inputs : array, shape (m,) or (m, draws)
        Values of the inputs.
    sine : callable
        See `cutoff_wavelength_pm`.

    Returns
    -------
    float, number with uncertainty, or array of shape (draws,)
    """
    product = cutoff_wavelength_pm(model, inputs, sine) * peak_voltage_kV(model, inputs)
    return np.dot(model.weights, product) * PLANCK_PER_SLOPE


def predicted_reading_deg(
    model: MeasurementModel, planck: FloatArray, inputs: FloatArray
) -> FloatArray:
    """Where the edge fit should have found the cutoffs, for given h and inputs, degrees.

    The inverse of `planck_J_s`, voltage by voltage: at the returned reading the scan gives
    back exactly `planck`.

    Parameters
    ----------
    model : MeasurementModel
        With n scans and m inputs.
    planck : ndarray, shape (draws,)
        Values of h, J s.
    inputs : ndarray, shape (m, draws)
        Values of the inputs.

    Returns
    -------
    ndarray, shape (n, draws)
        Readings; nan where the wavelength is beyond the crystal's reach.
    """
    index = {quantity.name: i for i, quantity in enumerate(model.inputs)}
    wavelength = planck / PLANCK_PER_SLOPE / peak_voltage_kV(model, inputs)
    warmth = inputs[index[TEMPERATURE]] - model.reference_temperature_C
    spacing = inputs[index[SPACING]] * (1.0 + inputs[index[EXPANSION]] * warmth)
    sine = wavelength / (2.0 * spacing * (1.0 - inputs[index[REFRACTION]]))
    with np.errstate(invalid="ignore"):
        true_angle = np.degrees(np.arcsin(sine))
    shift = model.responses_deg @ (inputs - estimates(model)[:, np.newaxis])
    return np.asarray(true_angle + inputs[index[ZERO]] - shift)
