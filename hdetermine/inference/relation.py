"""The inverse relation between cutoff wavelength and voltage.

Each cutoff gives its own h; their mean is taken with the weights that the full covariance of
cutoffs and voltages asks for (`weights`). The same data are then asked whether a line with an
intercept, or another exponent than one, would serve better, whether they scatter more than
their inputs allow (Birge, Phys. Rev. 40, 207, 1932), and what each voltage does to the result.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from hdetermine.errors import InputError
from hdetermine.inference import measurement as names
from hdetermine.inference.line import StraightLine, fit_straight_line
from hdetermine.inference.scatter import least_chi2, log_covariance_of
from hdetermine.inference.shared import SharedTerms
from hdetermine.inference.weights import (
    input_covariance,
    least_variance_weights,
    log_sensitivities,
    single_planck_J_s,
    with_gls_weights,
)
from hdetermine.physics.constants import PLANCK_PER_SLOPE
from hdetermine.records.apparatus import Apparatus
from hdetermine.records.quantity import Quantity
from hdetermine.records.results import (
    AngleScale,
    Cutoff,
    Influence,
    MeasurementModel,
    Relation,
)

FloatArray = NDArray[np.float64]

VOLTAGE_INPUTS = (names.GAIN, names.OFFSET, names.RIPPLE, names.WORK_FUNCTION)


def build_model(
    apparatus: Apparatus, scale: AngleScale, shared: SharedTerms, cutoffs: tuple[Cutoff, ...]
) -> MeasurementModel:
    """Gather the used cutoffs and every input into the measurement model.

    Parameters
    ----------
    apparatus : Apparatus
        For the inputs that neither lines nor edges changed.
    scale : AngleScale
        Zero, spacing and resolution as they stand after the lines.
    shared : SharedTerms
        What the edges share.
    cutoffs : tuple of Cutoff
        Refused ones are passed over.

    Returns
    -------
    MeasurementModel
        With its weights.
    """
    used = tuple(cutoff for cutoff in cutoffs if cutoff.used)
    tube = apparatus.tube
    common = [
        tube.gain,
        tube.offset_kV,
        tube.ripple,
        tube.cathode_work_function_eV,
        *scale.inputs,
        apparatus.crystal.refraction,
        *(() if shared.width_free else (scale.resolution,)),
        *shared.inputs,
        scale.kernel,
        apparatus.counter.dead_time_us,
        apparatus.continuum.near_limit_excess,
        apparatus.continuum.near_limit_energy_keV,
    ]
    own: list[Quantity] = []
    for cutoff in used:
        own += _own_inputs(cutoff, tube.repeatability_kV)
    inputs = tuple(common + own)
    index = {quantity.name: i for i, quantity in enumerate(inputs)}
    correlation = np.eye(len(inputs))
    for joint, block in (
        (scale.inputs, scale.correlation),
        (shared.inputs, shared.correlation()),
    ):
        places = [index[quantity.name] for quantity in joint]
        correlation[np.ix_(places, places)] = block
    responses = np.zeros((len(used), len(inputs)))
    for row, cutoff in enumerate(used):
        for name, response in cutoff.responses_deg.items():
            responses[row, index[name]] = response
        if names.WAVELENGTH_SCALE in index:
            # The zero follows the wavelengths; the true angle is the reading less the zero.
            responses[row, index[names.WAVELENGTH_SCALE]] = -scale.zero_by_wavelength_deg
        for own_name in (names.counting_name, names.window_name, names.background_name):
            responses[row, index[own_name(cutoff.scan)]] = 1.0
    model = MeasurementModel(
        scans=tuple(cutoff.scan for cutoff in used),
        displayed_kV=np.array([cutoff.tube_voltage_kV for cutoff in used]),
        reading_deg=np.array([cutoff.reading_deg for cutoff in used]),
        inputs=inputs,
        correlation=correlation,
        responses_deg=responses,
        weights=np.full(len(used), 1.0 / len(used)),
        skew=np.array([[cutoff.lower_u_deg, cutoff.upper_u_deg] for cutoff in used]),
        reference_temperature_C=apparatus.crystal.reference_temperature_C,
    )
    return with_gls_weights(model)


def _own_inputs(cutoff: Cutoff, repeatability: Quantity) -> list[Quantity]:
    def angle(name: str, symbol: str, u: float) -> Quantity:
        return Quantity(name, symbol, 0.0, u, "°", evaluation="A", common=False)

    return [
        angle(names.counting_name(cutoff.scan), "δθ_c", cutoff.counting_u_deg),
        angle(names.window_name(cutoff.scan), "δθ_w", cutoff.window_u_deg),
        angle(names.background_name(cutoff.scan), "δθ_b", cutoff.background_u_deg),
        replace(repeatability, name=names.voltage_name(cutoff.scan), symbol="δU", common=False),
    ]


def relate(model: MeasurementModel, scatter: float, repeat: float | None) -> Relation:
    """Fit the inverse relation and test it.

    Parameters
    ----------
    model : MeasurementModel
        With n scans and its weights.
    scatter : float
        From `scatter.add_scatter`.
    repeat : float or None
        From `scatter.learn_repeatability`.
    """
    values = names.estimates(model)
    wavelengths = np.asarray(names.cutoff_wavelength_pm(model, values))
    voltages = np.asarray(names.peak_voltage_kV(model, values))
    single = single_planck_J_s(model)
    planck = float(model.weights @ single)
    slope = planck / PLANCK_PER_SLOPE
    sensitivities = log_sensitivities(model, model.reading_deg)
    covariance = input_covariance(model)
    by_voltage = np.array(
        [
            quantity.name in VOLTAGE_INPUTS or quantity.name.endswith(".voltage_kV")
            for quantity in model.inputs
        ]
    )
    optical = np.where(by_voltage, 0.0, sensitivities)
    electrical = np.where(by_voltage, sensitivities, 0.0)
    fitted = slope / voltages
    log_wavelength = optical @ covariance @ optical.T
    log_voltage = electrical @ covariance @ electrical.T
    log_covariance = log_covariance_of(model)
    n = len(model.scans)
    chi2 = least_chi2(np.log(single), log_covariance)
    slope_u = slope * math.sqrt(float(model.weights @ log_covariance @ model.weights))
    free, power = _free_lines(model, wavelengths, voltages, fitted, log_wavelength, log_voltage)
    return Relation(
        scans=model.scans,
        voltages_kV=voltages,
        wavelengths_pm=wavelengths,
        covariance_pm2=np.outer(wavelengths, wavelengths) * log_wavelength,
        voltage_covariance_kV2=np.outer(voltages, voltages) * log_voltage,
        weights=model.weights,
        slope_pm_kV=slope,
        slope_u_pm_kV=slope_u,
        free_slope_pm_kV=math.nan if free is None else free.slope,
        intercept_pm=math.nan if free is None else free.intercept,
        free_covariance=np.full((2, 2), math.nan) if free is None else free.covariance,
        exponent=math.nan if power is None else -power.slope,
        exponent_u=math.nan if power is None else power.slope_u,
        chi2=chi2,
        degrees_of_freedom=n - 1,
        birge_ratio=math.sqrt(chi2 / (n - 1)) if n > 1 else math.nan,
        scatter_deg=scatter,
        influence=_influence(model, log_covariance, planck, planck * slope_u / slope),
        repeat_u_relative=repeat,
    )


def _free_lines(
    model: MeasurementModel,
    wavelengths: FloatArray,
    voltages: FloatArray,
    fitted: FloatArray,
    log_wavelength: FloatArray,
    log_voltage: FloatArray,
) -> tuple[StraightLine | None, StraightLine | None]:
    """Fit the line with an intercept, and the power law as a line of logarithms.

    None where fewer than three voltages differ, or their uncertainties leave no line.
    """
    if len(set(model.displayed_kV.tolist())) < 3:
        return None, None
    inverse = 1.0 / voltages
    try:
        free = fit_straight_line(
            inverse,
            wavelengths,
            np.outer(inverse, inverse) * log_voltage,
            np.outer(fitted, fitted) * log_wavelength,
        )
        power = fit_straight_line(
            np.log(voltages), np.log(wavelengths), log_voltage, log_wavelength
        )
    except InputError:
        # The uncertainties exceed the range of the voltages: the tests are not possible.
        return None, None
    return free, power


def _influence(
    model: MeasurementModel, covariance: FloatArray, planck: float, u: float
) -> tuple[Influence, ...]:
    """Leave each voltage out in turn; `covariance` is that of ln h_i."""
    if len(model.scans) < 2:
        return ()
    single = single_planck_J_s(model)
    found = []
    for i, scan in enumerate(model.scans):
        keep = np.arange(len(model.scans)) != i
        weights = least_variance_weights(covariance[np.ix_(keep, keep)])
        value = float(weights @ single[keep])
        found.append(
            Influence(
                scan=scan,
                tube_voltage_kV=float(model.displayed_kV[i]),
                value_without_J_s=value,
                shift_in_u=(planck - value) / u,
                weight=float(model.weights[i]),
            )
        )
    return tuple(found)
