"""The angle scale as the characteristic lines give it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hdetermine.records.quantity import Quantity

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class LineMeasure:
    """A characteristic line found in a scan.

    `reading_deg` is where the line's strongest component stands on the goniometer;
    `expected_deg` where it would stand after the fit of the angle scale; both readings.
    """

    scan: str
    label: str
    order: int
    wavelength_pm: float
    wavelength_u_pm: float
    reading_deg: float
    reading_u_deg: float
    expected_deg: float
    used: bool
    reason: str = ""

    @property
    def residual_deg(self) -> float:
        """Reading minus expectation, degrees."""
        return self.reading_deg - self.expected_deg


@dataclass(frozen=True, slots=True)
class AngleScale:
    """Zero offset, resolution and spacing after the characteristic lines were used.

    Attributes
    ----------
    zero : Quantity
        Reading minus true angle, degrees.
    resolution : Quantity
        FWHM of the smearing, degrees.
    kernel : Quantity
        Triangular fraction of the smearing kernel.
    inputs : tuple of Quantity
        The inputs that the lines estimate together (zero, spacing, temperature, wavelength
        scale), as they stand afterwards.
    correlation : ndarray, shape (len(inputs), len(inputs))
        Their correlation matrix.
    lines : tuple of LineMeasure
        Every line that was found, used or not.
    zero_from, resolution_from : str
        In words, what each rests on: "lines", "prior", "edges".
    free_spacing_pm, free_spacing_u_pm : float or None
        Spacing when it is fitted together with the zero without its stated value, pm; None
        where the lines do not allow it.
    zero_by_wavelength_deg : float
        Change of the zero per relative change of the reference wavelengths, degrees.
    edge_resolution_deg, edge_resolution_u_deg, edge_pull : float or None
        Width that the edges by themselves ask for, and its difference from that of the lines
        in standard uncertainties; None where the lines did not tell a width.
    remarks : tuple of str
        Anything a careful reader should know.
    """

    zero: Quantity
    resolution: Quantity
    kernel: Quantity
    inputs: tuple[Quantity, ...]
    correlation: FloatArray
    lines: tuple[LineMeasure, ...]
    zero_from: str
    resolution_from: str
    free_spacing_pm: float | None = None
    free_spacing_u_pm: float | None = None
    zero_by_wavelength_deg: float = 0.0
    edge_resolution_deg: float | None = None
    edge_resolution_u_deg: float | None = None
    edge_pull: float | None = None
    remarks: tuple[str, ...] = ()
