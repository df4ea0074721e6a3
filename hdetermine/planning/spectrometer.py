"""A simulated Bragg spectrometer: from a true spectrum to the rate that is recorded.

The spectrum is laid on a fine grid of true glancing angles, smeared by direct summation, and
read at the goniometer's positions. The analysis has its own, quite different way.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hdetermine.physics.bragg import glancing_angle_deg, wavelength_pm
from hdetermine.planning.spectrum import SharpLine, Spectrum
from hdetermine.records.apparatus import DeadTimeModel

FloatArray = NDArray[np.float64]

CELLS_PER_FWHM = 64
"""Fine cells in one full width at half maximum; four times as many change a rate near the limit
by less than 1e-4 and the top of a line by less than 1e-3."""

GAUSSIAN_REACH = 2.2
"""Half-length of the kernel in full widths at half maximum: 5.2 standard deviations."""

FWHM_PER_SIGMA = 2.0 * math.sqrt(2.0 * math.log(2.0))
BACKGROUND_FLOOR = 0.2
"""The sloping background stays at or above this fraction of its level."""


@dataclass(frozen=True, slots=True)
class Spectrometer:
    """The true instrument.

    Attributes
    ----------
    spacing_pm : float
        Spacing of the crystal's planes at the temperature of the run, pm.
    refraction : float
        delta/sin^2(theta) in first order.
    zero_deg : float
        Reading minus true glancing angle, degrees.
    resolution_deg : float
        Full width at half maximum of the smearing, degrees.
    triangular_fraction : float
        Share of a triangle in the kernel, the rest being Gaussian, both of the same full width
        at half maximum; ignored for a box.
    box : bool
        True for a kernel that is a box of width `resolution_deg`.
    second_order : float
        Reflecting power in second order over that in first.
    background_per_s, background_slope_per_deg : float
        Level at `background_at_deg`, and slope, of what is counted without reflection, 1/s.
    background_at_deg : float
        Reading at which the level holds, degrees.
    direct_beam_per_s, direct_beam_width_deg : float
        Direct beam at reading zero, falling by 1/e over its width.
    dead_time_us : float
        Dead time, microseconds.
    dead_time_model : {"nonparalysable", "paralysable"}
        Kind of counter.
    """

    spacing_pm: float
    refraction: float
    zero_deg: float
    resolution_deg: float
    triangular_fraction: float = 0.0
    box: bool = False
    second_order: float = 0.0
    background_per_s: float = 0.0
    background_slope_per_deg: float = 0.0
    background_at_deg: float = 5.0
    direct_beam_per_s: float = 0.0
    direct_beam_width_deg: float = 1.0
    dead_time_us: float = 0.0
    dead_time_model: DeadTimeModel = "nonparalysable"

    def reading_of(self, wavelength: float) -> float:
        """Reading at which a wavelength (pm) is reflected in first order, degrees."""
        angle = glancing_angle_deg(wavelength, self.spacing_pm, self.refraction)
        return float(angle) + self.zero_deg

    def kernel(self, cell_deg: float) -> FloatArray:
        """Smearing kernel on the fine grid, an odd number of cells that sum to one."""
        width = self.resolution_deg
        half = math.ceil(GAUSSIAN_REACH * width / cell_deg)
        offset = cell_deg * np.arange(-half, half + 1)
        if self.box:
            inside = 0.5 * width - np.abs(offset)
            shape = np.clip(inside / cell_deg + 0.5, 0.0, 1.0)
            return np.asarray(shape / shape.sum())
        gaussian = np.exp(-0.5 * (offset * FWHM_PER_SIGMA / width) ** 2)
        triangle = np.maximum(1.0 - np.abs(offset) / width, 0.0)
        fraction = self.triangular_fraction
        return np.asarray(
            (1.0 - fraction) * gaussian / gaussian.sum() + fraction * triangle / triangle.sum()
        )

    def recorded_per_s(self, spectrum: Spectrum, reading_deg: FloatArray) -> FloatArray:
        """Mean rate that the counter records.

        Parameters
        ----------
        spectrum : Spectrum
            What the tube emits.
        reading_deg : ndarray, shape (n,)
            Evenly spaced readings, rising, degrees.

        Returns
        -------
        ndarray, shape (n,)
            1/s.
        """
        rate = self.reflected_per_s(spectrum, reading_deg) + self.unreflected_per_s(reading_deg)
        lost = rate * self.dead_time_us * 1e-6
        if self.dead_time_model == "paralysable":
            return np.asarray(rate * np.exp(-lost))
        return np.asarray(rate / (1.0 + lost))

    def unreflected_per_s(self, reading_deg: FloatArray) -> FloatArray:
        """Background and direct beam, 1/s."""
        level = self.background_per_s
        from_level = np.asarray(reading_deg) - self.background_at_deg
        rate = np.maximum(
            level + self.background_slope_per_deg * from_level, BACKGROUND_FLOOR * level
        )
        if self.direct_beam_per_s:
            angle = np.abs(reading_deg - self.zero_deg)
            rate = rate + self.direct_beam_per_s * np.exp(-angle / self.direct_beam_width_deg)
        return rate

    def reflected_per_s(self, spectrum: Spectrum, reading_deg: FloatArray) -> FloatArray:
        """Smeared continuum and lines of both orders, 1/s, before dead time."""
        step = float(reading_deg[1] - reading_deg[0]) if reading_deg.size > 1 else 0.1
        cells_a_step = max(1, math.ceil(step * CELLS_PER_FWHM / self.resolution_deg))
        cell = step / cells_a_step
        kernel = self.kernel(cell)
        margin = kernel.size // 2
        cells = (reading_deg.size - 1) * cells_a_step + 1 + 2 * margin
        first = float(reading_deg[0]) - self.zero_deg - margin * cell
        centre = np.asarray(first + cell * np.arange(cells), dtype=np.float64)
        fine = self._in_order(spectrum, centre, cell, 1)
        if self.second_order:
            fine += self.second_order * self._in_order(spectrum, centre, cell, 2)
        return np.convolve(fine, kernel, mode="valid")[::cells_a_step]

    def _in_order(
        self, spectrum: Spectrum, centre_deg: FloatArray, cell_deg: float, order: int
    ) -> FloatArray:
        """Mean rate in each fine cell from one order of reflection, unsmeared."""
        limit = float(
            glancing_angle_deg(spectrum.limit_pm, self.spacing_pm, self.refraction, order)
        )
        rate = np.zeros_like(centre_deg)
        if math.isfinite(limit):
            # The continuum starts with a corner (or a step) inside one cell: that cell is
            # taken at the middle of its lit part, and weighted with that part.
            start = np.clip(limit, centre_deg - 0.5 * cell_deg, centre_deg + 0.5 * cell_deg)
            lit = (centre_deg + 0.5 * cell_deg - start) / cell_deg
            lit = np.where(centre_deg > 0.0, lit, 0.0)
            seen = np.flatnonzero((lit > 0.0) & (centre_deg < 90.0))
            angle = start[seen] + 0.5 * lit[seen] * cell_deg
            wavelength = wavelength_pm(angle, self.spacing_pm, self.refraction, order)
            dispersion = np.cos(np.radians(angle)) / order
            rate[seen] = spectrum.continuum_per_s(wavelength) * dispersion * lit[seen]
        for line in spectrum.lines():
            rate += self._line_cells(line, centre_deg, cell_deg, order)
        return rate

    def _line_cells(
        self, line: SharpLine, centre_deg: FloatArray, cell_deg: float, order: int
    ) -> FloatArray:
        """Mean rate in each fine cell from one Lorentzian line."""
        angle = float(
            glancing_angle_deg(line.wavelength_pm, self.spacing_pm, self.refraction, order)
        )
        if not math.isfinite(angle):
            return np.zeros_like(centre_deg)
        # Bragg's law differentiated: d(theta) = tan(theta) d(lambda)/lambda.
        half_width = 0.5 * math.degrees(
            math.tan(math.radians(angle)) * line.width_pm / line.wavelength_pm
        )
        edges = np.append(centre_deg - 0.5 * cell_deg, centre_deg[-1] + 0.5 * cell_deg)
        share = np.diff(np.arctan((edges - angle) / max(half_width, 1e-9)) / math.pi)
        return np.asarray(line.area_deg_per_s / cell_deg * share)
