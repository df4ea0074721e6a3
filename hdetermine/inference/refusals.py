"""Reasons why a scan carries no usable edge. Each returns a sentence, or an empty text."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from hdetermine.inference.edgefamily import LEAST_ABOVE, LEAST_BELOW, Obstacle
from hdetermine.inference.edgemodel import EdgeFit, Surroundings
from hdetermine.inference.scoring import maximise
from hdetermine.records.scan import Scan

FloatArray = NDArray[np.float64]

LINE_INSIDE_WIDTHS = 0.8  # a line so close above the edge cannot be told from it
EDGE_SIGNIFICANCE = 20.0  # fall of the deviance when the edge is added
LARGEST_RELATIVE_U = 0.05
LARGEST_DEAD_FRACTION = 0.5
LARGEST_DEAD_FRACTION_PARALYSABLE = 0.3  # its maximum is 1/e
DROPOUT_DEVIANCE = 36.0


def range_refusal(scan: Scan, edge_deg: float, width: float) -> str:
    """Say whether the scan reaches far enough to both sides of an edge."""
    below = int(np.sum(scan.reading_deg < edge_deg - 0.5 * width))
    above = int(np.sum(scan.reading_deg > edge_deg + 0.5 * width))
    if below < LEAST_BELOW:
        return "no background below the edge: the scan starts too late"
    if above < LEAST_ABOVE:
        return "the edge lies outside the range or at the end of the scan"
    return ""


def no_window(scan: Scan, guess: float, width: float, above: tuple[Obstacle, ...]) -> str:
    """Say why no window of the family holds enough points."""
    if above and above[0].from_deg < guess + width:
        return "a characteristic line or absorption edge stands too close above the edge"
    return "too few points around the edge for a fit"


def line_inside(fit: EdgeFit, above: tuple[Obstacle, ...], given: Surroundings) -> str:
    """Say whether a characteristic line stands within the smearing of the edge."""
    for obstacle in above:
        if obstacle.template is None:
            continue
        first = min(angle for angle, _, _ in obstacle.template.components) + given.zero_deg
        if abs(first - fit.reading_deg) < LINE_INSIDE_WIDTHS * given.kernel.fwhm_deg:
            return "a characteristic line stands inside the smeared edge"
    return ""


def saturated(fit: EdgeFit) -> str:
    """Say whether the counter was dead too long, or stopped at its largest count."""
    window = fit.window
    recorded = window.counts / window.dwell_s
    dead = float(recorded.max()) * fit.given.dead_time_us * 1e-6
    paralysable = fit.given.dead_time_model == "paralysable"
    limit = LARGEST_DEAD_FRACTION_PARALYSABLE if paralysable else LARGEST_DEAD_FRACTION
    if dead >= 1.0:
        return (
            f"saturation: {recorded.max():.0f} recorded counts a second are more than a dead time "
            f"of {fit.given.dead_time_us:.0f} µs lets through"
        )
    if dead > limit:
        return (
            f"saturation: {recorded.max():.0f} recorded counts a second leave the counter dead "
            f"for {100 * dead:.0f} % of the time"
        )
    top = window.counts.max()
    at_top = window.counts == top
    if top > 200 and int(at_top.sum()) >= 4 and bool(np.all(np.diff(np.flatnonzero(at_top)) == 1)):
        return f"saturation: the counter stops at {top:.0f} counts"
    return ""


def insignificant(fit: EdgeFit) -> str:
    """Say whether the counts could be a background without an edge."""
    window = fit.window
    position = np.linspace(-1.0, 1.0, window.counts.size)
    design = np.stack([np.ones_like(position), position], axis=1)

    def model(parameters: FloatArray) -> tuple[FloatArray, FloatArray]:
        rate = window.dwell_s * np.exp(np.clip(design @ parameters, -30.0, 30.0))
        return np.maximum(rate, 1e-9), rate[:, np.newaxis] * design

    def prior(parameters: FloatArray) -> tuple[float, FloatArray, FloatArray]:
        return 0.0, np.zeros(2), np.full(2, 1e-6)

    mean = max(float(window.counts.sum()), 0.5) / float(window.dwell_s.sum())
    start = np.array([math.log(mean), 0.0])
    plain = maximise(window.counts, model, prior, start, np.full(2, 1.0))
    if plain.deviance - fit.maximum.deviance < EDGE_SIGNIFICANCE:
        return "too few counts: no edge stands out from the background"
    return uncertain(fit.reading_deg - fit.given.zero_deg, fit.reading_u_deg)


def uncertain(angle_deg: float, u_deg: float) -> str:
    """Say whether a cutoff at this true angle would be too uncertain to be of use."""
    relative = math.radians(u_deg) / math.tan(math.radians(max(angle_deg, 0.1)))
    if relative > LARGEST_RELATIVE_U:
        return f"too few counts: the cutoff would be uncertain by {100 * relative:.0f} %"
    return ""


def dropouts(scan: Scan, fit: EdgeFit) -> NDArray[np.bool_]:
    """Mark isolated readings far below fit and neighbours: the counter missed a step."""
    drop = np.zeros(scan.reading_deg.size, dtype=bool)
    where = np.searchsorted(scan.reading_deg, fit.window.reading_deg)
    expected = fit.maximum.expected
    counts = fit.window.counts
    for i, index in enumerate(where):
        missing = expected[i] - counts[i]
        if (
            missing > 0
            and missing**2 / expected[i] > DROPOUT_DEVIANCE
            and counts[i] < 0.3 * (expected[i])
        ):
            drop[index] = True
    return drop if int(drop.sum()) <= 2 else np.zeros_like(drop)
