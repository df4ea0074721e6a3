"""Cutoffs: one for every scan with a usable edge, a reason for every other."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from hdetermine.inference.edgefamily import Family, average, best_start, fit_family, windows
from hdetermine.inference.edgemodel import (
    SMOOTH_TERMS,
    EdgeFit,
    EdgeWindow,
    expected_counts,
    likelihood_sides,
)
from hdetermine.inference.firstfit import Edge, first_fit, first_guesses
from hdetermine.inference.refusals import uncertain
from hdetermine.inference.shared import SharedTerms, edge_responses, fit_with, share
from hdetermine.inference.spacing import crystal_spacing_pm
from hdetermine.physics.bragg import wavelength_pm
from hdetermine.records.quantity import Quantity
from hdetermine.records.results import AngleScale, Cutoff, FittedCurve, WindowFit
from hdetermine.records.run import Run
from hdetermine.records.scan import Scan

FloatArray = NDArray[np.float64]

LARGEST_MISFIT = 12.0  # deviance per degree of freedom
LEAST_WEIGHT = 1e-3  # of a fit whose responses are worth the work
LEAST_FALL = 0.25  # of the deviance, that a width of their own gives the edges
RESOLUTION_TOLERANCE = 3.0  # in standard uncertainties, between edges and lines


def find_cutoffs(
    run: Run, scale: AngleScale, progress: Callable[[str, int, int], None] | None = None
) -> tuple[AngleScale, SharedTerms | None, tuple[Cutoff, ...]]:
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
    shared : SharedTerms or None
        What the edges share; None if no scan is usable.
    cutoffs : tuple of Cutoff
        One a scan, in the order of the run; their total uncertainty is still nan.
    """
    edges: dict[str, Edge] = {}
    refused: dict[str, str] = {}
    guesses = first_guesses(run, scale)
    for scan in run.scans:
        outcome = first_fit(run, scale, scan, guesses[scan.name])
        if isinstance(outcome, str):
            refused[scan.name] = outcome
        else:
            edges[scan.name] = outcome
    shared = None
    if edges:
        # A scan that the model does not describe would drag all the others along.
        first = {name: edge.fit for name, edge in edges.items()}
        voices = {
            name: fit for name, fit in first.items() if _misfit(fit) <= LARGEST_MISFIT
        } or first
        scale, shared = _share(run, scale, tuple(voices.values()))
        fits = dict(zip(voices, shared.fits, strict=True))
        for name, edge in edges.items():
            fit = fits[name] if name in fits else fit_with(edge.fit, shared)
            edges[name] = replace(edge, given=fit.given, fit=fit)
    cutoffs = []
    for done, scan in enumerate(run.scans):
        if scan.name in refused or shared is None:
            cutoffs.append(_refusal(scan, refused[scan.name]))
        else:
            cutoffs.append(_cutoff(run, scale, edges[scan.name], shared))
        if progress is not None:
            progress("edges", done + 1, len(run.scans))
    return scale, shared, tuple(cutoffs)


def _misfit(fit: EdgeFit) -> float:
    """Deviance per degree of freedom."""
    return fit.maximum.deviance / max(fit.degrees_of_freedom, 1)


def _share(
    run: Run, scale: AngleScale, fits: tuple[EdgeFit, ...]
) -> tuple[AngleScale, SharedTerms]:
    """Find what the edges share, and decide whose width they are fitted with."""
    stated = scale.resolution
    if scale.resolution_from != "lines":
        unknown = math.isinf(stated.standard_uncertainty)
        shared = share(fits, stated, width_free=True)
        scale = replace(
            scale,
            resolution=shared.inputs[0],
            resolution_from="edges" if unknown else "run sheet and edges",
        )
        return scale, shared
    held = share(fits, stated, width_free=False)
    loose = replace(stated, standard_uncertainty=math.inf)
    free = share(held.fits, loose, width_free=True)
    spread = sum(
        (float(free.answers[quantity.name][0]) * quantity.standard_uncertainty) ** 2
        for quantity in (*run.apparatus.quantities(), scale.kernel)
        if quantity.name in free.answers
    )
    width = free.inputs[0]
    u = math.hypot(_likelihood_u(held, free, stated), math.sqrt(spread))
    pull = (width.value - stated.value) / math.hypot(u, stated.standard_uncertainty)
    scale = replace(scale, edge_resolution_deg=width.value, edge_resolution_u_deg=u, edge_pull=pull)
    if abs(pull) < RESOLUTION_TOLERANCE:
        return scale, held
    remark = (
        f"the edges are smeared over {width.value:.2f}°, the lines over {stated.value:.2f}°; "
        "the edges were fitted with their own width."
    )
    return (
        replace(
            scale,
            resolution=width,
            resolution_from="edges, against the lines",
            remarks=(*scale.remarks, remark),
        ),
        free,
    )


