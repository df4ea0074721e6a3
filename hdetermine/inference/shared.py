"""What all edges share: the slow variation of the spectrum with wavelength, and the width.

Transmission, crystal and counter multiply every spectrum by one smooth function of wavelength.
Crystals reflect, and thin counters count, as a power of it, and the optical depth of all that
absorbs grows as its cube (W. H. Bragg and S. E. Peirce, Phil. Mag. 28, 626, 1914):

    ln T = t1 ln r - t2 (r^3 - 1)/3,    r = wavelength over a reference wavelength.

Besides, the continuum itself may bend away from the assumed law, in the same way at each voltage:
t3 M, with M of `edgemodel`. So the smooth terms of an edge at r0, a1 = t1 - t2 r0^3 and
a2 = t3 - t2 r0^3, are not free but follow from t up to a small freedom of their own (the target's
own absorption changes a little with the voltage). Where
neither lines nor run sheet tell the width of the smearing, the edges share that too. Each fit
tells by its profile likelihood how it would like the shared numbers g to change; their sum, with
weak priors, is climbed by Newton steps. The result is a further set of inputs of the
measurement, with a covariance; given g the cutoffs are independent of one another. Because g
depends on what the fits assumed (shape near the limit, dead time, ...), its answer to each of
those inputs is kept, and joins the cutoffs' responses.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from hdetermine.inference import measurement as names
from hdetermine.inference.edgemodel import (
    EdgeFit,
    Surroundings,
    expected_counts,
    fit_edge,
)
from hdetermine.records.quantity import Quantity

FloatArray = NDArray[np.float64]

SMOOTH_NAMES = tuple(f"continuum.smooth_{k}" for k in (1, 2, 3))
TERMS = len(SMOOTH_NAMES)
# Weak priors: crystal and counter together a power between about 0 and 6; absorbers that let
# through most, or at least some, of what the edges show; a bend of either sign, by a sixth where
# the wavelength is half as long again as the limit.
_MEAN, _U = (3.0, 0.5, 0.0), (3.0, 1.0, 0.4)
OWN_FREEDOM = (0.3, 0.4)  # standard deviations of a1 and a2 about the shared function
_WIDTH_STEP = 1e-3
_ROUNDS = 15
_SETTLED = 0.02  # of a standard uncertainty
_NARROWEST_STEPS = 0.3
_WIDEST_DEG = 2.0

# Input, field of `Surroundings.changed`, step of the derivative.
RESPONDING: tuple[tuple[str, str, float], ...] = (
    (names.ZERO, "zero_deg", 1e-3),
    (names.RESOLUTION, "resolution_deg", 1e-3),
    (names.KERNEL, "triangular_fraction", 1e-2),
    (names.EXCESS, "excess", 1e-2),
    (names.EXCESS_ENERGY, "excess_energy_keV", 1e-2),
    (names.DEAD_TIME, "dead_time_us", 1.0),
)


@dataclass(frozen=True, slots=True, eq=False)
class SharedTerms:
    """The shared numbers, their covariance, and how they answer to the other inputs.

    Attributes
    ----------
    inputs : tuple of Quantity, length g
        Smooth terms; first the width, where the edges found it.
    covariance : ndarray, shape (g, g)
        Between them.
    reference_sine : float
        Sine of the cutoff angle that stands for the reference wavelength.
    answers : mapping of str to ndarray, shape (g,)
        Change of the shared numbers per unit of each input that the fits took as given.
    fits : tuple of EdgeFit
        The fits at these numbers.
    """

    inputs: tuple[Quantity, ...]
    covariance: FloatArray
    reference_sine: float
    answers: dict[str, FloatArray]
    fits: tuple[EdgeFit, ...]

    @property
    def width_free(self) -> bool:
        """Whether the edges found the width."""
        return self.inputs[0].name == names.RESOLUTION

    def correlation(self) -> FloatArray:
        """Correlation matrix between the shared numbers."""
        u = np.sqrt(np.diag(self.covariance))
        return np.asarray(self.covariance / np.outer(u, u))


def edge_sine(fit: EdgeFit) -> float:
    """Sine of the true angle of a cutoff."""
    return math.sin(math.radians(max(fit.reading_deg - fit.given.zero_deg, 0.05)))


def smooth_map(ratio: float) -> FloatArray:
    """Expected (a1, a2) of an edge per unit of (t1, t2, t3), shape (2, 3).

    Parameters
    ----------
    ratio : float
        Wavelength of the edge over the reference wavelength.
    """
    return np.array([[1.0, -(ratio**3), 0.0], [0.0, -(ratio**3), 1.0]])


def by_input(fit: EdgeFit, changed: Surroundings, change: float) -> FloatArray:
    """Derivative of the expected counts by an input, the fit's parameters held."""
    moved, _ = expected_counts(fit.window, fit.maximum.parameters, changed)
    return np.asarray((moved - fit.maximum.expected) / change)


