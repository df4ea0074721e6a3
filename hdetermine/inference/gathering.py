"""Gathering of steps that are much finer than the spectrometer can resolve.

Counts of neighbouring steps add up without loss as long as the sum of the steps stays small
beside the resolution; twenty thousand points then cost no more than a few hundred.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from hdetermine.records.run import Run
from hdetermine.records.scan import Scan

FINEST_DEG = 0.02  # a fifth of the narrowest resolution that bench spectrometers have
_MARGIN = 0.6  # steps above this fraction of the finest are left as they are


def gathered_scan(scan: Scan) -> Scan:
    """Sum groups of neighbouring points so that the median step comes near `FINEST_DEG`.

    Parameters
    ----------
    scan : Scan
        Any scan.

    Returns
    -------
    Scan
        The same scan if its steps are coarse enough; else one whose points are the means of
        the readings and the sums of counts and dwell. A rest at the end is a smaller group.
    """
    step = scan.step_deg
    if scan.reading_deg.size < 2 or step > _MARGIN * FINEST_DEG:
        return scan
    width = FINEST_DEG
    group = np.floor((scan.reading_deg - scan.reading_deg[0]) / width + 1e-9).astype(np.int64)
    _, group = np.unique(group, return_inverse=True)
    dwell = np.zeros(int(group[-1]) + 1)
    np.add.at(dwell, group, scan.dwell_s)
    reading = np.zeros(dwell.size)
    np.add.at(reading, group, scan.dwell_s * scan.reading_deg)
    reading /= dwell
    counts = np.zeros(dwell.size, dtype=np.int64)
    np.add.at(counts, group, scan.counts)
    return replace(scan, reading_deg=reading, counts=counts, dwell_s=dwell)


def gathered(run: Run) -> Run:
    """Return the run with every scan gathered."""
    return replace(run, scans=tuple(gathered_scan(scan) for scan in run.scans))
