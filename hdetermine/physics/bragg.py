"""Bragg's law with refraction and thermal expansion.

n lambda = 2 d sin(theta) (1 - delta/sin^2(theta)); the refraction term is, for the crystals in
use, almost independent of the wavelength because delta grows with its square (Compton and
Allison, X-Rays in Theory and Experiment, 1935, ch. IX). It is therefore carried as one number
`refraction` = delta/sin^2(theta) in first order, which falls with the square of the order.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]


def spacing_at(
    spacing_pm: float, temperature_C: float, reference_C: float, expansion_per_K: float
) -> float:
    """Spacing at a temperature, pm (linear expansion)."""
    return spacing_pm * (1.0 + expansion_per_K * (temperature_C - reference_C))


def wavelength_pm(
    angle_deg: FloatArray | float, spacing_pm: float, refraction: float = 0.0, order: int = 1
) -> FloatArray:
    """Wavelength selected at a true glancing angle.

    Parameters
    ----------
    angle_deg : array_like
        True glancing angle, degrees.
    spacing_pm : float
        Spacing of the planes at the temperature of the run, pm.
    refraction : float
        delta/sin^2(theta) in first order.
    order : int
        Order of reflection.

    Returns
    -------
    ndarray
        Wavelength, pm.
    """
    sine = np.sin(np.radians(np.asarray(angle_deg, dtype=float)))
    return np.asarray(2.0 * spacing_pm / order * (1.0 - refraction / order**2) * sine)


def glancing_angle_deg(
    wavelength: FloatArray | float, spacing_pm: float, refraction: float = 0.0, order: int = 1
) -> FloatArray:
    """True glancing angle at which a wavelength (pm) is reflected, degrees.

    nan where the wavelength is out of the crystal's reach.
    """
    sine = np.asarray(wavelength, dtype=float) * order
    sine = sine / (2.0 * spacing_pm * (1.0 - refraction / order**2))
    with np.errstate(invalid="ignore"):
        return np.asarray(np.degrees(np.arcsin(sine)))