def _likelihood_u(held: SharedTerms, free: SharedTerms, stated: Quantity) -> float:
    """Uncertainty of the edges' own width: not below what the fall of the deviance supports."""
    fall = sum(
        before.maximum.deviance + before.maximum.penalty
        - after.maximum.deviance - after.maximum.penalty
        for before, after in zip(held.fits, free.fits, strict=True)
    )  # fmt: skip
    width = free.inputs[0]
    # Falls far below one are within what the steps leave open, and may even be negative.
    supported = abs(width.value - stated.value) / math.sqrt(max(fall, LEAST_FALL))
    return max(width.standard_uncertainty, supported)


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


def _cutoff(run: Run, scale: AngleScale, edge: Edge, shared: SharedTerms) -> Cutoff:
    scan, given = edge.scan, edge.given
    smooth = (edge.fit.window.smooth_mean, edge.fit.window.smooth_u)
    members = tuple(
        replace(window, smooth_mean=smooth[0], smooth_u=smooth[1])
        for window in windows(scan, edge.points, edge.fit.reading_deg, given, edge.obstacles)
    )
    if not members:
        # The edge moved by a fraction of a step: the window of the first fit still holds.
        members = (edge.fit.window,)
    family = fit_family(members, edge.fit, given)
    if family is None:
        return _refusal(scan, "the fit did not converge")
    heaviest = family.heaviest
    freedom = max(heaviest.degrees_of_freedom, 1)
    misfit = _misfit(heaviest)
    if misfit > LARGEST_MISFIT:
        return _refusal(
            scan, f"the model does not describe the edge (deviance {misfit:.0f} per point)"
        )
    remarks = list(scan.remarks)
    if not edge.points.all():
        lost = ", ".join(f"{angle:g}°" for angle in scan.reading_deg[~edge.points])
        remarks.append(f"dropped out, not used: the point at {lost}")
    reason = uncertain(family.reading_deg - scale.zero.value, family.counting_u_deg)
    if reason:
        return _refusal(scan, reason)
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
        responses_deg=_responses(family, shared),
        curve=_curve(scan, family.heaviest),
        remarks=tuple(remarks),
    )


def _fixed_window(scan: Scan, edge: Edge) -> EdgeFit | None:
    """The fit of a window that the user fixed."""
    if scan.fit_from_deg is None and scan.fit_to_deg is None:
        return None
    low = scan.fit_from_deg if scan.fit_from_deg is not None else edge.fit.window.reading_deg[0]
    high = scan.fit_to_deg if scan.fit_to_deg is not None else edge.fit.window.reading_deg[-1]
    take = edge.points & (scan.reading_deg >= low - 1e-9) & (scan.reading_deg <= high + 1e-9)
    window = EdgeWindow(
        scan.reading_deg[take],
        scan.counts[take].astype(float),
        scan.dwell_s[take],
        2,
        (),
        edge.fit.window.smooth_mean,
        edge.fit.window.smooth_u,
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
        continuum_terms=SMOOTH_TERMS,
        lines_modelled=len(fit.window.lines),
        reading_deg=fit.reading_deg,
        reading_u_deg=fit.reading_u_deg,
        deviance=fit.maximum.deviance,
        degrees_of_freedom=fit.degrees_of_freedom,
        weight=weight,
    )


def _responses(family: Family, shared: SharedTerms) -> dict[str, float]:
    """Change of the averaged cutoff per unit of each input, degrees."""
    responses: dict[str, float] = {}
    for fit, weight in zip(family.fits, family.weights, strict=True):
        if weight < LEAST_WEIGHT:
            continue
        for name, response in edge_responses(fit, shared).items():
            responses[name] = responses.get(name, 0.0) + float(weight) * response
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
        dark[2 + SMOOTH_TERMS + window.background_terms + 2 * i] = -60.0
    background[where] = expected_counts(window, dark, fit.given)[0]
    return FittedCurve(
        reading_deg=readings,
        counts=scan.counts[near].astype(float),
        expected_counts=expected,
        background_counts=background,
        dwell_s=scan.dwell_s[near],
        in_window=where,
    )
