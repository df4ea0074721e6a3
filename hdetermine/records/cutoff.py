"""The cutoff of one scan, with the fits behind it."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class WindowFit:
    """One fit of the family that a cutoff is averaged over (window, background, shape)."""

    from_deg: float
    to_deg: float
    background_terms: int
    continuum_terms: int
    lines_modelled: int
    reading_deg: float
    reading_u_deg: float
    deviance: float
    degrees_of_freedom: int
    weight: float


@dataclass(frozen=True, slots=True, eq=False)
class FittedCurve:
    """The heaviest fit of a cutoff, point by point, for pictures.

    Recorded counts, so dead time is inside; arrays share the shape (n,). `in_window` marks
    the points that took part in the fit.
    """

    reading_deg: FloatArray
    counts: FloatArray
    expected_counts: FloatArray
    background_counts: FloatArray
    dwell_s: FloatArray
    in_window: NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class Cutoff:
    """The short-wavelength limit of one scan, or the reason why there is none.

    Attributes
    ----------
    scan : str
        Name of the scan.
    tube_voltage_kV : float
        As displayed.
    used : bool
        False for a refused or left-out scan; then `reason` says why and the numbers are nan.
    reading_deg : float
        Cutoff as a goniometer reading, degrees.
    counting_u_deg : float
        Standard uncertainty from counting statistics alone, degrees.
    lower_u_deg, upper_u_deg : float
        The two sides of the asymmetric likelihood (distance to a rise of 1 in the deviance).
    window_u_deg : float
        Spread between the windows of the family, degrees.
    background_u_deg : float
        Spread between the backgrounds of the family, degrees.
    glancing_angle_deg : float
        True glancing angle of the cutoff, degrees.
    wavelength_pm : float
        Cutoff wavelength, pm.
    standard_uncertainty_pm : float
        Of `wavelength_pm`, every input included, pm.
    shape : str
        Name of the continuum shape that was fitted.
    deviance, degrees_of_freedom : float, int
        Of the heaviest fit.
    windows : tuple of WindowFit
        The family, heaviest first.
    fixed_window : WindowFit or None
        The fit of a window that the user fixed (both are reported).
    responses_deg : mapping of str to float
        Change of `reading_deg` per unit of each input (dotted names).
    curve : FittedCurve or None
        The heaviest fit point by point; for a refused scan the counts without a fit.
    remarks : tuple of str
        Remarks of the reader and of the fit.
    """

    scan: str
    tube_voltage_kV: float
    used: bool
    reason: str = ""
    reading_deg: float = math.nan
    counting_u_deg: float = math.nan
    lower_u_deg: float = math.nan
    upper_u_deg: float = math.nan
    window_u_deg: float = math.nan
    background_u_deg: float = math.nan
    glancing_angle_deg: float = math.nan
    wavelength_pm: float = math.nan
    standard_uncertainty_pm: float = math.nan
    shape: str = ""
    deviance: float = math.nan
    degrees_of_freedom: int = 0
    windows: tuple[WindowFit, ...] = ()
    fixed_window: WindowFit | None = None
    responses_deg: Mapping[str, float] = field(default_factory=dict)
    curve: FittedCurve | None = None
    remarks: tuple[str, ...] = ()
