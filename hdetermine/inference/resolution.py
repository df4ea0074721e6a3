"""The resolution from the edges themselves.

Where neither lines nor run sheet tell the width, the edges must; where the lines tell it, the
edges are asked whether they agree, for they stand at other angles.

One width serves all scans. Each fit tells, by its profile likelihood, how it would like the
width to change; the sum over the scans, with a stated width as a prior, is climbed by Newton
steps. Because that width then depends on what the fits assumed about the continuum, its answer
to each of those inputs is kept too, and joins the cutoffs' responses.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from hdetermine.inference import measurement as names
from hdetermine.inference.edgemodel import EdgeFit, Surroundings, expected_counts, fit_edge
from hdetermine.records.quantity import Quantity

FloatArray = NDArray[np.float64]

_STEP = 1e-3
_ROUNDS = 12
_NARROWEST_STEPS = 0.3  # a width below the step cannot be seen
_WIDEST_DEG = 2.0


def _by_input(fit: EdgeFit, changed: Surroundings, change: float) -> FloatArray:
    moved, _ = expected_counts(fit.window, fit.maximum.parameters, changed)
    return np.asarray((moved - fit.maximum.expected) / change)


def _by_width(fit: EdgeFit) -> FloatArray:
    width = fit.given.kernel.fwhm_deg
    return _by_input(fit, fit.given.changed(resolution_deg=width + _STEP), _STEP)


def _projected(fit: EdgeFit, left: FloatArray, right: FloatArray) -> float:
    """Information between two directions, the fit's own parameters taken out."""
    best = fit.maximum
    plain = float(np.sum(left * right / best.expected))
    to_left = best.jacobian.T @ (left / best.expected)
    to_right = best.jacobian.T @ (right / best.expected)
    return plain - float(to_left @ np.linalg.solve(best.information, to_right))


def _pulls(fits: tuple[EdgeFit, ...]) -> tuple[FloatArray, FloatArray]:
    """Score of the width in each scan, and its information."""
    scores, information = [], []
    for fit in fits:
        by_width = _by_width(fit)
        best = fit.maximum
        surplus = (fit.window.counts - best.expected) / best.expected
        scores.append(float(np.sum(by_width * surplus)))
        information.append(max(_projected(fit, by_width, by_width), 0.0))
    return np.array(scores), np.array(information)


def common_resolution(
    fits: tuple[EdgeFit, ...], stated: Quantity
) -> tuple[Quantity, tuple[EdgeFit, ...]]:
    """Width that all edges share.

    Parameters
    ----------
    fits : tuple of EdgeFit
        One converged fit a scan.
    stated : Quantity
        Where to start; a finite uncertainty is a prior.

    Returns
    -------
    resolution : Quantity
        FWHM, degrees.
    fits : tuple of EdgeFit
        Refitted with it.
    """
    finite = math.isfinite(stated.standard_uncertainty)
    precision = stated.standard_uncertainty**-2 if finite else 0.0
    step_deg = float(np.median(np.diff(fits[0].window.reading_deg)))
    narrowest = _NARROWEST_STEPS * step_deg
    width = stated.value
    information = precision
    for _ in range(_ROUNDS):
        pulls, own = _pulls(fits)
        score = float(pulls.sum()) - precision * (width - stated.value)
        information = float(own.sum()) + precision
        if information <= 0.0:
            break
        move = float(np.clip(score / information, -0.4 * width, 0.4 * width))
        width = float(np.clip(width + move, narrowest, _WIDEST_DEG))
        fits = tuple(
            fit_edge(fit.window, fit.given.changed(resolution_deg=width), fit.maximum.parameters)
            for fit in fits
        )
        if abs(move) < 1e-3 * width:
            break
    u = information**-0.5 if information > 0.0 else 0.5 * width
    pulls, own = _pulls(fits)
    if len(fits) > 1 and not finite:
        # Scans that want different widths tell that one width is an approximation.
        chi2 = float(np.sum(pulls**2 / np.maximum(own, 1e-12)))
        u *= math.sqrt(max(chi2 / (len(fits) - 1), 1.0))
    resolution = Quantity(
        name=names.RESOLUTION,
        symbol=stated.symbol,
        value=width,
        standard_uncertainty=min(u, 0.5 * width),
        unit="°",
        evaluation="A",
        source="edges" if not finite else "run sheet and edges",
    )
    return resolution, fits


def resolution_answers(
    fits: tuple[EdgeFit, ...], resolution: Quantity
) -> dict[str, float]:
    """Change of the width per unit of each input that the fits took as given."""
    information = resolution.standard_uncertainty**-2
    steps = (
        (names.KERNEL, "triangular_fraction", 1e-2),
        (names.EXCESS, "excess", 1e-2),
        (names.EXCESS_ENERGY, "excess_energy_keV", 1e-2),
        (names.DEAD_TIME, "dead_time_us", 1.0),
    )
    answers = {}
    for name, attribute, step in steps:
        cross = 0.0
        for fit in fits:
            value = (
                fit.given.kernel.triangular_fraction
                if attribute == "triangular_fraction"
                else getattr(fit.given, attribute)
            )
            changed = fit.given.changed(**{attribute: value + step})
            cross += _projected(fit, _by_width(fit), _by_input(fit, changed, step))
        answers[name] = -cross / information
    return answers
