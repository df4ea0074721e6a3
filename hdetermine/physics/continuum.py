"""The thick-target continuum close to its short-wavelength limit.

With x = lambda/lambda_min - 1 the photon number per unit wavelength is, after Kramers (Phil.
Mag. 46, 836, 1923), proportional to x/(1 + x)^2 from x = 0 on. Real targets rise faster in the
first keV, because electrons near the surface have not yet been scattered back out; the ratio to
Kramers' law is taken as

    1 + a exp(-(E0 - E)/eps),    (E0 - E)/E0 = x/(1 + x),

with a and eps inputs of the measurement. Kulenkampff (Ann. Phys. 69, 548, 1922) described the
same excess as a small step at the limit. What varies slowly (transmission, crystal, counter) is
left to a smooth factor of the fit. Nothing here needs the Planck constant: the energy at the
limit comes from the tube voltage.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]


def rising_continuum(
    excess_wavelength: FloatArray, excess: float, steepness: float
) -> tuple[FloatArray, FloatArray]:
    """Continuum above its limit, and its derivative.

    Parameters
    ----------
    excess_wavelength : ndarray
        x = lambda/lambda_min - 1, not negative.
    excess : float
        a, relative excess over Kramers' law at the limit.
    steepness : float
        E0/eps, energy at the limit over the energy in which the excess fades.

    Returns
    -------
    value, derivative : ndarray
        x/(1+x)^2 (1 + a exp(-steepness x/(1+x))) and its derivative with respect to x.
    """
    x = excess_wavelength
    inverse = 1.0 / (1.0 + x)
    square = inverse * inverse
    bump = excess * np.exp(-steepness * x * inverse)
    kramers = x * square
    value = kramers * (1.0 + bump)
    derivative = square * (1.0 - 2.0 * x * inverse) * (1.0 + bump)
    derivative -= kramers * bump * steepness * square
    return value, derivative
