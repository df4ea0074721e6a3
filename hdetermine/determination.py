"""The order of the stages, and nothing else."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import replace
from importlib.metadata import version

import numpy as np

from hdetermine import __version__
from hdetermine.budget.choice import choose_route
from hdetermine.budget.planck import planck_budget
from hdetermine.budget.suppose import counting_floor, improvements
from hdetermine.errors import InputError
from hdetermine.inference.anglescale import angle_scale
from hdetermine.inference.cutoffs import find_cutoffs
from hdetermine.inference.gathering import gathered
from hdetermine.inference.montecarlo import monte_carlo_route
from hdetermine.inference.posterior import posterior_route
from hdetermine.inference.relation import build_model, relate
from hdetermine.inference.scatter import add_scatter, birge_ratio_of, learn_repeatability
from hdetermine.judgement import compare, consistency, read_backwards
from hdetermine.records.results import (
    Budget,
    Cutoff,
    Determination,
    FloatArray,
    PlanckValue,
    Provenance,
    Relation,
    Route,
)
from hdetermine.records.run import Run

Progress = Callable[[str, int, int], None]
LIBRARIES = ("numpy", "scipy", "uncertainties", "emcee")


def determine(
    run: Run,
    seed: int = 1,
    *,
    posterior: bool = True,
    monte_carlo: bool = True,
    progress: Progress | None = None,
) -> Determination:
    """Determine the Planck constant from a run.

    Parameters
    ----------
    run : Run
        As `hdetermine.read_run` returns it.
    seed : int
        Seed of the Monte Carlo and posterior routes; the same seed gives the same result.
    posterior, monte_carlo : bool
        Whether to take these routes.
    progress : callable, optional
        Called as ``progress(stage, done, total)`` while it works.

    Returns
    -------
    Determination
        Everything that was found.

    Raises
    ------
    InputError
        If no scan carries a usable edge, or the input contradicts itself.
    """
    report = progress or (lambda _stage, _done, _total: None)
    report("lines", 0, 1)
    seen = gathered(run)
    scale = angle_scale(seen)
    report("lines", 1, 1)
    scale, shared, cutoffs = find_cutoffs(seen, scale, report)
    if shared is None or not any(cutoff.used for cutoff in cutoffs):
        raise InputError(_nothing_usable(cutoffs))
    model = build_model(run.apparatus, scale, shared, cutoffs)
    model, repeat = learn_repeatability(model)
    stated_birge_ratio = birge_ratio_of(model)
    model, scatter = add_scatter(model)
    relation = replace(relate(model, scatter, repeat), stated_birge_ratio=stated_birge_ratio)
    cutoffs = _with_uncertainties(cutoffs, relation)

    budget = planck_budget(model)
    routes: dict[str, Route] = {"linear": linear_route(budget)}
    draws, chain = np.random.SeedSequence(seed).spawn(2)
    if monte_carlo:
        report("monte carlo", 0, 1)
        routes["monte_carlo"] = monte_carlo_route(model, budget, np.random.default_rng(draws))
        report("monte carlo", 1, 1)
    samples: FloatArray | None = None
    names: tuple[str, ...] = ()
    if posterior:
        chain_seed = int(chain.generate_state(1)[0])
        routes["posterior"], samples, names = posterior_route(model, chain_seed, report)
    h = _reported(budget, routes)
    comparison = compare(h)
    return Determination(
        run=run,
        h=h,
        comparison=comparison,
        read_backwards=read_backwards(budget),
        routes=routes,
        angle_scale=scale,
        cutoffs=cutoffs,
        relation=relation,
        model=model,
        budget=budget,
        improvements=improvements(model),
        counting_floor_J_s=counting_floor(model),
        checks=consistency(run.apparatus, scale, cutoffs, relation, comparison, routes),
        provenance=Provenance(
            package_version=__version__,
            versions={name: version(name) for name in LIBRARIES},
            seed=seed,
            settings={"monte_carlo": monte_carlo, "posterior": posterior},
        ),
        posterior_samples=samples,
        posterior_names=names,
    )


def _nothing_usable(cutoffs: tuple[Cutoff, ...]) -> str:
    if len(cutoffs) == 1:
        return f"the only scan, {cutoffs[0].scan}, carries no usable edge: {cutoffs[0].reason}."
    reasons = dict.fromkeys(cutoff.reason for cutoff in cutoffs)
    shown = "; ".join(list(reasons)[:3])
    return f"none of the {len(cutoffs)} scans carries a usable edge: {shown}."


def _with_uncertainties(cutoffs: tuple[Cutoff, ...], relation: Relation) -> tuple[Cutoff, ...]:
    u = dict(zip(relation.scans, np.sqrt(np.diag(relation.covariance_pm2)), strict=True))
    return tuple(
        replace(cutoff, standard_uncertainty_pm=float(u[cutoff.scan])) if cutoff.used else cutoff
        for cutoff in cutoffs
    )


def linear_route(budget: Budget) -> Route:
    """The budget as one of the three routes."""
    half = budget.expanded_uncertainty
    return Route(
        name="linear",
        value_J_s=budget.value,
        standard_uncertainty_J_s=budget.combined_standard_uncertainty,
        interval_95_J_s=(budget.value - half, budget.value + half),
        diagnostics={
            "coverage_factor": budget.coverage_factor,
            "effective_degrees_of_freedom": budget.effective_degrees_of_freedom,
        },
    )


def _reported(budget: Budget, routes: Mapping[str, Route]) -> PlanckValue:
    name, reason = choose_route(routes)
    route = routes[name]
    low, high = route.interval_95_J_s
    linear = name == "linear"
    expanded = (
        budget.expanded_uncertainty
        if linear
        else max(high - route.value_J_s, route.value_J_s - low)
    )
    return PlanckValue(
        value_J_s=route.value_J_s,
        standard_uncertainty_J_s=route.standard_uncertainty_J_s,
        coverage_probability=0.95,
        coverage_factor=expanded / route.standard_uncertainty_J_s,
        expanded_uncertainty_J_s=expanded,
        effective_degrees_of_freedom=budget.effective_degrees_of_freedom,
        route=name,
        route_reason=reason,
    )
