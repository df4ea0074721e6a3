"""The continuum close to its limit.

Kramers, Phil. Mag. 46, 836 (1923), thick target before absorption: photons per wavelength are
proportional to (lambda/lambda0 - 1)/lambda^2 and photons per energy to (E0 - E)/E, as quoted in
public encyclopaedias; peaks computed for these checks.
"""

import math

import numpy as np
import pytest
from scipy.optimize import minimize_scalar

from hdetermine.physics.continuum import rising_continuum

GRID = np.array([0.0, 1e-4, 0.003, 0.02, 0.1, 0.35, 1.0, 2.5])
# Excess over Kramers' law and energy at the limit over that in which the excess fades.
SHAPES = ((0.0, 50.0), (0.85, 50.0), (0.5, 87.5), (1.2, 20.0), (-0.3, 60.0))


def value(x, excess=0.0, steepness=50.0):
    return float(rising_continuum(np.array([x]), excess, steepness)[0][0])


def peak_of(function):
    return minimize_scalar(
        lambda x: -function(x), bounds=(0.01, 9.0), method="bounded", options={"xatol": 1e-9}
    ).x


def test_photons_per_wavelength_peak_at_twice_the_limit():
    assert 1.0 + peak_of(value) == pytest.approx(2.0, abs=1e-6)


def test_energy_per_wavelength_peaks_at_one_and_a_half_times_the_limit():
    assert 1.0 + peak_of(lambda x: value(x) / (1.0 + x)) == pytest.approx(1.5, abs=1e-6)


def test_photons_per_energy_follow_from_it():
    """(E0 - E)/E, with |dE/d lambda| = hc/lambda^2; E in units of E0."""
    energy = np.linspace(0.2, 1.0, 33)
    x = 1.0 / energy - 1.0
    per_wavelength, _ = rising_continuum(x, 0.0, 50.0)
    np.testing.assert_allclose(per_wavelength / energy**2, (1.0 - energy) / energy, atol=1e-14)


@pytest.mark.parametrize(("excess", "steepness"), SHAPES)
def test_excess_over_kramers_fades_with_the_missing_energy(excess, steepness):
    for fadings in (0.0, 0.5, 1.0, 3.0):
        energy = 1.0 - fadings / steepness  # E0 - E in units of the fading energy
        x = 1.0 / energy - 1.0
        kramers = x / (1.0 + x) ** 2
        assert value(x, excess, steepness) == pytest.approx(
            kramers * (1.0 + excess * math.exp(-fadings)), rel=1e-12, abs=1e-300
        )


@pytest.mark.parametrize(("excess", "steepness"), SHAPES)
def test_derivative(excess, steepness):
    _, slope = rising_continuum(GRID, excess, steepness)
    step = 1e-6
    ahead, behind = (rising_continuum(GRID + s, excess, steepness)[0] for s in (step, -step))
    np.testing.assert_allclose(slope, (ahead - behind) / (2.0 * step), rtol=1e-6, atol=1e-8)


@pytest.mark.parametrize(("excess", "steepness"), SHAPES)
def test_it_starts_at_zero_and_linearly(excess, steepness):
    start, slope = rising_continuum(np.array([0.0]), excess, steepness)
    assert start[0] == 0.0
    assert slope[0] == pytest.approx(1.0 + excess)
