"""A scan: counts against glancing angle at one tube voltage."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]


@dataclass(frozen=True, slots=True, eq=False)
class Scan:
    """Counts of one sweep of the spectrometer.

    Attributes
    ----------
    name : str
        Short unique name within the run (the file's stem, or stem and column).
    tube_voltage_kV : float
        Voltage as displayed, kV.
    reading_deg : ndarray, shape (n,)
        Glancing angle as read, strictly increasing, degrees (always theta, never 2 theta).
    counts : ndarray of int, shape (n,)
        Recorded counts (not corrected for dead time).
    dwell_s : ndarray, shape (n,)
        Counting time of each point, seconds.
    emission_current_mA : float or None
        Tube current, mA, if stated.
    file : str
        Name of the file, relative to the run folder.
    fit_from_deg, fit_to_deg : float or None
        A window fixed by the user, as readings.
    leave_out : str
        Why the user leaves this scan out of the edge fits; empty if it is used. It still
        serves the angle scale.
    edge : bool
        False for a scan that is meant for the lines only (a reference scan).
    remarks : tuple of str
        What the reader noticed (rates that do not give whole counts, and so on).
    rate_rounding : float or None
        Half the last digit of the published rate times the dwell, if the counts were
        restored from rates: the counts are then known only to that.
    """

    name: str
    tube_voltage_kV: float
    reading_deg: FloatArray
    counts: IntArray
    dwell_s: FloatArray
    emission_current_mA: float | None = None
    file: str = ""
    fit_from_deg: float | None = None
    fit_to_deg: float | None = None
    leave_out: str = ""
    edge: bool = True
    remarks: tuple[str, ...] = ()
    rate_rounding: float | None = None

    def __post_init__(self) -> None:
        for array in (self.reading_deg, self.counts, self.dwell_s):
            array.setflags(write=False)

    @property
    def step_deg(self) -> float:
        """Median step, degrees."""
        if self.reading_deg.size < 2:
            return 0.0
        return float(np.median(np.diff(self.reading_deg)))
