"""The posterior route: h and the common inputs sampled together, with emcee.

Priors are the distributions of the budget, h has a flat one; the data are the cutoffs. Unlike
the other two routes this one has no fixed weights: it learns the inputs from the data as far as
the data know them.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from hdetermine.budget.planck import linear_figures
from hdetermine.errors import InputError
from hdetermine.inference.chain import Chain, Convergence, convergence, run_chain
from hdetermine.inference.density import PosteriorDensity, posterior_density
from hdetermine.inference.spread import check_support
from hdetermine.inference.weights import with_gls_weights
from hdetermine.records.quantity import Quantity
from hdetermine.records.results import MeasurementModel, Route

FloatArray = NDArray[np.float64]
Progress = Callable[[str, int, int], None]

KEPT_SAMPLES = 4000
INTEGRATED_NOTE = (
    "Inputs that are independent from scan to scan (fit windows, background, scatter, voltage "
    "repeatability) are integrated out as normal ones: their variance widens both sides of "
    "the likelihood of each cutoff."
)


@dataclass(frozen=True, slots=True)
class Effort:
    """How long to run: walkers, steps at first, and steps at most."""

    walkers: int = 128
    steps: int = 800
    maximum_steps: int = 16_000


def posterior_route(
    model: MeasurementModel,
    seed: int,
    progress: Progress | None = None,
    *,
    effort: Effort | None = None,
) -> tuple[Route, FloatArray, tuple[str, ...]]:
    """Sample the posterior of h.

    Parameters
    ----------
    model : MeasurementModel
        Its weights only set the scale of the first guess.
    seed : int
        Two calls with the same model and seed agree bit for bit, whatever the state of NumPy's
        global generator, which is left alone.
    progress : callable or None
        Called with ("posterior", steps done, steps to do), then with ("priors doubled", ...).
    effort : Effort or None
        Length of the chain; it is doubled until it has converged, up to a cap.

    Returns
    -------
    route : Route
        Not usable, with the reason, if the chain has not converged.
    samples : ndarray, shape (at most 4000, k + 1)
        Thinned chain: h in J s, then the k sampled inputs in their units.
    names : tuple of str
        Names of the columns.

    Raises
    ------
    InputError
        If a distribution makes h undefined.

    References
    ----------
    D. Foreman-Mackey, D. W. Hogg, D. Lang and J. Goodman, Publ. Astron. Soc. Pac. 125, 306
    (2013).
    """
    check_support(model)
    effort = effort or Effort()
    try:
        density = posterior_density(model)
    except ValueError as error:
        figures = linear_figures(model)
        value, u = figures.value_J_s, figures.standard_uncertainty_J_s
        nowhere = Route("posterior", value, u, (value, value), False, f"No posterior: {error}.")
        return nowhere, np.empty((0, 1)), ("h",)
    main, other = np.random.SeedSequence(seed).spawn(2)
    chain, planck, inputs, judged = _converged_chain(density, main, effort, progress)
    low, high = np.quantile(planck, [0.025, 0.975])
    names = ("h", *(model.inputs[i].name for i in density.sampled))
    route = Route(
        name="posterior",
        value_J_s=float(planck.mean()),
        standard_uncertainty_J_s=float(planck.std(ddof=1)),
        interval_95_J_s=(float(low), float(high)),
        usable=not judged.failure,
        reason=judged.failure,
        diagnostics={
            **_chain_figures(chain, judged, names),
            "priors": _prior_table(density, inputs),
            "integrated_out": INTEGRATED_NOTE,
            "prior_sensitivity": _prior_sensitivity(model, other, effort, progress),
        },
    )
    every = max(1, -(-len(planck) // KEPT_SAMPLES))
    samples = np.column_stack([planck[::every], inputs[:, ::every].T])
    return route, samples, names


def _converged_chain(
    density: PosteriorDensity,
    seed: np.random.SeedSequence,
    effort: Effort,
    progress: Progress | None,
) -> tuple[Chain, FloatArray, FloatArray, Convergence]:
    """Run until h and all inputs have converged, doubling the steps up to the cap."""
    steps, before = effort.steps, 0
    while True:
        chain = run_chain(
            density, seed, effort.walkers, steps, _stage(progress, "posterior", before)
        )
        planck, inputs = density.points(chain.flat)
        parameters = np.column_stack([planck / planck.mean(), inputs.T])
        judged = convergence(parameters.reshape(chain.positions.shape))
        if not judged.failure or 2 * steps > effort.maximum_steps:
            return chain, planck, inputs, judged
        before += steps
        steps *= 2


def _stage(progress: Progress | None, stage: str, before: int = 0) -> Progress | None:
    """Tell a chain's progress under a name of its own, after so many steps of earlier chains."""
    if progress is None:
        return None
    return lambda _, done, total: progress(stage, before + done, before + total)


