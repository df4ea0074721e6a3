"""A first look for the edge of a scan, without any expectation of where it should be."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hdetermine.records.scan import Scan

FloatArray = NDArray[np.float64]

_SMOOTHING = 5
_BEAM_DECAY_DEG = 0.5
_LEAST_POINTS = 8


def _running_mean(values: FloatArray, width: int) -> FloatArray:
    padded = np.pad(values, width // 2, mode="edge")
    return np.convolve(padded, np.ones(width) / width, mode="valid")


def rising_part(scan: Scan, clear: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """Points from the start of the scan to where the continuum stops rising.

    Parameters
    ----------
    scan : Scan
        The counts.
    clear : ndarray of bool, shape (n,)
        Points that no characteristic line touches.
    """
    rate = scan.counts / scan.dwell_s
    usable = np.flatnonzero(clear)
    if usable.size < _LEAST_POINTS:
        return np.zeros(rate.size, dtype=bool)
    # Only the continuum counts: between lines the rate is interpolated.
    smooth = _running_mean(np.interp(scan.reading_deg, scan.reading_deg[usable], rate[usable]), 7)
    noise = np.sqrt(np.maximum(smooth, 1.0 / scan.dwell_s) / scan.dwell_s / 7.0)
    lowest = int(np.argmin(smooth[: max(int(0.8 * rate.size), 1)]))
    tail = smooth[lowest:]
    top = lowest + int(np.argmax(tail))
    level = smooth[lowest] + 0.8 * (smooth[top] - smooth[lowest])
    above = np.flatnonzero(smooth[lowest:] >= level - noise[lowest:])
    end = lowest + int(above[0]) if above.size else top
    end = min(end + 6, rate.size - 1)
    keep = np.zeros(rate.size, dtype=bool)
    keep[: end + 1] = True
    return keep & clear


def search_edge(scan: Scan, clear: NDArray[np.bool_]) -> float | None:
    """Reading at which a continuum most likely begins, degrees.

    For each candidate a decaying beam, a sloping background and a bent ramp from the candidate
    on are fitted by weighted least squares to the rising part of the scan; the candidate with
    the least chi-square wins. None if no ramp stands out.

    Parameters
    ----------
    scan : Scan
        The counts.
    clear : ndarray of bool, shape (n,)
        Points that no characteristic line touches.
    """
    keep = rising_part(scan, clear)
    if int(keep.sum()) < _LEAST_POINTS:
        return None
    readings = scan.reading_deg[keep]
    rate = scan.counts[keep] / scan.dwell_s[keep]
    smooth = _running_mean(scan.counts[keep].astype(float), _SMOOTHING) + 1.0
    weight = scan.dwell_s[keep] ** 2 / smooth
    step = max(scan.step_deg, 1e-3)
    candidates = np.arange(readings[0] + 2.0 * step, readings[-1] - 1.5 * step, 0.5 * step)
    if candidates.size == 0:
        return None
    ramp = np.maximum(readings[np.newaxis, :] - candidates[:, np.newaxis], 0.0)
    plain = np.stack(
        [
            np.ones_like(readings),
            readings - readings.mean(),
            np.exp(-(readings - readings[0]) / _BEAM_DECAY_DEG),
        ]
    )
    design = np.concatenate(
        [np.broadcast_to(plain, (candidates.size, *plain.shape)), np.stack([ramp, ramp**2], 1)],
        axis=1,
    )
    weighted = design * weight
    normal = weighted @ np.swapaxes(design, 1, 2)
    normal += 1e-9 * np.trace(normal, axis1=1, axis2=2)[:, None, None] * np.eye(5) / 5.0
    moment = weighted @ rate
    solution = np.linalg.solve(normal, moment[..., np.newaxis])[..., 0]
    chi2 = np.sum(weight * rate**2) - np.sum(solution * moment, axis=1)
    flat = plain * weight @ plain.T
    flat_solution = np.linalg.lstsq(flat, plain * weight @ rate, rcond=None)[0]
    flat_chi2 = np.sum(weight * rate**2) - flat_solution @ (plain * weight @ rate)
    chi2 = np.where(solution[:, 3] > 0.0, chi2, np.inf)
    best = int(np.argmin(chi2))
    if not np.isfinite(chi2[best]) or flat_chi2 - chi2[best] < 16.0:
        return None
    return float(candidates[best])
