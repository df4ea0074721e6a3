"""Judgement: the result against the SI value, read backwards, and checked for consistency.

Every limit is one that about 99 % of sound runs keep: 2.58 standard uncertainties for a
difference, the 99 % quantile of chi-square for a scatter. E_n has the limit 1 of ISO 13528.
"""

from __future__ import annotations

import math
from collections.abc import Mapping

import numpy as np
from scipy.stats import chi2 as chi2_distribution

from hdetermine.inference import measurement as names
from hdetermine.physics.reference import PLANCK_CONSTANT_J_S
from hdetermine.records.apparatus import Apparatus
from hdetermine.records.results import (
    AngleScale,
    Budget,
    BudgetRow,
    Check,
    Comparison,
    Cutoff,
    PlanckValue,
    ReadBackwards,
    Relation,
    Route,
)

DIFFERENCE_LIMIT = 2.58  # two-sided 99 % of a normal distribution
CHANCE = 0.01
ROUTE_LIMIT = 0.3  # between routes, in units of u
INFLUENCE_LIMIT = 2.0  # shift of h in units of u(h) when one scan is left out


def compare(h: PlanckValue) -> Comparison:
    """Compare the result with the exact SI value.

    E_n = (h - h_SI)/U(h), the reference uncertainty being zero (ISO 13528:2022, 9.7, from
    memory).
    """
    difference = h.value_J_s - PLANCK_CONSTANT_J_S
    e_n = difference / h.expanded_uncertainty_J_s
    agrees = abs(e_n) <= 1.0
    return Comparison(
        reference_J_s=PLANCK_CONSTANT_J_S,
        relative_deviation=difference / PLANCK_CONSTANT_J_S,
        E_n=e_n,
        verdict="agrees with the SI value within its expanded uncertainty"
        if agrees
        else "does not agree with the SI value within its expanded uncertainty",
    )


def _row(budget: Budget, name: str) -> BudgetRow:
    return next(row for row in budget.rows if row.quantity == name)


def _without_row(budget: Budget, name: str) -> float:
    """Combined uncertainty of everything but one input."""
    keep = np.array([row.quantity != name for row in budget.rows])
    parts = np.array([row.contribution for row in budget.rows])[keep]
    return math.sqrt(max(float(parts @ budget.correlation[np.ix_(keep, keep)] @ parts), 0.0))


def read_backwards(budget: Budget) -> ReadBackwards:
    """With h exact, what the run says about the supply and about the crystal.

    Parameters
    ----------
    budget : Budget
        Of h; the stated uncertainty of the quantity sought is left out.
    """
    gain, spacing = _row(budget, names.GAIN), _row(budget, names.SPACING)
    missing = PLANCK_CONSTANT_J_S - budget.value
    return ReadBackwards(
        voltage_gain=gain.estimate + missing / gain.sensitivity,
        voltage_gain_u=_without_row(budget, names.GAIN) / abs(gain.sensitivity),
        spacing_pm=spacing.estimate + missing / spacing.sensitivity,
        spacing_u_pm=_without_row(budget, names.SPACING) / abs(spacing.sensitivity),
    )


def _difference(name: str, figure: float | None, passing: str, failing: str, none: str) -> Check:
    """Build a check of a difference in standard uncertainties."""
    if figure is None or not math.isfinite(figure):
        return Check(name, None, None, DIFFERENCE_LIMIT, none)
    passed = abs(figure) <= DIFFERENCE_LIMIT
    return Check(name, passed, figure, DIFFERENCE_LIMIT, passing if passed else failing)


def consistency(
    apparatus: Apparatus,
    scale: AngleScale,
    cutoffs: tuple[Cutoff, ...],
    relation: Relation,
    comparison: Comparison,
    routes: Mapping[str, Route],
) -> tuple[Check, ...]:
    """Every consistency check, in the order of the measurement."""
    return (
        _zero(apparatus, scale),
        _spacing(apparatus, scale),
        _difference(
            "resolution of edges and lines",
            scale.edge_pull,
            "Edges and lines are smeared alike.",
            "The edges are smeared unlike the lines: the high voltage may ripple, or the "
            "collimation change with the angle.",
            "Lines and edges cannot be compared.",
        ),
        _fits(cutoffs),
        _scatter(relation),
        _difference(
            "intercept of the line",
            relation.intercept_pm / math.sqrt(relation.free_covariance[1, 1])
            if math.isfinite(relation.intercept_pm)
            else None,
            "The line goes through the origin.",
            "The line misses the origin: a zero error of the goniometer, an offset of the "
            "voltage, or a supply that is not linear.",
            "Fewer than three voltages: not tested.",
        ),
        _difference(
            "exponent of the relation",
            (relation.exponent - 1.0) / relation.exponent_u
            if math.isfinite(relation.exponent)
            else None,
            "Cutoff and voltage are inversely proportional.",
            "Cutoff and voltage are not inversely proportional: look at the voltages and the "
            "zero offset.",
            "Fewer than three voltages: not tested.",
        ),
        _leave_one_out(relation),
        _routes_agree(routes),
        Check(
            "agreement with the SI value",
            abs(comparison.E_n) <= 1.0,
            comparison.E_n,
            1.0,
            f"The result {comparison.verdict}.",
        ),
    )


