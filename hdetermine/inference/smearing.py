"""The smearing of the spectrometer: a kernel in angle, and integrals with it.

Slits, mosaic spread and the width of a step smear the spectrum: mosaic spread as a Gaussian, two
equal slits as a triangle, one slit much wider than all else as a box. The kernel is a mixture of
neighbours in that row, of the same full width at half maximum; where it stands in the row is an
input of the measurement, for the true form is seldom known. Integrals over a spectrum that
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
_ROUNDING = 0.002  # a box has no corners sharper than this part of its width


@dataclass(frozen=True, slots=True)
class Kernel:
    """Smearing kernel.

    Attributes
    ----------
    fwhm_deg : float
        Full width at half maximum, degrees.
    triangular_fraction : float
        0 Gaussian, 1 triangular; beyond 1 the triangle gives way to a box, which is alone at 2.
    """

    fwhm_deg: float
    triangular_fraction: float

    @property
    def shares(self) -> tuple[float, float, float]:
        """Shares of Gaussian, triangle and box."""
        form = self.triangular_fraction
        return max(1.0 - form, 0.0), 1.0 - abs(form - 1.0), max(form - 1.0, 0.0)

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

        A natural line width is that of a Lorentzian, with which all parts are convolved: the
        Gaussian one is a Voigt profile then, the triangular one a second difference of the
        Lorentzian integrated twice, the box a difference of the Lorentzian integrated once.
        """
        half = 0.5 * np.asarray(natural_fwhm_deg)
        width = self.fwhm_deg
        gauss, triangle, box = self.shares
        profile = np.zeros(np.broadcast_shapes(np.shape(distance_deg), half.shape))
        if gauss:
            profile += gauss * voigt_profile(distance_deg, self.sigma_deg, half)
        if triangle and half.any():
            places = np.stack([distance_deg + width, distance_deg, distance_deg - width])
            above, middle, below = _twice_integrated(places, half)
            profile += triangle * (above - 2.0 * middle + below) / width**2
        elif triangle:
            flanks = np.maximum(1.0 - np.abs(distance_deg) / width, 0.0)
            profile += triangle * flanks / width
        if box:
            soft = np.maximum(half, _ROUNDING * width)
            ends = np.arctan((distance_deg + 0.5 * width) / soft)
            ends -= np.arctan((distance_deg - 0.5 * width) / soft)
            profile += box * ends / (np.pi * width)
        return profile


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
    gauss, triangle, box = kernel.shares
    sigma, width = kernel.sigma_deg, kernel.fwhm_deg
    pieces = [
        (gauss, -_GAUSS_REACH * sigma, _GAUSS_REACH * sigma, _GAUSS_NODES),
        (triangle, -width, 0.0, _FLANK_NODES),
        (triangle, 0.0, width, _FLANK_NODES),
        (box, -0.5 * width, 0.5 * width, _FLANK_NODES),
    ]
    nodes, weights = [], []
    for number, (part, low, high, (position, share)) in enumerate(pieces):
        if part == 0.0:
            continue
        start = np.maximum(centre_deg + low, limit_deg)
        half = 0.5 * np.maximum(centre_deg + high - start, 0.0)
        distance = (start + half - centre_deg)[:, np.newaxis] + half[:, np.newaxis] * position
        if number == 0:
            density = np.exp(-0.5 * (distance / sigma) ** 2) / (sigma * math.sqrt(2.0 * math.pi))
        elif number == 3:
            density = np.full_like(distance, 1.0 / width)
        else:
            density = (1.0 - np.abs(distance) / width) / width
        nodes.append(centre_deg[:, np.newaxis] + distance)
        weights.append(half[:, np.newaxis] * share * part * density)
    return np.maximum(np.concatenate(nodes, axis=1), limit_deg), np.concatenate(weights, axis=1)
