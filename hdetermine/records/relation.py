"""Cutoff against voltage, and h as a function of named inputs."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hdetermine.records.quantity import Quantity

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Influence:
    """What one voltage does to the result: h without it, and the shift in units of u(h)."""

    scan: str
    tube_voltage_kV: float
    value_without_J_s: float
    shift_in_u: float
    weight: float


@dataclass(frozen=True, slots=True, eq=False)
class Relation:
    """Cutoff wavelength against inverse voltage, fitted with the full covariance.

    Attributes
    ----------
    scans : tuple of str
        Scans that take part, n of them.
    voltages_kV : ndarray, shape (n,)
        Peak accelerating voltages with the work function, best estimates, kV.
    wavelengths_pm : ndarray, shape (n,)
        Cutoffs, pm.
    covariance_pm2 : ndarray, shape (n, n)
        Of the wavelengths, every input included, pm^2.
    voltage_covariance_kV2 : ndarray, shape (n, n)
        Of the voltages, kV^2.
    weights : ndarray, shape (n,)
        Weights of the single values of h; they sum to one (some may be negative).
    slope_pm_kV, slope_u_pm_kV : float
        Of the line through the origin, pm kV.
    free_slope_pm_kV, intercept_pm : float
        Of the line with a free intercept; nan if fewer than three voltages differ.
    free_covariance : ndarray, shape (2, 2)
        Of (slope, intercept).
    exponent, exponent_u : float
        p in lambda proportional to voltage**-p; 1 is expected.
    chi2, degrees_of_freedom : float, int
        Of the line through the origin.
    birge_ratio : float
        sqrt(chi2/degrees_of_freedom) (Birge 1932); nan for a single voltage.
    scatter_deg : float
        Scatter between scans beyond all other inputs, degrees; zero if none is needed.
    stated_birge_ratio : float
        The ratio before that scatter was added.
    influence : tuple of Influence
        Leave-one-out.
    repeat_u_relative : float or None
        Repeatability found from repeated scans of one voltage, relative.
    """

    scans: tuple[str, ...]
    voltages_kV: FloatArray
    wavelengths_pm: FloatArray
    covariance_pm2: FloatArray
    voltage_covariance_kV2: FloatArray
    weights: FloatArray
    slope_pm_kV: float
    slope_u_pm_kV: float
    free_slope_pm_kV: float
    intercept_pm: float
    free_covariance: FloatArray
    exponent: float
    exponent_u: float
    chi2: float
    degrees_of_freedom: int
    birge_ratio: float
    scatter_deg: float = 0.0
    stated_birge_ratio: float = math.nan
    influence: tuple[Influence, ...] = ()
    repeat_u_relative: float | None = None


@dataclass(frozen=True, slots=True, eq=False)
class MeasurementModel:
    """h as a function of named inputs, the edges already fitted.

    This is all that propagation needs: the cutoffs' readings, how they answer to each input,
    and the weights of the voltages.

    Attributes
    ----------
    scans : tuple of str
        n used scans.
    displayed_kV : ndarray, shape (n,)
        Displayed voltages.
    reading_deg : ndarray, shape (n,)
        Cutoff readings at the inputs' estimates.
    inputs : tuple of Quantity
        The m inputs of the budget.
    correlation : ndarray, shape (m, m)
        Between the inputs.
    responses_deg : ndarray, shape (n, m)
        d(reading)/d(input) through the edge fit.
    weights : ndarray, shape (n,)
        Of the voltages; they sum to one.
    skew : ndarray, shape (n, 2)
        Lower and upper one-sigma distance of each cutoff's likelihood, degrees.
    reference_temperature_C : float
        For which the spacing holds.
    """

    scans: tuple[str, ...]
    displayed_kV: FloatArray
    reading_deg: FloatArray
    inputs: tuple[Quantity, ...]
    correlation: FloatArray
    responses_deg: FloatArray
    weights: FloatArray
    skew: FloatArray
    reference_temperature_C: float
