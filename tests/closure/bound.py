"""Lower bound of a cutoff's spread, from the simulator's own model.

Cramer and Rao: no unbiased estimate spreads less than the inverse of the Fisher information
(H. Cramer, Mathematical Methods of Statistics (1946), ch. 32). For Poisson counts with means m
that is sum(dm/da dm/db / m) over the points. The nuisances are what the fit of one edge cannot
know: amplitude, local slope of the continuum, level and slope of the background, and the
brightness of lines that stand inside the window. Resolution, shape and dead time are known, in
the bound as in the run sheet that the study uses. A method that learns the local slope from all
edges together may come closer to the bound without it.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np

from hdetermine.planning.simulation import SimulatedRun, spectrometer_of, tube_spectra
from hdetermine.planning.spectrum import SharpLine, Spectrum


@dataclass(frozen=True)
class Bent:
    """A spectrum with its continuum scaled and tilted, and its lines scaled."""

    inner: Spectrum
    amplitude: float = 1.0
    tilt: float = 0.0
    brightness: float = 1.0

    @property
    def limit_pm(self) -> float:
        return self.inner.limit_pm

    def continuum_per_s(self, wavelength_pm: np.ndarray) -> np.ndarray:
        bend = 1.0 + self.tilt * (wavelength_pm / self.limit_pm - 1.0)
        return self.amplitude * bend * self.inner.continuum_per_s(wavelength_pm)

    def lines(self) -> tuple[SharpLine, ...]:
        return tuple(
            replace(line, area_deg_per_s=self.brightness * line.area_deg_per_s)
            for line in self.inner.lines()
        )


NUISANCES = ("amplitude", "tilt", "level", "slope", "lines")


def cutoff_bound_deg(
    simulated: SimulatedRun,
    scan: int,
    window_deg: tuple[float, float],
    nuisances: Sequence[str] = NUISANCES,
) -> float:
    """Smallest standard deviation of the cutoff's reading, degrees.

    Parameters
    ----------
    simulated : SimulatedRun
        Its truth is where the derivatives are taken.
    scan : int
        Which scan.
    window_deg : (float, float)
        Readings that take part.
    nuisances : sequence of str
        What is unknown beside the cutoff.
    """
    plan = simulated.specification.scans[scan]
    truth = simulated.truth
    spectrometer = spectrometer_of(simulated.specification, truth)
    maker = tube_spectra(simulated.specification, truth)
    energy = simulated.limits[scan].energy_keV
    low, high = window_deg
    inside = (plan.reading_deg >= low - 1e-9) & (plan.reading_deg <= high + 1e-9)

    def mean(
        shift: float = 0.0,
        amplitude: float = 0.0,
        tilt: float = 0.0,
        level: float = 0.0,
        slope: float = 0.0,
        lines: float = 0.0,
    ) -> np.ndarray:
        bent = Bent(maker(energy * (1.0 + shift), plan), 1.0 + amplitude, tilt, 1.0 + lines)
        changed = replace(
            spectrometer,
            background_per_s=spectrometer.background_per_s + level,
            background_slope_per_deg=spectrometer.background_slope_per_deg + slope,
        )
        rate = changed.recorded_per_s(bent, plan.reading_deg)
        return (rate * plan.dwell_s)[inside]

    steps: dict[str, float] = {
        "shift": 2e-4, "amplitude": 1e-3, "tilt": 1e-3, "level": 1e-3, "slope": 1e-3,
        "lines": 1e-3,
    }  # fmt: skip
    centre = mean()
    places = [spectrometer.reading_of(line.wavelength_pm) for line in maker(energy, plan).lines()]
    unknown = [
        name for name in nuisances if name != "lines" or any(low < place < high for place in places)
    ]
    derivative = np.array(
        [
            _derivative(lambda x, name=name: mean(**{name: x}), steps[name])
            for name in ("shift", *unknown)
        ]
    )
    information = (derivative / centre) @ derivative.T
    variance = np.linalg.inv(information)[0, 0]
    # From the relative shift of the energy to the reading.
    reading = _derivative(
        lambda x: np.array(spectrometer.reading_of(maker(energy * (1.0 + x), plan).limit_pm)), 2e-4
    )
    return float(np.sqrt(variance) * abs(reading))


def _derivative(function: Callable[[float], np.ndarray], step: float) -> np.ndarray:
    return (function(step) - function(-step)) / (2.0 * step)
