"""The smearing kernel and its quadrature, against adaptive integration."""

import math
from itertools import pairwise

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.special import voigt_profile

from hdetermine.inference.smearing import Kernel, quadrature

FWHM = 0.3
CENTRE = 6.0
SIGMA = FWHM / 2.354820045  # 2 sqrt(2 ln 2)
KERNELS = {"Gaussian": 0.0, "triangular": 1.0, "mixture": 0.4, "trapezium": 1.6, "box": 2.0}
SLOPING = [kernel for kernel, form in KERNELS.items() if form <= 1.0]

# Where the limit stands from the centre, in widths: the triangle ends at one, the Gaussian is cut
# at 4.5 standard deviations, 1.911 widths.
LIMITS = (-3.0, -1.911, -1.2, -1.0, -0.5, 0.0, 0.37, 0.999, 1.0, 1.5)

SPECTRA = {
    "constant": lambda angle, limit: 1.0 + 0.0 * angle,
    "ramp": lambda angle, limit: angle - limit,
    "curved": lambda angle, limit: (angle - limit) * np.exp(-2.0 * (angle - limit)) / angle**2,
}


def density(distance, mix):
    """The kernel as its definition says it, 1/degree."""
    gauss = math.exp(-0.5 * (distance / SIGMA) ** 2) / (SIGMA * math.sqrt(2.0 * math.pi))
    triangle = max(1.0 - abs(distance) / FWHM, 0.0) / FWHM
    box = (abs(distance) < 0.5 * FWHM) / FWHM
    if mix > 1.0:
        return (2.0 - mix) * triangle + (mix - 1.0) * box
    return (1.0 - mix) * gauss + mix * triangle


def smeared(spectrum, limit, mix):
    """Integral of spectrum times kernel above the limit, by adaptive quadrature."""
    breaks = [CENTRE + FWHM * k for k in (-1.0, -0.5, 0.0, 0.5, 1.0)]
    ends = [limit, *(b for b in breaks if b > limit), max(CENTRE + 8.0 * SIGMA, limit)]
    return sum(
        quad(lambda a: spectrum(a, limit) * density(a - CENTRE, mix), low, high, epsabs=1e-12)[0]
        for low, high in pairwise(ends)
    )


def by_nodes(spectrum, limit, mix):
    nodes, weights = quadrature(np.array([CENTRE]), limit, Kernel(FWHM, mix))
    return float(np.sum(weights * spectrum(nodes, limit)))


@pytest.mark.parametrize("spectrum", SPECTRA)
@pytest.mark.parametrize("offset", LIMITS)
@pytest.mark.parametrize("kernel", KERNELS)
def test_integral_above_the_limit(kernel, offset, spectrum):
    mix, limit = KERNELS[kernel], CENTRE + offset * FWHM
    exact = smeared(SPECTRA[spectrum], limit, mix)
    largest = smeared(SPECTRA[spectrum], CENTRE - 3.0 * FWHM, mix)
    # What the cut of the Gaussian leaves out is 7e-6 of the area.
    assert by_nodes(SPECTRA[spectrum], limit, mix) == pytest.approx(exact, abs=2e-5 * largest)


@pytest.mark.parametrize("kernel", KERNELS)
@pytest.mark.parametrize("offset", [1.92, 2.5, 40.0])
def test_nothing_is_seen_of_a_spectrum_beyond_the_reach(kernel, offset):
    nodes, weights = quadrature(
        np.array([CENTRE]), CENTRE + offset * FWHM, Kernel(FWHM, KERNELS[kernel])
    )
    assert np.all(weights == 0.0)
    assert np.all(nodes >= CENTRE + offset * FWHM)


@pytest.mark.parametrize("kernel", KERNELS)
def test_no_node_stands_below_the_limit(kernel):
    centres = np.linspace(5.0, 7.0, 41)
    nodes, weights = quadrature(centres, 6.03, Kernel(FWHM, KERNELS[kernel]))
    assert nodes.shape == weights.shape
    assert nodes.shape[0] == centres.size
    assert np.all(nodes >= 6.03)
    assert np.all(weights >= 0.0)


