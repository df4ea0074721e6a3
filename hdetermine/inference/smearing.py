"""The smearing of the spectrometer: a kernel in angle, and integrals with it.

Slits, mosaic spread and the width of a step smear the spectrum. The kernel is a mixture of a
Gaussian and a triangle of the same full width at half maximum; the fraction of the triangle is
an input of the measurement, for the true form is seldom known. Integrals over a spectrum that
starts at a sharp limit are done by Gauss-Legendre quadrature from the limit on, so that they are
smooth functions of the limit.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.polynomial.legendre import leggauss
from numpy.typing import NDArray
from scipy.special import voigt_profile

FloatArray = NDArray[np.float64]

FWHM_PER_SIGMA = 2.0 * math.sqrt(2.0 * math.log(2.0))
_GAUSS_REACH = 4.5  # in sigma: leaves out 7e-6 of the area
_GAUSS_NODES = leggauss(20)
_FLANK_NODES = leggauss(6)


@dataclass(frozen=True, slots=True)
class Kernel:
    """Smearing kernel.

    Attributes
    ----------
    fwhm_deg : float
        Full width at half maximum, degrees.
    triangular_fraction : float
        0 Gaussian, 1 triangular.
    """

    fwhm_deg: float
    triangular_fraction: float

    @property
    def sigma_deg(self) -> float:
        """Standard deviation of the Gaussian part, degrees."""
        return self.fwhm_deg / FWHM_PER_SIGMA

    @property
    def reach_deg(self) -> float:
        """Distance beyond which the kernel is zero, degrees."""
        return _GAUSS_REACH * self.sigma_deg

    def profile(
        self, distance_deg: FloatArray, natural_fwhm_deg: FloatArray | float = 0.0
    ) -> FloatArray:
        """Kernel with unit area at a distance from its centre, 1/degree.

        A natural line width is that of a Lorentzian, with which both parts are convolved: the
        Gaussian one is a Voigt profile then, the triangular one a second difference of the
        Lorentzian integrated twice.
        """
        half = 0.5 * np.asarray(natural_fwhm_deg)
        gauss = voigt_profile(distance_deg, self.sigma_deg, half)
        width, mix = self.fwhm_deg, self.triangular_fraction
        if half.any():
            places = np.stack([distance_deg + width, distance_deg, distance_deg - width])
            above, middle, below = _twice_integrated(places, half)
            triangle = (above - 2.0 * middle + below) / width**2
        else:
            triangle = np.maximum(1.0 - np.abs(distance_deg) / width, 0.0) / width
        return np.asarray((1.0 - mix) * gauss + mix * triangle)


def _twice_integrated(distance_deg: FloatArray, half_deg: FloatArray) -> FloatArray:
    """Lorentzian of this half width at half maximum, integrated twice over the distance."""
    half = np.maximum(half_deg, 1e-12)
    arc = distance_deg * np.arctan(distance_deg / half)
    return np.asarray((arc - 0.5 * half * np.log(distance_deg**2 + half**2)) / np.pi)


def quadrature(
    centre_deg: FloatArray, limit_deg: float, kernel: Kernel
) -> tuple[FloatArray, FloatArray]:
    """Nodes and weights of the smeared integral of a spectrum that starts at a limit.

    ``sum(weights * spectrum(nodes), axis=1)`` is the integral of the spectrum times the kernel
    over angles above the limit.

    Parameters
    ----------
    centre_deg : ndarray, shape (n,)
        Angles at which the spectrometer stands, degrees.
    limit_deg : float
        Angle below which the spectrum is zero, degrees.
    kernel : Kernel
        The smearing.

    Returns
    -------
    nodes, weights : ndarray, shape (n, q)
        Angles not below the limit, degrees; weights, kernel included. Where the kernel does
        not reach the limit the weights are zero.
    """
    mix = kernel.triangular_fraction
    sigma = kernel.sigma_deg
    pieces = [(-_GAUSS_REACH * sigma, _GAUSS_REACH * sigma, _GAUSS_NODES, False)]
    if mix != 0.0:
        pieces.append((-kernel.fwhm_deg, 0.0, _FLANK_NODES, True))
        pieces.append((0.0, kernel.fwhm_deg, _FLANK_NODES, True))
    nodes, weights = [], []
    for low, high, (position, share), triangular in pieces:
        start = np.maximum(centre_deg + low, limit_deg)
        half = 0.5 * np.maximum(centre_deg + high - start, 0.0)
        distance = (start + half - centre_deg)[:, np.newaxis] + half[:, np.newaxis] * position
        if triangular:
            density = mix * (1.0 - np.abs(distance) / kernel.fwhm_deg) / kernel.fwhm_deg
        else:
            density = np.exp(-0.5 * (distance / sigma) ** 2)
            density *= (1.0 - mix) / (sigma * math.sqrt(2.0 * math.pi))
        nodes.append(centre_deg[:, np.newaxis] + distance)
        weights.append(half[:, np.newaxis] * share * density)
    return np.maximum(np.concatenate(nodes, axis=1), limit_deg), np.concatenate(weights, axis=1)
