"""Characteristic lines: where each stands on the goniometer, and how wide it is.

Every group of lines that a scan covers (and that its voltage excites) is fitted on its own:
position, width, form of the kernel, amplitude, and a local sloping background, by the Poisson
likelihood with the dead time inside. Doublets keep their known separation and ratio.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import block_diag
from scipy.special import ndtr

from hdetermine.inference.features import Feature, covered
from hdetermine.inference.scoring import Maximum, maximise
from hdetermine.inference.smearing import FWHM_PER_SIGMA, Kernel
from hdetermine.physics.counting import recorded_rate, recorded_slope
from hdetermine.records.apparatus import DeadTimeModel
from hdetermine.records.scan import Scan

FloatArray = NDArray[np.float64]

_REACH_WIDTHS = 2.2
_NARROW_REACH_DEG = 0.35
_LOOK_DEG = 0.9  # half window of the first look at a line
_LEAST_LOOK = 7
SIGNIFICANT = 8.0  # amplitude over its standard uncertainty
_LOCAL = 6  # position, log width, kernel, and level, slope and bend of the log background
_BACKGROUND_U = (3.0, 0.7)  # weak priors of slope and bend over half the window
_STEP_U = 2.0  # weak prior of the logarithm of an absorption edge's step
_WIDEST_DEG = 0.8
_STEP = 1e-4  # of the derivatives by position and by logarithm of the width
# Prior of the kernel's form: a rectangular distribution between Gaussian and triangle.
KERNEL_CENTRE, KERNEL_U = 0.5, 0.29
WIDEST_FORM = 2.0  # strong lines may ask for a box
_BOXY = 0.9  # a form from which on a box is tried


@dataclass(frozen=True, slots=True)
class FittedLine:
    """A feature as found in one scan: shift from the ideal angle, width, kernel form."""

    scan: str
    feature: Feature
    shift_deg: float
    shift_u_deg: float
    fwhm_deg: float
    fwhm_u_deg: float
    triangular_fraction: float
    triangular_fraction_u: float
    significance: float
    misfit: float


def search_zero(
    scan: Scan, every: tuple[Feature, ...], zero_deg: float, reach_deg: float
) -> tuple[float, float] | None:
    """Zero offset at which the expected pattern of lines fits a scan best.

    Every feature is matched above a local parabola, and the matches add up.

    Returns
    -------
    (zero, score) or None
        Degrees, and the height of the match in standard deviations; None without lines.
    """
    if scan.reading_deg.size < 15:
        return None
    rate = scan.counts / scan.dwell_s
    variance = np.maximum(scan.counts, 1.0) / scan.dwell_s**2
    step = max(0.25 * scan.step_deg, 0.01)
    best: tuple[float, float] | None = None
    for zero in np.arange(zero_deg - reach_deg, zero_deg + reach_deg + 0.5 * step, step):
        inside = covered(scan, every, float(zero), 0.1)
        score = sum(
            _prominence(scan.reading_deg - zero, rate, variance, feature) for feature in inside
        )
        if inside and (best is None or score > best[1]):
            best = (float(zero), score)
    return best


def _prominence(
    angles: FloatArray, rate: FloatArray, variance: FloatArray, feature: Feature
) -> float:
    """Amplitude of a feature over a local parabola, in standard uncertainties; not negative."""
    distance = angles - feature.angle_deg
    near = np.abs(distance) < _LOOK_DEG
    if int(near.sum()) < _LEAST_LOOK:
        return 0.0
    away = distance[near] / _LOOK_DEG
    centre, _, strength = np.array(feature.components).T
    profile = Kernel(0.25, 0.5).profile(angles[near][:, np.newaxis] - centre) @ strength
    design = np.stack([profile, np.ones_like(away), away, away**2], axis=1)
    weighted = design / variance[near][:, np.newaxis]
    normal = design.T @ weighted
    normal[np.diag_indices(4)] *= 1.0 + 1e-9
    covariance = np.linalg.inv(normal)
    amplitude = float((covariance @ (weighted.T @ rate[near]))[0])
    return max(amplitude / math.sqrt(max(float(covariance[0, 0]), 1e-300)), 0.0)


def _clusters(inside: tuple[Feature, ...], reach_deg: float) -> Iterator[tuple[Feature, ...]]:
    """Join features whose windows overlap."""
    cluster: list[Feature] = []
    for feature in inside:
        if cluster and feature.angle_deg - cluster[-1].angle_deg > 2.0 * reach_deg:
            yield tuple(cluster)
            cluster = []
        cluster.append(feature)
    if cluster:
        yield tuple(cluster)


def fit_lines(
    scan: Scan,
    every: tuple[Feature, ...],
    zero_deg: float,
    dead_time_us: float,
    dead_time_model: DeadTimeModel,
    absorption_deg: tuple[float, ...] = (),
) -> tuple[FittedLine, ...]:
    """Fit the lines that a scan covers.

    Parameters
    ----------
    scan : Scan
        The counts.
    every : tuple of Feature
        What the voltage excites.
    zero_deg : float
        First guess of the zero offset.
    dead_time_us, dead_time_model : float, str
        Of the counter.
    absorption_deg : tuple of float
        True angles of absorption edges, where the background has a step.

    Returns
    -------
    tuple of FittedLine
        Converged fits only; insignificant lines are left to the caller.
    """
    inside = covered(scan, every, zero_deg, 0.15)
    reach = _NARROW_REACH_DEG
    fits: list[tuple[tuple[Feature, ...], Maximum]] = []
    for _ in range(2):
        fits = []
        for cluster in _clusters(inside, reach):
            fit = _settle_width(
                scan, cluster, zero_deg, dead_time_us, dead_time_model, absorption_deg
            )
            if fit is not None and fit.converged:
                fits.append((cluster, fit))
        # The width of a line that is hardly seen says nothing.
        widest = max(
            (_width(fit) for cluster, fit in fits if _significance(cluster, fit) > SIGNIFICANT),
            default=0.0,
        )
        if _REACH_WIDTHS * min(widest, _WIDEST_DEG) <= reach:
            break
        # Broad lines overlap with their neighbours: fit those together.
        reach = _REACH_WIDTHS * min(widest, _WIDEST_DEG)
    return tuple(line for cluster, fit in fits for line in _harvest(scan.name, cluster, fit))


def _width(fit: Maximum) -> float:
    return math.exp(float(np.clip(fit.parameters[1], -4.0, 1.0)))


def _strongest(cluster: tuple[Feature, ...], fit: Maximum) -> int:
    """Place of the strongest line of a cluster among its lines, which come last."""
    return int(np.argmax(fit.parameters[-len(cluster) :]))


def _significance(cluster: tuple[Feature, ...], fit: Maximum) -> float:
    """Amplitude of the strongest line over its standard uncertainty."""
    strongest = _strongest(cluster, fit) - len(cluster)
    return 1.0 / max(math.sqrt(max(float(fit.covariance()[strongest, strongest]), 0.0)), 1e-6)


def _settle_width(
    scan: Scan,
    cluster: tuple[Feature, ...],
    zero_deg: float,
    dead_time_us: float,
    dead_time_model: DeadTimeModel,
    absorption_deg: tuple[float, ...],
) -> Maximum | None:
    """Fit a cluster in a window that suits the width it finds."""
    width = _width_guess(scan, cluster, zero_deg)
    fit = None
    for _ in range(3):
        fit = _fit_cluster(
            scan, cluster, zero_deg, width, dead_time_us, dead_time_model, absorption_deg
        )
        if fit is None or abs(_width(fit) / width - 1.0) < 0.15:
            break
        width = min(max(_width(fit), 0.5 * width), 2.0 * width)
    return fit


def _width_guess(scan: Scan, cluster: tuple[Feature, ...], zero_deg: float) -> float:
    """Area over height of the strongest peak of a cluster, degrees."""
    centre = np.array([feature.angle_deg for feature in cluster]) + zero_deg
    near = np.abs(scan.reading_deg[:, np.newaxis] - centre) < 0.7
    rate = (scan.counts / scan.dwell_s)[near.any(axis=1)]
    if rate.size < 3:
        return 0.25
    above = rate - np.quantile(rate, 0.2)
    width = float(above.clip(min=0.0).sum()) * scan.step_deg / max(float(above.max()), 1e-9)
    return float(np.clip(width / len(cluster), 1.2 * scan.step_deg, _WIDEST_DEG))


def _fit_cluster(
    scan: Scan,
    cluster: tuple[Feature, ...],
    zero_deg: float,
    width_deg: float,
    dead_time_us: float,
    dead_time_model: DeadTimeModel,
    absorption_deg: tuple[float, ...],
) -> Maximum | None:
    reach = max(_REACH_WIDTHS * width_deg, 4.0 * scan.step_deg)
    low, high = cluster[0].angle_deg + zero_deg - reach, cluster[-1].angle_deg + zero_deg + reach
    take = (scan.reading_deg >= low) & (scan.reading_deg <= high)
    steps = np.array([angle for angle in absorption_deg if low < angle + zero_deg < high])
    local = _LOCAL + steps.size
    size = local + len(cluster)
    if int(take.sum()) < size + 1:
        return None
    readings, dwell = scan.reading_deg[take], scan.dwell_s[take]
    counts = scan.counts[take].astype(float)
    half = 0.5 * (readings[-1] - readings[0])
    powers = ((readings - readings[0]) / half - 1.0) ** np.arange(3)[:, np.newaxis]
    # Part of the smeared step that a reading is past.
    past = ndtr((readings - zero_deg - steps[:, np.newaxis]) * FWHM_PER_SIGMA / width_deg)
    dead_time_s = dead_time_us * 1e-6

    lines, natural, _ = np.concatenate([np.array(one.components) for one in cluster]).T
    owned = block_diag(*[np.array(one.components)[:, 2:] for one in cluster])

    def profiles(shift_deg: FloatArray, log_width: float, fraction: float) -> FloatArray:
        """Shapes of the features, shape (shifts, features, points)."""
        kernel = Kernel(math.exp(min(max(log_width, -4.0), 1.0)), fraction)
        distance = readings[:, np.newaxis] - shift_deg[:, np.newaxis, np.newaxis] - lines
        return np.asarray((kernel.profile(distance, natural) @ owned).transpose(0, 2, 1))

    least, most = np.full(size, -np.inf), np.full(size, np.inf)
    least[2], most[2] = 0.0, 1.0

    def model(parameters: FloatArray) -> tuple[FloatArray, FloatArray]:
        jump = np.exp(np.clip(parameters[_LOCAL:local], -30.0, 30.0))[:, np.newaxis]
        gate = 1.0 + (jump - 1.0) * past
        base = np.exp(np.clip(parameters[3:_LOCAL] @ powers, -30.0, 30.0)) * gate.prod(axis=0)
        strength = np.exp(np.clip(parameters[local:], -30.0, 30.0))
        zero, log_width, fraction = parameters[:3].tolist()
        shifted = np.array([zero, zero + _STEP, zero - _STEP])
        shapes, ahead, behind = profiles(shifted, log_width, fraction)
        wider = profiles(shifted[:1], log_width + _STEP, fraction)[0]
        narrower = profiles(shifted[:1], log_width - _STEP, fraction)[0]
        # Between its bounds, two neighbours of the row, the profile is linear in the form.
        step = _STEP if 2.0 * fraction < least[2] + most[2] else -_STEP
        formed = profiles(shifted[:1], log_width, fraction + step)[0]
        rate = base + strength @ shapes
        columns = [
            strength @ (ahead - behind) / (2.0 * _STEP),
            strength @ (wider - narrower) / (2.0 * _STEP),
            strength @ (formed - shapes) / step,
        ]
        columns += [*(base * powers), *(base * jump * past / gate)]
        columns += [*(strength[:, np.newaxis] * shapes)]
        slope = dwell * recorded_slope(rate, dead_time_s, dead_time_model)
        expected = dwell * recorded_rate(rate, dead_time_s, dead_time_model)
        return np.maximum(expected, 1e-9), slope[:, np.newaxis] * np.stack(columns, axis=1)

    precision, centre = np.zeros(size), np.zeros(size)
    precision[2], centre[2] = KERNEL_U**-2, KERNEL_CENTRE
    precision[4:_LOCAL] = np.array(_BACKGROUND_U) ** -2.0
    precision[_LOCAL:local] = _STEP_U**-2

    def prior(parameters: FloatArray) -> tuple[float, FloatArray, FloatArray]:
        gradient = precision * (parameters - centre)
        return float(np.sum(gradient * (parameters - centre))), gradient, precision

    floor = max(float(np.min(counts / dwell)), 0.2 / float(dwell[0]))
    height = max(float(np.max(counts / dwell)) - floor, floor)
    start = np.array(
        [zero_deg, math.log(width_deg), 0.5, math.log(floor), 0.0, 0.0, *(0.0 * steps)]
        + [math.log(height * width_deg)] * len(cluster)
    )
    limits = np.ones(size)
    limits[:3] = 0.5 * width_deg, 0.4, 0.3
    found = maximise(counts, model, prior, start, limits, bounds=(least, most))
    if found.parameters[2] < _BOXY:
        return found
    # The form has a kink at the triangle: what lies beyond is a fit of its own.
    least[2], most[2] = 1.0, WIDEST_FORM
    start[2] = WIDEST_FORM - 0.1
    other = maximise(counts, model, prior, start, limits, bounds=(least, most))
    better = other.deviance + other.penalty < found.deviance + found.penalty
    return other if other.converged and better else found


def _harvest(scan: str, cluster: tuple[Feature, ...], fit: Maximum) -> Iterator[FittedLine]:
    covariance = fit.covariance()
    u = np.sqrt(np.maximum(np.diag(covariance), 0.0))
    freedom = max(fit.expected.size - fit.parameters.size, 1)
    misfit = max(math.sqrt(fit.deviance / freedom), 1.0)
    width = math.exp(float(fit.parameters[1]))
    feature = cluster[_strongest(cluster, fit)]
    yield FittedLine(
        scan=scan,
        feature=feature,
        shift_deg=float(fit.parameters[0]),
        shift_u_deg=float(u[0]) * misfit,
        fwhm_deg=width,
        fwhm_u_deg=width * float(u[1]) * misfit,
        triangular_fraction=float(fit.parameters[2]),
        triangular_fraction_u=float(u[2]) * misfit,
        significance=_significance(cluster, fit),
        misfit=misfit,
    )