def _chain_figures(
    chain: Chain, judged: Convergence, names: tuple[str, ...]
) -> Mapping[str, object]:
    def by_name(figures: FloatArray) -> dict[str, float]:
        return dict(zip(names, figures.tolist(), strict=True))

    return {
        "walkers": chain.walkers,
        "steps": chain.steps,
        "steps_discarded": chain.discarded,
        "acceptance_fraction": chain.acceptance,
        "moves": dict(chain.moves),
        "autocorrelation_steps": by_name(judged.tau),
        "effective_sample_size": by_name(judged.ess),
        "split_rhat": by_name(judged.rhat),
        "limits": dict(judged.limits),
        "converged": not judged.failure,
    }


def _prior_table(density: PosteriorDensity, inputs: FloatArray) -> list[dict[str, object]]:
    table: list[dict[str, object]] = [
        {"quantity": "h", "unit": "J s", "distribution": "flat", "sampled": True}
    ]
    for i, values in zip(density.sampled, inputs, strict=True):
        found = {
            "posterior_value": float(values.mean()),
            "posterior_standard_uncertainty": float(values.std(ddof=1)),
        }
        table.append({**_prior(density.model.inputs[i]), "sampled": True, **found})
    table += [{**_prior(density.model.inputs[i]), "sampled": False} for i in density.integrated]
    return table


def _prior(quantity: Quantity) -> dict[str, object]:
    shape: dict[str, object] = {}
    if quantity.half_width is not None:
        shape["half_width"] = quantity.half_width
    if quantity.distribution == "t" and math.isfinite(quantity.degrees_of_freedom):
        shape["degrees_of_freedom"] = quantity.degrees_of_freedom
    return {
        "quantity": quantity.name,
        "unit": quantity.unit,
        "distribution": quantity.distribution,
        "value": quantity.value,
        "standard_uncertainty": quantity.standard_uncertainty,
        **shape,
    }


def doubled_type_b(model: MeasurementModel, names: frozenset[str]) -> MeasurementModel:
    """Return the model with the uncertainties of these inputs doubled, and new weights."""
    inputs = tuple(
        quantity.with_uncertainty(2.0 * quantity.standard_uncertainty)
        if quantity.name in names
        else quantity
        for quantity in model.inputs
    )
    return with_gls_weights(replace(model, inputs=inputs))


def _prior_sensitivity(
    model: MeasurementModel,
    seed: np.random.SeedSequence,
    effort: Effort,
    progress: Progress | None,
) -> Mapping[str, object]:
    """What h and U become when the Type B half-widths are doubled."""
    type_b = [q.name for q in model.inputs if q.evaluation == "B" and q.standard_uncertainty > 0]
    common = [q.name for q in model.inputs if q.common and q.name in type_b]
    each = []
    for name in common:
        figures = linear_figures(doubled_type_b(model, frozenset([name])))
        each.append(
            {
                "quantity": name,
                "value_J_s": figures.value_J_s,
                "expanded_uncertainty_J_s": figures.expanded_uncertainty_J_s,
            }
        )
    return {
        "all_doubled": _all_doubled(model, frozenset(type_b), seed, effort, progress),
        "each_doubled_linear": each,
    }


def _all_doubled(
    model: MeasurementModel,
    names: frozenset[str],
    seed: np.random.SeedSequence,
    effort: Effort,
    progress: Progress | None,
) -> Mapping[str, float] | None:
    """Run a shorter chain with these inputs doubled; None where h is then undefined."""
    doubled = doubled_type_b(model, names)
    try:
        check_support(doubled)
    except InputError:
        return None
    density = posterior_density(doubled)
    steps = max(effort.steps // 2, 100)
    chain = run_chain(density, seed, effort.walkers, steps, _stage(progress, "priors doubled"))
    planck, _ = density.points(chain.flat)
    low, high = np.quantile(planck, [0.025, 0.975])
    return {
        "value_J_s": float(planck.mean()),
        "standard_uncertainty_J_s": float(planck.std(ddof=1)),
        "expanded_uncertainty_J_s": 0.5 * float(high - low),
    }
