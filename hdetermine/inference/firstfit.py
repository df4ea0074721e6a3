"""The first fit of a scan: where its edge is, what stands in its way, whether it is usable."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hdetermine.inference.edgefamily import Obstacle, best_start, windows
from hdetermine.inference.edgemodel import EdgeFit, LineTemplate, Surroundings
from hdetermine.inference.edgesearch import search_edge
from hdetermine.inference.linesearch import (
    absorption_edges,
    anode_edges,
    energy_eV,
    scan_features,
)
from hdetermine.inference.refusals import (
    dropouts,
    insignificant,
    line_inside,
    no_window,
    range_refusal,
    saturated,
)
from hdetermine.inference.smearing import Kernel
from hdetermine.records.results import AngleScale
from hdetermine.records.run import Run
from hdetermine.records.scan import Scan

LINE_REACH_WIDTHS = 1.8  # a line disturbs the continuum so many widths from its centre
ABSORPTION_REACH_WIDTHS = 0.7
PRODUCT_TOLERANCE = 0.12  # of sin(theta) U against the median of the run


@dataclass(frozen=True, slots=True, eq=False)
class Edge:
    """A scan on its way to a cutoff."""

    scan: Scan
    given: Surroundings
    points: NDArray[np.bool_]
    obstacles: tuple[Obstacle, ...]
    fit: EdgeFit


def surroundings(run: Run, scale: AngleScale, scan: Scan) -> Surroundings:
    """What the fits of a scan take as given, inputs at their estimates."""
    apparatus = run.apparatus
    return Surroundings(
        zero_deg=scale.zero.value,
        kernel=Kernel(scale.resolution.value, scale.kernel.value),
        excess=apparatus.continuum.near_limit_excess.value,
        excess_energy_keV=apparatus.continuum.near_limit_energy_keV.value,
        energy_keV=energy_eV(apparatus, scan.tube_voltage_kV) * 1e-3,
        dead_time_us=apparatus.counter.dead_time_us.value,
        dead_time_model=apparatus.counter.dead_time_model,
    )


def _obstacles(run: Run, scale: AngleScale, scan: Scan) -> tuple[Obstacle, ...]:
    """Excited lines and absorption edges, as readings, by angle."""
    width = scale.resolution.value
    found = []
    for feature in scan_features(run, scan):
        centres = [angle for angle, _, _ in feature.components]
        low = min(centres) + scale.zero.value - LINE_REACH_WIDTHS * width
        high = max(centres) + scale.zero.value + LINE_REACH_WIDTHS * width
        # The anode's own edge stands so close below K-M that a window holds both or neither.
        own = [angle for angle in anode_edges(run) if low < angle + scale.zero.value < high]
        template = LineTemplate(feature.components, own[0] if own else None)
        found.append(Obstacle(low, high, template))
    for angle in absorption_edges(run):
        reading = angle + scale.zero.value
        reach = ABSORPTION_REACH_WIDTHS * width
        found.append(Obstacle(reading - reach, reading + reach, None))
    return tuple(sorted(found, key=lambda obstacle: obstacle.from_deg))


def _clear_points(scan: Scan, obstacles: tuple[Obstacle, ...]) -> NDArray[np.bool_]:
    clear = np.ones(scan.reading_deg.size, dtype=bool)
    for obstacle in obstacles:
        if obstacle.template is not None:
            inside = (scan.reading_deg > obstacle.from_deg) & (scan.reading_deg < obstacle.to_deg)
            clear &= ~inside
    return clear


def first_guesses(run: Run, scale: AngleScale) -> dict[str, float | None]:
    """First guesses; those far from the median of sin(theta) U are moved to it."""
    guesses: dict[str, float | None] = {}
    products = []
    for scan in run.scans:
        guess = None
        if scan.edge and not scan.leave_out:
            guess = search_edge(scan, _clear_points(scan, _obstacles(run, scale, scan)))
        guesses[scan.name] = guess
        if guess is not None:
            sine = math.sin(math.radians(guess - scale.zero.value))
            products.append(sine * scan.tube_voltage_kV)
    if len(products) < 3:
        return guesses
    median = float(np.median(products))
    for scan in run.scans:
        sine = median / scan.tube_voltage_kV
        if not 0.0 < sine < 1.0:
            continue
        expected = math.degrees(math.asin(sine)) + scale.zero.value
        guess = guesses[scan.name]
        if guess is None:
            guesses[scan.name] = expected
            continue
        ratio = math.sin(math.radians(guess - scale.zero.value)) / sine
        if abs(ratio - 1.0) > PRODUCT_TOLERANCE:
            guesses[scan.name] = expected
    return guesses


def first_fit(run: Run, scale: AngleScale, scan: Scan, guess: float | None) -> Edge | str:
    """Fit one generous window, or say why the scan carries no usable edge."""
    if scan.leave_out:
        return f"left out by the run sheet: {scan.leave_out}"
    if not scan.edge:
        return "reference scan: it serves the angle scale only"
    if guess is None:
        return "too few counts: no edge stands out from the background"
    given = surroundings(run, scale, scan)
    width = given.kernel.fwhm_deg
    obstacles = _obstacles(run, scale, scan)
    points = np.ones(scan.reading_deg.size, dtype=bool)
    if scan.fit_from_deg is not None or scan.fit_to_deg is not None:
        guess = _clamp(scan, guess)
    reason = range_refusal(scan, guess, width)
    if reason:
        return reason
    above = tuple(obstacle for obstacle in obstacles if obstacle.to_deg > guess - 0.2 * width)
    fit = _generous_fit(scan, points, guess, given, above)
    if fit is None:
        return no_window(scan, guess, width, above)
    reason = line_inside(fit, above, given) or range_refusal(scan, fit.reading_deg, width)
    if reason:
        return reason
    reason = saturated(fit) or insignificant(fit)
    if reason:
        return reason
    points = points & ~dropouts(scan, fit)
    if not points.all():
        again = _generous_fit(scan, points, fit.reading_deg, given, above)
        fit = again or fit
    return Edge(scan, given, points, above, fit)


def _clamp(scan: Scan, guess: float) -> float:
    low = scan.fit_from_deg if scan.fit_from_deg is not None else scan.reading_deg[0]
    high = scan.fit_to_deg if scan.fit_to_deg is not None else scan.reading_deg[-1]
    return guess if low < guess < high else 0.5 * (low + high)


def _generous_fit(
    scan: Scan,
    points: NDArray[np.bool_],
    guess: float,
    given: Surroundings,
    obstacles: tuple[Obstacle, ...],
) -> EdgeFit | None:
    best: EdgeFit | None = None
    for _ in range(3):
        members = [
            window
            for window in windows(scan, points, guess, given, obstacles)
            if window.background_terms == 2
        ]
        if not members:
            return best
        members.sort(key=lambda window: (len(window.lines), -window.counts.size))
        best = best_start(members[min(1, len(members) - 1)], guess, given)
        if abs(best.reading_deg - guess) < 0.5 * given.kernel.fwhm_deg:
            break
        guess = best.reading_deg
    return best