def _zero(apparatus: Apparatus, scale: AngleScale) -> Check:
    stated = apparatus.goniometer.zero_deg
    figure = None
    if scale.zero_from.startswith("lines"):
        u = math.hypot(stated.standard_uncertainty, scale.zero.standard_uncertainty)
        figure = (scale.zero.value - stated.value) / u if u > 0.0 else None
    return _difference(
        "zero offset of the lines against the run sheet",
        figure,
        "The lines stand where the stated zero offset lets them be expected.",
        "The lines want another zero offset than the run sheet states; that of the lines was used.",
        "No line was found, so the zero offset is the stated one.",
    )


def _spacing(apparatus: Apparatus, scale: AngleScale) -> Check:
    stated = apparatus.crystal.spacing_pm
    figure = None
    if scale.free_spacing_pm is not None and scale.free_spacing_u_pm is not None:
        u = math.hypot(stated.standard_uncertainty, scale.free_spacing_u_pm)
        figure = (scale.free_spacing_pm - stated.value) / u
    return _difference(
        "spacing from the lines alone",
        figure,
        "The distances between the lines fit the stated spacing.",
        "The distances between the lines do not fit the stated spacing: is it the right "
        "crystal, reflection and anode?",
        "The lines stand too close together to tell the spacing.",
    )


def _fits(cutoffs: tuple[Cutoff, ...]) -> Check:
    name = "fits against the counts"
    used = [cutoff for cutoff in cutoffs if cutoff.used and cutoff.degrees_of_freedom > 0]
    if not used:
        return Check(name, None, None, None, "No fit has a degree of freedom left.")
    deviance = sum(cutoff.deviance for cutoff in used)
    freedom = sum(cutoff.degrees_of_freedom for cutoff in used)
    limit = float(chi2_distribution.isf(CHANCE, freedom)) / freedom
    figure = deviance / freedom
    passed = figure <= limit
    return Check(
        name,
        passed,
        figure,
        limit,
        "The fits describe the counts as well as counting statistics allow."
        if passed
        else "The counts scatter more about the fits than counting explains: rounded rates, "
        "an unsteady tube, or a shape that the model does not know.",
    )


def _scatter(relation: Relation) -> Check:
    name = "scatter of the voltages (Birge ratio)"
    if relation.degrees_of_freedom < 1:
        return Check(name, None, None, None, "One voltage alone cannot show any scatter.")
    freedom = relation.degrees_of_freedom
    limit = math.sqrt(float(chi2_distribution.isf(CHANCE, freedom)) / freedom)
    if relation.scatter_deg > 0.0:
        return Check(
            name,
            False,
            relation.stated_birge_ratio,
            limit,
            "The voltages scatter more than their uncertainties allow; the excess was added to "
            "the uncertainty, but its cause should be found.",
        )
    passed = relation.birge_ratio <= limit
    return Check(
        name,
        passed,
        relation.birge_ratio,
        limit,
        "The voltages agree with one h within their uncertainties."
        if passed
        else "The voltages do not agree with one h within their uncertainties.",
    )


def _leave_one_out(relation: Relation) -> Check:
    name = "influence of a single scan"
    if len(relation.influence) < 3:
        return Check(name, None, None, INFLUENCE_LIMIT, "Too few scans to leave one out.")
    worst = max(relation.influence, key=lambda one: abs(one.shift_in_u))
    passed = abs(worst.shift_in_u) <= INFLUENCE_LIMIT
    return Check(
        name,
        passed,
        worst.shift_in_u,
        INFLUENCE_LIMIT,
        "No single scan decides the result."
        if passed
        else f"The scan {worst.scan} alone moves the result by {abs(worst.shift_in_u):.1f} u.",
    )


def _routes_agree(routes: Mapping[str, Route]) -> Check:
    """Compare the usable routes with the linear one, in units of its u."""
    name = "routes against each other"
    base = routes["linear"]
    others = [route for key, route in routes.items() if key != "linear" and route.usable]
    if not others or not base.standard_uncertainty_J_s > 0.0:
        return Check(name, None, None, ROUTE_LIMIT, "Only one route was taken.")
    u = base.standard_uncertainty_J_s
    worst = max(
        max(
            abs(route.value_J_s - base.value_J_s) / u,
            abs(route.standard_uncertainty_J_s / u - 1.0),
        )
        for route in others
    )
    passed = worst <= ROUTE_LIMIT
    return Check(
        name,
        passed,
        worst,
        ROUTE_LIMIT,
        "All routes tell the same h and u."
        if passed
        else "The routes differ: the relation is not linear over the uncertainties, or the data "
        "teach something about an input.",
    )
