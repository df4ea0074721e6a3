"""True spectra of X-ray tubes, made from published laws: the side that only the simulator knows.

Nothing here is shared with the analysis but the line table and the constants, or a study on
simulated runs would test nothing.

References
----------
H. A. Kramers, Phil. Mag. 46, 836 (1923); H. Kulenkampff, Ann. Phys. 69, 548 (1922);
photoelectric absorption near lambda^3 and lines growing like (U/U_K - 1)^1.63: Compton and
Allison, X-Rays in Theory and Experiment (1935), from memory.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from hdetermine.physics.constants import ELEMENTARY_CHARGE_C, SPEED_OF_LIGHT_M_PER_S
from hdetermine.physics.reference import PLANCK_CONSTANT_J_S

FloatArray = NDArray[np.float64]

HC_PER_E_pm_kV = PLANCK_CONSTANT_J_S * SPEED_OF_LIGHT_M_PER_S / ELEMENTARY_CHARGE_C * 1e9
"""Wavelength times energy, pm keV."""

ABSORPTION_POWER = 2.8
"""Exponent of the wavelength in photoelectric absorption between two edges."""

LINE_POWER = 1.63
"""Exponent of the overvoltage U/U_K - 1 in the intensity of a characteristic line."""

K_JUMP = 6.5
"""Ratio of the absorption on both sides of a K edge (6.4 to 7.6 for Cu to Ag; xraydb 4.5.8)."""

SCALE_ENERGY_keV = 30.0
"""Limit for which the continuum's scale is stated."""

SCALE_ATOMIC_NUMBER = 29
"""Target for which the continuum's scale is stated: copper."""


@dataclass(frozen=True, slots=True)
class SharpLine:
    """A characteristic line as the tube emits it.

    Attributes
    ----------
    wavelength_pm : float
        Wavelength, pm.
    width_pm : float
        Natural width (FWHM of a Lorentzian), pm.
    area_deg_per_s : float
        Rate times width that the line has in a scan over the angle, degree/s.
    """

    wavelength_pm: float
    width_pm: float
    area_deg_per_s: float


class Spectrum(Protocol):
    """What a spectrometer needs to know of a tube at one voltage."""

    @property
    def limit_pm(self) -> float:
        """Short-wavelength limit, pm."""

    def continuum_per_s(self, wavelength_pm: FloatArray) -> FloatArray:
        """Rate from the continuum at a glancing angle near zero, 1/s; zero below the limit."""

    def lines(self) -> tuple[SharpLine, ...]:
        """Characteristic lines that are excited."""


@dataclass(frozen=True, slots=True)
class Absorber:
    """Matter in the beam.

    Attributes
    ----------
    depth : float
        Optical depth at `wavelength_pm`, just on the short side of the edge if that is an edge.
    wavelength_pm : float
        Where `depth` holds, pm.
    is_edge : bool
        True if the absorption falls by the jump of a K edge beyond `wavelength_pm`.
    """

    depth: float
    wavelength_pm: float
    is_edge: bool = False

    def optical_depth(self, wavelength_pm: FloatArray) -> FloatArray:
        """Optical depth at wavelengths (pm)."""
        ratio = np.maximum(wavelength_pm, 0.0) / self.wavelength_pm
        depth = self.depth * ratio**ABSORPTION_POWER
        if self.is_edge:
            depth = np.where(ratio > 1.0, depth / K_JUMP, depth)
        return np.asarray(depth)


@dataclass(frozen=True, slots=True)
class TubeSpectrum:
    """Thick-target continuum and lines by the published laws.

    Per unit energy the photon number of the continuum is taken as::

        Z (E0 - E + step)/E * (1 + excess * exp(-(E0 - E)/energy)),   E < E0

    which is Kramers' law for ``step = excess = 0`` and Kulenkampff's 1922 law for
    ``excess = 0``; per unit wavelength it is that divided by the wavelength squared.

    Attributes
    ----------
    energy_keV : float
        Energy E0 of the electrons at the limit.
    current_mA : float
        Tube current.
    atomic_number : int
        Z of the target.
    scale_per_s : float
        Kramers' continuum of a copper target at its maximum, 30 keV and 1 mA, without any
        absorber, 1/s.
    near_limit_excess, near_limit_energy_keV : float
        Rise over Kramers' law near the limit, and the energy over which it fades.
    limit_step_keV : float
        Step at the limit after Kulenkampff, as an energy.
    absorbers : tuple of Absorber
        Windows, filter, air, and the target itself.
    counter_depth : float
        Optical depth of the counter's gas at 100 pm; zero if the counter takes every photon.
    emitted : tuple of (float, float, float, float)
        Wavelength (pm), natural width (eV), excitation energy (keV) and area (degree/s at
        twice the excitation energy and 1 mA) of each line.
    """

    energy_keV: float
    current_mA: float
    atomic_number: int
    scale_per_s: float
    near_limit_excess: float
    near_limit_energy_keV: float
    limit_step_keV: float = 0.0
    absorbers: tuple[Absorber, ...] = ()
    counter_depth: float = 0.0
    emitted: tuple[tuple[float, float, float, float], ...] = ()

    @property
    def limit_pm(self) -> float:
        """Short-wavelength limit, pm."""
        return HC_PER_E_pm_kV / self.energy_keV

    def transmission(self, wavelength_pm: FloatArray) -> FloatArray:
        """Fraction of the photons that pass all absorbers and are counted."""
        depth = np.zeros_like(wavelength_pm)
        for absorber in self.absorbers:
            if absorber.depth:
                depth += absorber.optical_depth(wavelength_pm)
        passed = np.exp(-depth)
        if self.counter_depth:
            gas = Absorber(self.counter_depth, 100.0).optical_depth(wavelength_pm)
            passed *= -np.expm1(-gas)
        return np.asarray(passed)

    def continuum_per_s(self, wavelength_pm: FloatArray) -> FloatArray:
        """Rate from the continuum at a glancing angle near zero, 1/s; zero below the limit."""
        rate = np.zeros(np.shape(wavelength_pm))
        above = np.asarray(wavelength_pm) > self.limit_pm
        wavelength = np.asarray(wavelength_pm, dtype=float)[above]
        energy = HC_PER_E_pm_kV / wavelength
        missing = self.energy_keV - energy
        shape = (missing + self.limit_step_keV) / energy / wavelength**2
        shape *= 1.0 + self.near_limit_excess * np.exp(-missing / self.near_limit_energy_keV)
        # The same law at half the reference energy, where Kramers' (E0 - E)/E is one.
        scale = self.scale_per_s * (2.0 * HC_PER_E_pm_kV / SCALE_ENERGY_keV) ** 2
        scale *= self.current_mA * self.atomic_number / SCALE_ATOMIC_NUMBER
        rate[above] = scale * shape * self.transmission(wavelength)
        return rate

    def lines(self) -> tuple[SharpLine, ...]:
        """Characteristic lines that are excited."""
        found = []
        for wavelength, width_eV, excitation_keV, area in self.emitted:
            overvoltage = self.energy_keV / excitation_keV - 1.0
            if overvoltage <= 0.0:
                continue
            passed = float(self.transmission(np.array([wavelength]))[0])
            width_pm = wavelength**2 * width_eV * 1e-3 / HC_PER_E_pm_kV
            strength = area * self.current_mA * overvoltage**LINE_POWER * passed
            found.append(SharpLine(wavelength, width_pm, strength))
        return tuple(found)