def moved(given: Surroundings, attribute: str, step: float) -> Surroundings:
    """Surroundings with one input moved by a step."""
    value = {
        "resolution_deg": given.kernel.fwhm_deg,
        "triangular_fraction": given.kernel.triangular_fraction,
    }.get(attribute)
    return given.changed(
        **{attribute: (getattr(given, attribute) if value is None else value) + step}
    )


@dataclass(frozen=True, slots=True, eq=False)
class _Pull:
    """What one fit says about (width, a1, a2): score, direct information, mixed information."""

    score: FloatArray
    direct: FloatArray
    mixed: FloatArray
    by_width: FloatArray
    inverse: FloatArray

    @property
    def information(self) -> FloatArray:
        """Information on (width, a1, a2) with the fit's own parameters taken out."""
        return self.direct - self.mixed.T @ self.inverse @ self.mixed


def _pull(fit: EdgeFit) -> _Pull:
    best = fit.maximum
    width = by_input(fit, moved(fit.given, "resolution_deg", _WIDTH_STEP), _WIDTH_STEP)
    precision = np.array(fit.window.smooth_u) ** -2.0
    departure = best.parameters[2:4] - np.array(fit.window.smooth_mean)
    surplus = (fit.window.counts - best.expected) / best.expected
    score = np.array([float(np.sum(width * surplus)), *(precision * departure)])
    direct = np.diag([float(np.sum(width**2 / best.expected)), *precision])
    mixed = np.zeros((best.parameters.size, 3))
    mixed[:, 0] = best.jacobian.T @ (width / best.expected)
    mixed[2, 1], mixed[3, 2] = -precision
    return _Pull(score, direct, mixed, width, best.covariance())


def _map(fit: EdgeFit, reference_sine: float, width_free: bool) -> FloatArray:
    """Derivative of (width, a1, a2) by the shared numbers, shape (3, g)."""
    smooth = np.zeros((3, TERMS))
    smooth[1:] = smooth_map(edge_sine(fit) / reference_sine)
    if not width_free:
        return smooth
    return np.concatenate([np.array([[1.0], [0.0], [0.0]]), smooth], axis=1)


def share(fits: tuple[EdgeFit, ...], stated: Quantity, *, width_free: bool) -> SharedTerms:
    """Find the shared numbers.

    Parameters
    ----------
    fits : tuple of EdgeFit
        One converged fit a scan, with two smooth terms each.
    stated : Quantity
        The width: where it starts; if `width_free`, a finite uncertainty is a prior.
    width_free : bool
        Whether the edges are to find the width.

    Returns
    -------
    SharedTerms
    """
    reference = math.exp(float(np.mean([math.log(edge_sine(fit)) for fit in fits])))
    maps = [_map(fit, reference, width_free) for fit in fits]
    precision = np.array(_U) ** -2.0
    centre = np.array(_MEAN)
    if width_free:
        known = math.isfinite(stated.standard_uncertainty)
        precision = np.concatenate([[stated.standard_uncertainty**-2 if known else 0.0], precision])
        centre = np.concatenate([[stated.value], centre])
    narrowest = _NARROWEST_STEPS * float(np.median(np.diff(fits[0].window.reading_deg)))
    numbers = centre.copy()
    fits = _refit(fits, maps, numbers, width_free)
    for _ in range(_ROUNDS):
        pulls = [_pull(fit) for fit in fits]
        information = _total(pulls, maps, precision)
        score = sum(m.T @ p.score for m, p in zip(maps, pulls, strict=True))
        step = np.linalg.solve(information, score - precision * (numbers - centre))
        if width_free:
            step[0] = np.clip(step[0], -0.4 * numbers[0], 0.4 * numbers[0])
            step[0] = np.clip(numbers[0] + step[0], narrowest, _WIDEST_DEG) - numbers[0]
        step[-TERMS:] = np.clip(step[-TERMS:], -2.0, 2.0)
        numbers = np.asarray(numbers + step, dtype=np.float64)
        fits = _refit(fits, maps, numbers, width_free)
        if np.max(np.abs(step) * np.sqrt(np.diag(information))) < _SETTLED:
            break
    pulls = [_pull(fit) for fit in fits]
    information = _total(pulls, maps, precision)
    covariance = np.asarray(np.linalg.inv(information), dtype=np.float64)
    if width_free and len(fits) > 1:
        # Scans that want different widths tell that one width is an approximation.
        own = [p.score[0] ** 2 / max(p.information[0, 0], 1e-12) for p in pulls]
        widening = math.sqrt(max(sum(own) / (len(fits) - 1), 1.0))
        covariance[0, :] *= widening
        covariance[:, 0] *= widening
    return SharedTerms(
        inputs=_quantities(numbers, covariance, stated),
        covariance=covariance,
        reference_sine=reference,
        answers=_answers(fits, pulls, maps, information, width_free),
        fits=fits,
    )