@pytest.mark.parametrize("kernel", KERNELS)
def test_the_integral_is_a_smooth_function_of_the_limit(kernel):
    """Its derivative is minus spectrum times kernel at the limit: no node jumps in or out."""
    mix, step = KERNELS[kernel], 1e-5
    for limit in CENTRE + FWHM * np.linspace(-1.4, 1.4, 57) + 0.0011:
        ahead, behind = (
            by_nodes(lambda a, _: np.exp(0.3 * a), x, mix) for x in (limit + step, limit - step)
        )
        slope = -math.exp(0.3 * limit) * density(limit - CENTRE, mix)
        scale = math.exp(0.3 * CENTRE) * density(0.0, mix)
        assert (ahead - behind) / (2.0 * step) == pytest.approx(slope, abs=2e-4 * scale)


@pytest.mark.parametrize("kernel", SLOPING)
def test_profile_has_unit_area_and_its_width(kernel):
    profile = Kernel(FWHM, KERNELS[kernel])
    distance = np.linspace(-3.0, 3.0, 60_001)
    values = profile.profile(distance)
    assert np.trapezoid(values, distance) == pytest.approx(1.0, abs=1e-8)
    half = profile.profile(np.array([-0.5 * FWHM, 0.5 * FWHM])) / profile.profile(np.array([0.0]))
    np.testing.assert_allclose(half, 0.5, rtol=1e-9)
    np.testing.assert_allclose(
        profile.profile(np.array([0.1])), density(0.1, KERNELS[kernel]), rtol=1e-9
    )


@pytest.mark.parametrize("form", [1.3, 2.0])
def test_a_box_has_its_width_and_hardly_rounded_corners(form):
    profile = Kernel(FWHM, form)
    distance = np.linspace(-30.0, 30.0, 600_001)
    values = profile.profile(distance)
    assert np.trapezoid(values, distance) == pytest.approx(1.0, abs=2e-3)
    middle, edge = profile.profile(np.array([0.0, 0.5 * FWHM]))
    assert edge / middle == pytest.approx(0.5, abs=0.02)
    # Away from its corners, by some of the two per cent by which they are rounded.
    assert profile.profile(np.array([0.25 * FWHM]))[0] == pytest.approx(
        density(0.25 * FWHM, form), rel=0.05
    )


def test_sigma_and_reach():
    kernel = Kernel(FWHM, 0.5)
    assert kernel.sigma_deg == pytest.approx(SIGMA, rel=1e-9)
    assert kernel.reach_deg > FWHM  # the triangle lies within
    assert kernel.reach_deg == pytest.approx(4.5 * SIGMA, rel=1e-9)


@pytest.mark.parametrize("natural", [0.0, 0.02, 0.2])
def test_natural_width_makes_the_gaussian_a_voigt_profile(natural):
    distance = np.linspace(-1.0, 1.0, 21)
    voigt = voigt_profile(distance, SIGMA, natural / 2.0)  # scipy takes the half width
    np.testing.assert_allclose(Kernel(FWHM, 0.0).profile(distance, natural), voigt, rtol=1e-8)


@pytest.mark.parametrize("natural", [0.003, 0.02, 0.2])
@pytest.mark.parametrize("kernel", KERNELS)
def test_natural_width_is_a_convolution(kernel, natural):
    """A Lorentzian of that full width smeared by the kernel, integrated directly."""
    half, mix = natural / 2.0, KERNELS[kernel]

    def convolved(x):
        places = [x - 2.2 * FWHM, x - FWHM, x, x + FWHM, x + 2.2 * FWHM]
        return sum(
            quad(
                lambda t: half / math.pi / (t**2 + half**2) * density(x - t, mix),
                low,
                high,
                points=[0.0] if low < 0.0 < high else None,
                epsabs=1e-9,
            )[0]
            for low, high in pairwise(places)
        )

    distance = np.array([-0.9, -0.33, -0.1, 0.0, 0.04, 0.25, 0.5])
    direct = np.array([convolved(x) for x in distance])
    found = Kernel(FWHM, mix).profile(distance, natural)
    np.testing.assert_allclose(found, direct, atol=1e-5 * direct.max())


def test_several_natural_widths_at_once():
    distance = np.linspace(-0.5, 0.5, 11)[:, np.newaxis] - np.array([0.0, 0.1])
    both = Kernel(FWHM, 0.6).profile(distance, np.array([0.0, 0.02]))
    for column, natural in enumerate((0.0, 0.02)):
        alone = Kernel(FWHM, 0.6).profile(distance[:, column], natural)
        np.testing.assert_allclose(both[:, column], alone, rtol=1e-6, atol=1e-9)
