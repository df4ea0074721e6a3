"""A family of fits around one edge, and their average.

No single window is right: a short one lacks leverage, a long one trusts the smooth factor too
far. Every member of the family (lower end, upper end, terms of the background, a line modelled or
kept out) is fitted, and the cutoffs are averaged with weights exp(-A/2), where

    A = deviance + 2 (parameters) + 2 (points left out)

(Jay and Neil, Phys. Rev. D 103, 114502 (2021), eq. 48; the deviance stands for chi-square). The
spread between the members, split into windows and backgrounds, joins the uncertainty.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hdetermine.inference.edgemodel import EdgeFit, EdgeWindow, LineTemplate, Surroundings, fit_edge
from hdetermine.records.scan import Scan

FloatArray = NDArray[np.float64]

_SPANS = (0.12, 0.2, 0.3, 0.45)  # upper end: wavelength beyond the cutoff, relative
_DEPTHS_WIDTHS = (4.0, 9.0)  # lower end, in resolution widths below the cutoff
_DEPTHS_STEPS = (8.0, 18.0)  # ... but at least so many steps
BACKGROUNDS = (2, 3)  # a level alone would bias the cutoff wherever the background slopes
LEAST_BELOW = 3
LEAST_ABOVE = 4
_LEAST_FREEDOM = 2
_HEAVIEST = 24  # difference in A beyond which a member has no weight


@dataclass(frozen=True, slots=True)
class Obstacle:
    """Something above the edge that the continuum model does not describe.

    Attributes
    ----------
    from_deg, to_deg : float
        Readings between which it disturbs the continuum.
    template : LineTemplate or None
        A line that can be modelled; None for an absorption edge.
    """

    from_deg: float
    to_deg: float
    template: LineTemplate | None


@dataclass(frozen=True, slots=True, eq=False)
class Family:
    """Fits of one edge, heaviest first, with their weights.

    `counting_u_deg`, `window_u_deg` and `background_u_deg` are the parts of the uncertainty of
    `reading_deg` that the scan itself brings.
    """

    fits: tuple[EdgeFit, ...]
    weights: FloatArray
    reading_deg: float
    counting_u_deg: float
    window_u_deg: float
    background_u_deg: float

    @property
    def heaviest(self) -> EdgeFit:
        """The fit with the largest weight."""
        return self.fits[0]


def _reading_at(edge_deg: float, zero_deg: float, stretch: float) -> float:
    sine = math.sin(math.radians(edge_deg - zero_deg)) * stretch
    return math.degrees(math.asin(min(sine, 0.999))) + zero_deg


def windows(
    scan: Scan,
    points: NDArray[np.bool_],
    edge_deg: float,
    given: Surroundings,
    obstacles: tuple[Obstacle, ...],
) -> Iterator[EdgeWindow]:
    """Every member of the family around a first guess of the edge.

    Parameters
    ----------
    scan : Scan
        The counts.
    points : ndarray of bool, shape (n,)
        Points that may be used.
    edge_deg : float
        First guess of the cutoff reading.
    given : Surroundings
        For zero and resolution.
    obstacles : tuple of Obstacle
        Lines and absorption edges above the edge, by angle.
    """
    width, step = given.kernel.fwhm_deg, scan.step_deg
    first = obstacles[0].from_deg if obstacles else math.inf
    ends: dict[float, tuple[LineTemplate, ...]] = {}
    for span in _SPANS:
        end = _reading_at(edge_deg, given.zero_deg, 1.0 + span)
        ends[round(min(end, first), 6)] = ()
    if obstacles and obstacles[0].template is not None:
        templates: list[LineTemplate] = []
        for i, obstacle in enumerate(obstacles[:2]):
            if obstacle.template is None:
                break
            templates.append(obstacle.template)
            beyond = obstacles[i + 1].from_deg if i + 1 < len(obstacles) else math.inf
            end = min(_reading_at(edge_deg, given.zero_deg, 1.0 + _SPANS[-1]), beyond)
            if end > obstacle.to_deg:
                ends[round(end, 6)] = tuple(templates)
                break
    seen: set[tuple[int, int, int, int]] = set()
    for end, lines in ends.items():
        for in_widths, in_steps in zip(_DEPTHS_WIDTHS, _DEPTHS_STEPS, strict=True):
            start = edge_deg - max(in_widths * width, in_steps * step)
            take = points & (scan.reading_deg >= start - 1e-9) & (scan.reading_deg <= end + 1e-9)
            readings = scan.reading_deg[take]
            if not _enough(readings, edge_deg, width):
                continue
            for background in BACKGROUNDS:
                window = EdgeWindow(
                    readings,
                    scan.counts[take].astype(float),
                    scan.dwell_s[take],
                    background,
                    lines,
                )
                key = (int(np.argmax(take)), readings.size, background, len(lines))
                if key in seen or readings.size - window.parameters < _LEAST_FREEDOM:
                    continue
                seen.add(key)
                yield window


def _enough(readings: FloatArray, edge_deg: float, width_deg: float) -> bool:
    below = int(np.sum(readings < edge_deg - 0.5 * width_deg))
    above = int(np.sum(readings > edge_deg + 0.5 * width_deg))
    return below >= LEAST_BELOW and above >= LEAST_ABOVE


def first_parameters(window: EdgeWindow, edge_deg: float, given: Surroundings) -> FloatArray:
    """A sensible start for `fit_edge`."""
    rate = window.counts / window.dwell_s
    below = rate[window.reading_deg < edge_deg - 0.3 * given.kernel.fwhm_deg]
    floor = max(float(below.mean()) if below.size else 0.0, 0.3 / float(window.dwell_s.sum()))
    height = max(float(rate.max()) - floor, floor)
    reach = math.sin(math.radians(window.reading_deg[-1] - given.zero_deg))
    x = reach / math.sin(math.radians(edge_deg - given.zero_deg)) - 1.0
    start = [edge_deg, math.log(height / max(x, 0.02)), *window.smooth_mean]
    start += [math.log(floor), *([0.0] * (window.background_terms - 1))]
    for _ in window.lines:
        start += [math.log(height * given.kernel.fwhm_deg), 0.0]
    start += [0.0] * len(window.absorption_deg)
    return np.array(start)


def best_start(window: EdgeWindow, edge_deg: float, given: Surroundings) -> EdgeFit:
    """Fit one window from several starting points and keep the best."""
    width = max(given.kernel.fwhm_deg, 2.0 * float(np.median(np.diff(window.reading_deg))))
    best: EdgeFit | None = None
    for offset in (0.0, 0.5 * width, -0.7 * width, 1.2 * width):
        start = first_parameters(window, edge_deg + offset, given)
        fit = fit_edge(window, given, start)
        if best is None or _objective(fit) < _objective(best) - 1e-3:
            best = fit
    assert best is not None
    return best


def _objective(fit: EdgeFit) -> float:
    return fit.maximum.deviance + fit.maximum.penalty


def fit_family(every: tuple[EdgeWindow, ...], start: EdgeFit, given: Surroundings) -> Family | None:
    """Fit all members from a common start and average them; None if none converges."""
    fits = []
    for window in every:
        parameters = first_parameters(window, start.reading_deg, given)
        fit = fit_edge(window, given, parameters)
        if not fit.maximum.converged:
            again = best_start(window, start.reading_deg, given)
            fit = again if again.maximum.converged else fit
        inside = window.reading_deg[0] < fit.reading_deg < window.reading_deg[-1]
        # An uncertainty longer than the window says that there is no edge in it.
        told = fit.reading_u_deg < window.reading_deg[-1] - window.reading_deg[0]
        if fit.maximum.converged and inside and told:
            fits.append(fit)
    return average(tuple(fits)) if fits else None


def average(fits: tuple[EdgeFit, ...]) -> Family:
    """Average fits of one edge with the weights of the module's formula."""
    most = max(fit.window.counts.size for fit in fits)
    criterion = np.array(
        [
            fit.maximum.deviance
            + 2.0 * fit.window.parameters
            + 2.0 * (most - fit.window.counts.size)
            for fit in fits
        ]
    )
    order = np.argsort(criterion, kind="stable")
    order = order[criterion[order] < criterion[order[0]] + _HEAVIEST]
    weights = np.exp(-0.5 * (criterion[order] - criterion[order[0]]))
    weights = weights / weights.sum()
    kept = tuple(fits[i] for i in order)
    readings = np.array([fit.reading_deg for fit in kept])
    variances = np.array([fit.reading_u_deg**2 for fit in kept])
    mean = float(weights @ readings)
    between = 0.0
    for terms in BACKGROUNDS:
        group = np.array([fit.window.background_terms == terms for fit in kept])
        share = float(weights[group].sum())
        if share > 0.0:
            group_mean = float(weights[group] @ readings[group]) / share
            between += share * (group_mean - mean) ** 2
    spread = float(weights @ (readings - mean) ** 2)
    return Family(
        fits=kept,
        weights=weights,
        reading_deg=mean,
        counting_u_deg=math.sqrt(float(weights @ variances)),
        window_u_deg=math.sqrt(max(spread - between, 0.0)),
        background_u_deg=math.sqrt(between),
    )
