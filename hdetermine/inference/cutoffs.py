"""Cutoffs: one for every scan with a usable edge, a reason for every other."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from hdetermine.inference import measurement as names
from hdetermine.inference.anglescale import crystal_spacing_pm, energy_eV, scan_features
from hdetermine.inference.edgefamily import (
    LEAST_ABOVE,
    LEAST_BELOW,
    Family,
    Obstacle,
    average,
    best_start,
    fit_family,
    windows,
)
from hdetermine.inference.edgemodel import (
    EdgeFit,
    EdgeWindow,
    LineTemplate,
    Surroundings,
    expected_counts,
    likelihood_sides,
    response_deg,
)
from hdetermine.inference.edgesearch import search_edge
from hdetermine.inference.resolution import common_resolution, resolution_answers
from hdetermine.inference.scoring import maximise
from hdetermine.inference.smearing import Kernel
from hdetermine.physics.bragg import glancing_angle_deg, wavelength_pm
from hdetermine.physics.lines import K_EDGE_pm
from hdetermine.records.results import AngleScale, Cutoff, FittedCurve, WindowFit
from hdetermine.records.run import Run
from hdetermine.records.scan import Scan

FloatArray = NDArray[np.float64]

LINE_REACH_WIDTHS = 1.8  # a line disturbs the continuum so many widths from its centre
ABSORPTION_REACH_WIDTHS = 0.7
LINE_INSIDE_WIDTHS = 0.8  # a line so close above the edge cannot be told from it
EDGE_SIGNIFICANCE = 20.0  # fall of the deviance when the edge is added
LARGEST_RELATIVE_U = 0.05
LARGEST_DEAD_FRACTION = 0.5
LARGEST_MISFIT = 12.0  # deviance per degree of freedom
PRODUCT_TOLERANCE = 0.12  # of sin(theta) U against the median of the run
DROPOUT_DEVIANCE = 36.0
RESOLUTION_TOLERANCE = 3.0  # in standard uncertainties, between edges and lines


@dataclass(frozen=True, slots=True, eq=False)
class _Edge:
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


def find_cutoffs(
    run: Run, scale: AngleScale, progress: Callable[[str, int, int], None] | None = None
) -> tuple[AngleScale, tuple[Cutoff, ...]]:
    """Fit the edge of every scan.

    Parameters
    ----------
    run : Run
        The run.
    scale : AngleScale
        From the lines or the run sheet.
    progress : callable, optional
        Called with ("edges", done, total).

    Returns
    -------
    scale : AngleScale
        With the resolution that the edges found, where nothing else told it.
    cutoffs : tuple of Cutoff
        One a scan, in the order of the run; their total uncertainty is still nan.
    """
    edges: dict[str, _Edge] = {}
    refused: dict[str, str] = {}
    guesses = _guesses(run, scale)
    for scan in run.scans:
        outcome = _first_fit(run, scale, scan, guesses[scan.name])
        if isinstance(outcome, str):
            refused[scan.name] = outcome
        else:
            edges[scan.name] = outcome
    scale, edges, answers = _settle_resolution(run, scale, edges)
    cutoffs = []
    for done, scan in enumerate(run.scans):
        if scan.name in refused:
            cutoffs.append(_refusal(scan, refused[scan.name]))
        else:
            cutoffs.append(_cutoff(run, scale, edges[scan.name], answers))
        if progress is not None:
            progress("edges", done + 1, len(run.scans))
    return scale, tuple(cutoffs)


def _settle_resolution(
    run: Run, scale: AngleScale, edges: dict[str, _Edge]
) -> tuple[AngleScale, dict[str, _Edge], dict[str, float]]:
    """Decide which width the edges are fitted with, and how it answers to the other inputs."""
    if not edges:
        return scale, edges, {}
    stated = scale.resolution
    fits = tuple(edge.fit for edge in edges.values())
    if scale.resolution_from == "lines":
        free, refitted = common_resolution(fits, replace(stated, standard_uncertainty=math.inf))
        answers = resolution_answers(refitted, free)
        spread = sum(
            (answers.get(quantity.name, 0.0) * quantity.standard_uncertainty) ** 2
            for quantity in (*run.apparatus.quantities(), scale.kernel)
        )
        u = math.sqrt(free.standard_uncertainty**2 + spread)
        pull = (free.value - stated.value) / math.hypot(u, stated.standard_uncertainty)
        scale = replace(
            scale, edge_resolution_deg=free.value, edge_resolution_u_deg=u, edge_pull=pull
        )
        if abs(pull) < RESOLUTION_TOLERANCE:
            return scale, edges, {}
        remark = (
            f"the edges are smeared over {free.value:.2f}°, the lines over {stated.value:.2f}°; "
            "the edges were fitted with their own width."
        )
        scale = replace(
            scale,
            resolution=free,
            resolution_from="edges, against the lines",
            remarks=(*scale.remarks, remark),
        )
    else:
        free, refitted = common_resolution(fits, stated)
        answers = resolution_answers(refitted, free)
        unknown = math.isinf(stated.standard_uncertainty)
        scale = replace(
            scale,
            resolution=free,
            resolution_from="edges" if unknown else "run sheet and edges",
        )
    moved = {
        name: replace(edge, given=fit.given, fit=fit)
        for (name, edge), fit in zip(edges.items(), refitted, strict=True)
    }
    return scale, moved, answers


def _obstacles(run: Run, scale: AngleScale, scan: Scan) -> tuple[Obstacle, ...]:
    """Excited lines and absorption edges, as readings, by angle."""
    width = scale.resolution.value
    crystal = run.apparatus.crystal
    found = []
    for feature in scan_features(run, scan):
        centres = [angle for angle, _, _ in feature.components]
        template = LineTemplate(feature.components)
        low = min(centres) + scale.zero.value - LINE_REACH_WIDTHS * width
        high = max(centres) + scale.zero.value + LINE_REACH_WIDTHS * width
        found.append(Obstacle(low, high, template))
    absorbers = (*crystal.elements, run.apparatus.tube.filter)
    for element in absorbers:
        if element in K_EDGE_pm:
            angle = float(
                glancing_angle_deg(
                    K_EDGE_pm[element], crystal_spacing_pm(crystal), crystal.refraction.value
                )
            )
            if math.isfinite(angle):
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


def _guesses(run: Run, scale: AngleScale) -> dict[str, float | None]:
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


def _first_fit(run: Run, scale: AngleScale, scan: Scan, guess: float | None) -> _Edge | str:
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
    reason = _range_refusal(scan, guess, width)
    if reason:
        return reason
    above = tuple(obstacle for obstacle in obstacles if obstacle.to_deg > guess - 0.2 * width)
    fit = _generous_fit(scan, points, guess, given, above)
    if fit is None:
        return _no_window(scan, guess, width, above)
    reason = _line_inside(fit, above, given) or _range_refusal(scan, fit.reading_deg, width)
    if reason:
        return reason
    reason = _saturated(fit) or _insignificant(fit)
    if reason:
        return reason
    points = points & ~_dropouts(scan, fit)
    if not points.all():
        again = _generous_fit(scan, points, fit.reading_deg, given, above)
        fit = again or fit
    return _Edge(scan, given, points, above, fit)


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


def _range_refusal(scan: Scan, edge_deg: float, width: float) -> str:
    below = int(np.sum(scan.reading_deg < edge_deg - 0.5 * width))
    above = int(np.sum(scan.reading_deg > edge_deg + 0.5 * width))
    if below < LEAST_BELOW:
        return "no background below the edge: the scan starts too late"
    if above < LEAST_ABOVE:
        return "the edge lies outside the range or at the end of the scan"
    return ""


def _no_window(scan: Scan, guess: float, width: float, above: tuple[Obstacle, ...]) -> str:
    if above and above[0].from_deg < guess + width:
        return "a characteristic line or absorption edge stands too close above the edge"
    return "too few points around the edge for a fit"


def _line_inside(fit: EdgeFit, above: tuple[Obstacle, ...], given: Surroundings) -> str:
    for obstacle in above:
        if obstacle.template is None:
            continue
        first = min(angle for angle, _, _ in obstacle.template.components) + given.zero_deg
        if abs(first - fit.reading_deg) < LINE_INSIDE_WIDTHS * given.kernel.fwhm_deg:
            return "a characteristic line stands inside the smeared edge"
    return ""


def _saturated(fit: EdgeFit) -> str:
    window = fit.window
    recorded = window.counts / window.dwell_s
    dead = float(recorded.max()) * fit.given.dead_time_us * 1e-6
    limit = LARGEST_DEAD_FRACTION if fit.given.dead_time_model == "nonparalysable" else 0.3
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


def _insignificant(fit: EdgeFit) -> str:
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
    relative = math.radians(fit.reading_u_deg) / math.tan(
        math.radians(max(fit.reading_deg - fit.given.zero_deg, 0.1))
    )
    if relative > LARGEST_RELATIVE_U:
        return f"too few counts: the cutoff would be uncertain by {100 * relative:.0f} %"
    return ""


def _dropouts(scan: Scan, fit: EdgeFit) -> NDArray[np.bool_]:
    """Isolated readings far below both fit and neighbours (a counter that missed a step)."""
    drop = np.zeros(scan.reading_deg.size, dtype=bool)
    where = np.searchsorted(scan.reading_deg, fit.window.reading_deg)
    expected = fit.maximum.expected
    counts = fit.window.counts
    for i, index in enumerate(where):
        missing = expected[i] - counts[i]
        if missing > 0 and missing**2 / expected[i] > DROPOUT_DEVIANCE and counts[i] < 0.3 * (
            expected[i]
        ):
            drop[index] = True
    return drop if int(drop.sum()) <= 2 else np.zeros_like(drop)


def _refusal(scan: Scan, reason: str) -> Cutoff:
    nan = np.full(scan.reading_deg.size, math.nan)
    curve = FittedCurve(
        scan.reading_deg,
        scan.counts.astype(float),
        nan,
        nan,
        scan.dwell_s,
        np.zeros(scan.reading_deg.size, dtype=bool),
    )
    return Cutoff(
        scan=scan.name,
        tube_voltage_kV=scan.tube_voltage_kV,
        used=False,
        reason=reason,
        curve=curve,
        remarks=scan.remarks,
    )


def _cutoff(run: Run, scale: AngleScale, edge: _Edge, answers: dict[str, float]) -> Cutoff:
    scan, given = edge.scan, edge.given
    members = tuple(windows(scan, edge.points, edge.fit.reading_deg, given, edge.obstacles))
    family = fit_family(members, edge.fit, given)
    if family is None:
        return _refusal(scan, "the fit did not converge")
    heaviest = family.heaviest
    freedom = max(heaviest.degrees_of_freedom, 1)
    misfit = heaviest.maximum.deviance / freedom
    if misfit > LARGEST_MISFIT:
        return _refusal(
            scan, f"the model does not describe the edge (deviance {misfit:.0f} per point)"
        )
    remarks = list(scan.remarks)
    if not edge.points.all():
        lost = ", ".join(f"{angle:g}°" for angle in scan.reading_deg[~edge.points])
        remarks.append(f"dropped out, not used: the point at {lost}")
    widening = 1.0
    if misfit > 1.0 + 3.0 * math.sqrt(2.0 / freedom):
        widening = math.sqrt(misfit)
        remarks.append(
            f"the counts scatter more than Poisson counting explains (deviance {misfit:.1f} per "
            "degree of freedom); the counting uncertainty was widened"
        )
    fixed = _fixed_window(scan, edge)
    if fixed is not None:
        family = average((fixed,))
    lower, upper = likelihood_sides(family.heaviest)
    own = family.heaviest.reading_u_deg
    counting = family.counting_u_deg * widening
    angle = family.reading_deg - scale.zero.value
    crystal = run.apparatus.crystal
    return Cutoff(
        scan=scan.name,
        tube_voltage_kV=scan.tube_voltage_kV,
        used=True,
        reading_deg=family.reading_deg,
        counting_u_deg=counting,
        lower_u_deg=lower * counting / own,
        upper_u_deg=upper * counting / own,
        window_u_deg=family.window_u_deg,
        background_u_deg=family.background_u_deg,
        glancing_angle_deg=angle,
        wavelength_pm=float(
            wavelength_pm(angle, crystal_spacing_pm(crystal), crystal.refraction.value)
        ),
        shape="Kramers with a near-limit excess",
        deviance=family.heaviest.maximum.deviance,
        degrees_of_freedom=family.heaviest.degrees_of_freedom,
        windows=tuple(
            _window_fit(fit, float(weight))
            for fit, weight in zip(family.fits, family.weights, strict=True)
        ),
        fixed_window=None if fixed is None else _window_fit(fixed, 1.0),
        responses_deg=_responses(family, answers),
        curve=_curve(scan, family.heaviest),
        remarks=tuple(remarks),
    )


def _fixed_window(scan: Scan, edge: _Edge) -> EdgeFit | None:
    """The fit of a window that the user fixed."""
    if scan.fit_from_deg is None and scan.fit_to_deg is None:
        return None
    low = scan.fit_from_deg if scan.fit_from_deg is not None else edge.fit.window.reading_deg[0]
    high = scan.fit_to_deg if scan.fit_to_deg is not None else edge.fit.window.reading_deg[-1]
    take = edge.points & (scan.reading_deg >= low - 1e-9) & (scan.reading_deg <= high + 1e-9)
    window = EdgeWindow(
        scan.reading_deg[take], scan.counts[take].astype(float), scan.dwell_s[take], 1, 2
    )
    if window.counts.size < window.parameters + 2:
        return None
    fit = best_start(window, edge.fit.reading_deg, edge.given)
    inside = window.reading_deg[0] < fit.reading_deg < window.reading_deg[-1]
    return fit if fit.maximum.converged and inside else None


def _window_fit(fit: EdgeFit, weight: float) -> WindowFit:
    return WindowFit(
        from_deg=float(fit.window.reading_deg[0]),
        to_deg=float(fit.window.reading_deg[-1]),
        background_terms=fit.window.background_terms,
        continuum_terms=fit.window.continuum_terms,
        lines_modelled=len(fit.window.lines),
        reading_deg=fit.reading_deg,
        reading_u_deg=fit.reading_u_deg,
        deviance=fit.maximum.deviance,
        degrees_of_freedom=fit.degrees_of_freedom,
        weight=weight,
    )


# Input, field of `Surroundings.changed`, step of the derivative.
RESPONDING: tuple[tuple[str, str, float], ...] = (
    (names.ZERO, "zero_deg", 1e-3),
    (names.RESOLUTION, "resolution_deg", 1e-3),
    (names.KERNEL, "triangular_fraction", 1e-2),
    (names.EXCESS, "excess", 1e-2),
    (names.EXCESS_ENERGY, "excess_energy_keV", 1e-2),
    (names.DEAD_TIME, "dead_time_us", 1.0),
)


def _responses(family: Family, answers: dict[str, float]) -> dict[str, float]:
    """Change of the averaged cutoff per unit of each input that the fits took as given."""
    responses: dict[str, float] = {}
    for name, attribute, step in RESPONDING:
        total = 0.0
        for fit, weight in zip(family.fits, family.weights, strict=True):
            if weight < 1e-3:
                continue
            value = {
                "resolution_deg": fit.given.kernel.fwhm_deg,
                "triangular_fraction": fit.given.kernel.triangular_fraction,
            }.get(attribute)
            value = getattr(fit.given, attribute) if value is None else value
            changed = fit.given.changed(**{attribute: value + step})
            total += float(weight) * response_deg(fit, changed, step)
        responses[name] = total
    # A resolution found from the edges moves with the other inputs.
    for name, answer in answers.items():
        responses[name] = responses.get(name, 0.0) + responses[names.RESOLUTION] * answer
    return responses


def _curve(scan: Scan, fit: EdgeFit) -> FittedCurve:
    """The heaviest fit over its window and the counts around it."""
    window = fit.window
    margin = 0.6 * (window.reading_deg[-1] - window.reading_deg[0])
    low, high = window.reading_deg[0] - margin, window.reading_deg[-1] + margin
    near = (scan.reading_deg >= low) & (scan.reading_deg <= high)
    readings = scan.reading_deg[near]
    expected = np.full(readings.size, math.nan)
    background = np.full(readings.size, math.nan)
    where = np.isin(readings, window.reading_deg)
    expected[where] = fit.maximum.expected
    dark = fit.maximum.parameters.copy()
    dark[1] = -60.0
    for i in range(len(window.lines)):
        dark[2 + window.continuum_terms + window.background_terms + 2 * i] = -60.0
    background[where] = expected_counts(window, dark, fit.given)[0]
    return FittedCurve(
        reading_deg=readings,
        counts=scan.counts[near].astype(float),
        expected_counts=expected,
        background_counts=background,
        dwell_s=scan.dwell_s[near],
        in_window=where,
    )