def _total(pulls: list[_Pull], maps: list[FloatArray], precision: FloatArray) -> FloatArray:
    parts = [m.T @ p.information @ m for m, p in zip(maps, pulls, strict=True)]
    return np.asarray(np.sum(parts, axis=0) + np.diag(precision))


def _refit(
    fits: tuple[EdgeFit, ...], maps: list[FloatArray], numbers: FloatArray, width_free: bool
) -> tuple[EdgeFit, ...]:
    refitted = []
    for fit, mapping in zip(fits, maps, strict=True):
        mean = mapping[1:] @ numbers
        window = replace(
            fit.window, smooth_mean=(float(mean[0]), float(mean[1])), smooth_u=OWN_FREEDOM
        )
        given = fit.given
        if width_free:
            given = given.changed(resolution_deg=float(numbers[0]))
        refitted.append(fit_edge(window, given, fit.maximum.parameters))
    return tuple(refitted)


def fit_with(fit: EdgeFit, shared: SharedTerms) -> EdgeFit:
    """Fit an edge that had no say in the shared numbers, with those as its priors."""
    mapping = _map(fit, shared.reference_sine, shared.width_free)
    numbers = np.array([quantity.value for quantity in shared.inputs])
    return _refit((fit,), [mapping], numbers, shared.width_free)[0]


def _quantities(
    numbers: FloatArray, covariance: FloatArray, stated: Quantity
) -> tuple[Quantity, ...]:
    u = np.sqrt(np.diag(covariance))
    smooth = tuple(
        Quantity(name, f"t{k}", float(value), float(spread), "1", evaluation="A", source="edges")
        for k, (name, value, spread) in enumerate(
            zip(SMOOTH_NAMES, numbers[-TERMS:], u[-TERMS:], strict=True), start=1
        )
    )
    if numbers.size == TERMS:
        return smooth
    known = math.isfinite(stated.standard_uncertainty)
    width = Quantity(
        name=names.RESOLUTION,
        symbol=stated.symbol,
        value=float(numbers[0]),
        standard_uncertainty=min(float(u[0]), 0.5 * float(numbers[0])),
        unit="°",
        evaluation="A",
        source="run sheet and edges" if known else "edges",
    )
    return (width, *smooth)


def _answers(
    fits: tuple[EdgeFit, ...],
    pulls: list[_Pull],
    maps: list[FloatArray],
    information: FloatArray,
    width_free: bool,
) -> dict[str, FloatArray]:
    answers = {}
    for name, attribute, step in RESPONDING:
        if width_free and name == names.RESOLUTION:
            continue
        cross = np.zeros(len(information))
        for fit, pull, mapping in zip(fits, pulls, maps, strict=True):
            change = by_input(fit, moved(fit.given, attribute, step), step)
            expected = fit.maximum.expected
            direct = np.array([float(np.sum(pull.by_width * change / expected)), 0.0, 0.0])
            own = fit.maximum.jacobian.T @ (change / expected)
            cross += mapping.T @ (direct - pull.mixed.T @ pull.inverse @ own)
        answers[name] = np.asarray(-np.linalg.solve(information, cross), dtype=np.float64)
    return answers


def edge_responses(fit: EdgeFit, shared: SharedTerms) -> dict[str, float]:
    """Change of a cutoff reading per unit of each input, degrees.

    Parameters
    ----------
    fit : EdgeFit
        A fit with the shared numbers as its priors.
    shared : SharedTerms
        Those numbers.

    Returns
    -------
    dict
        By dotted name: inputs that the fit takes as given, directly and through the shared
        numbers, and the shared numbers themselves.
    """
    pull = _pull(fit)
    mapping = _map(fit, shared.reference_sine, shared.width_free)
    by_shared = -(pull.inverse[0] @ pull.mixed) @ mapping
    responses = {
        quantity.name: float(response)
        for quantity, response in zip(shared.inputs, by_shared, strict=True)
    }
    for name, attribute, step in RESPONDING:
        if name in responses:
            continue
        change = by_input(fit, moved(fit.given, attribute, step), step)
        own = fit.maximum.jacobian.T @ (change / fit.maximum.expected)
        direct = -float(pull.inverse[0] @ own)
        responses[name] = direct + float(by_shared @ shared.answers[name])
    return responses
