"""Judgement: the result against the SI value, read backwards, and checked for consistency.

Every limit is one that about 99 % of sound runs keep: 2.58 standard uncertainties for a
difference, the 99 % quantile of chi-square for a scatter. E_n has the limit 1 of ISO 13528.
"""

from __future__ import annotations

import math
from collections.abc import Mapping

import numpy as np
from scipy.stats import chi2 as chi2_distribution

from hdetermine.budget.choice import VALUE_TOLERANCE
from hdetermine.inference import measurement as names
from hdetermine.inference.spacing import spacing_gradient, spacing_u
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
INFLUENCE_LIMIT = 2.0  # shift of h in units of u(h) when one scan is left out

# What the figures of the checks are.
IN_U = "difference / its u"
BIRGE = "Birge ratio"


def e_number(
    value: float, expanded: float, reference: float, reference_expanded: float = 0.0
) -> float:
    """E_n of a value against a reference, both with expanded uncertainties.

    E_n = (x - X)/sqrt(U_x^2 + U_X^2); agreement up to 1 in magnitude (ISO 13528:2022, 9.7,
    from memory).
    """
    return (value - reference) / math.hypot(expanded, reference_expanded)


def compare(h: PlanckValue) -> Comparison:
    """Compare the result with the exact SI value.

    E_n = (h - h_SI)/U(h), the reference uncertainty being zero (ISO 13528:2022, 9.7, from
    memory).
    """
    difference = h.value_J_s - PLANCK_CONSTANT_J_S
    e_n = e_number(h.value_J_s, h.expanded_uncertainty_J_s, PLANCK_CONSTANT_J_S)
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
        return Check(name, None, None, DIFFERENCE_LIMIT, none, IN_U)
    passed = abs(figure) <= DIFFERENCE_LIMIT
    return Check(name, passed, figure, DIFFERENCE_LIMIT, passing if passed else failing, IN_U)


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
            "width of the edges against the lines",
            scale.edge_pull,
            "The edges are as wide as the lines let expect.",
            f"The edges are {_wider_or_narrower(scale)} than the lines let expect and were fitted "
            "with their own width: the high voltage may ripple, or the collimation change with "
            "the angle.",
            "No line tells the width, so it cannot be compared.",
        ),
        _fits(cutoffs),
        _scatter(relation),
        _difference(
            "intercept of the line",
            relation.intercept_pm / math.sqrt(relation.free_covariance[1, 1])
            if math.isfinite(relation.intercept_pm)
            else None,
            f"The line passes through the origin within its uncertainty{_widened(relation)}.",
            "The line misses the origin: a zero error of the goniometer, an offset of the "
            "voltage, or a supply that is not linear.",
            "Fewer than three voltages: not tested.",
        ),
        _difference(
            "exponent of the relation",
            (relation.exponent - 1.0) / relation.exponent_u
            if math.isfinite(relation.exponent)
            else None,
            "Cutoff and voltage are inversely proportional within the uncertainty"
            f"{_widened(relation)}.",
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
            "Eₙ",
        ),
    )


def _wider_or_narrower(scale: AngleScale) -> str:
    return "narrower" if scale.edge_pull is not None and scale.edge_pull < 0.0 else "wider"


def _widened(relation: Relation) -> str:
    """Say what makes a difference look smaller than the inputs alone would."""
    return ", which includes the added scatter" if relation.scatter_deg > 0.0 else ""


def _zero(apparatus: Apparatus, scale: AngleScale) -> Check:
    stated = apparatus.goniometer.zero_deg
    figure = None
    if scale.zero_from.startswith("lines"):
        u = math.hypot(stated.standard_uncertainty, scale.zero.standard_uncertainty)
        figure = (scale.zero.value - stated.value) / u if u > 0.0 else None
    return _difference(
        "zero offset of the lines against the run sheet",
        figure,
        "The zero offset from the lines agrees with the stated one.",
        "The lines want another zero offset than the run sheet states; that of the lines was used.",
        "No line was found, so the zero offset is the stated one.",
    )


def _spacing(apparatus: Apparatus, scale: AngleScale) -> Check:
    stated = apparatus.crystal.spacing_pm
    figure = None
    if scale.free_spacing_pm is not None and scale.free_spacing_u_pm is not None:
        # The lines tell the spacing at the temperature of the run, known no better than that.
        relative = spacing_gradient(apparatus.crystal) * spacing_u(apparatus.crystal)
        u = math.hypot(stated.value * float(np.linalg.norm(relative)), scale.free_spacing_u_pm)
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
    name, measure = "fits against the counts", "deviance / degrees of freedom"
    used = [cutoff for cutoff in cutoffs if cutoff.used and cutoff.degrees_of_freedom > 0]
    if not used:
        return Check(name, None, None, None, "No fit has a degree of freedom left.", measure)
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
        measure,
    )


def _scatter(relation: Relation) -> Check:
    name = "scatter between the scans"
    if relation.degrees_of_freedom < 1:
        return Check(name, None, None, None, "One scan alone cannot show any scatter.", BIRGE)
    freedom = relation.degrees_of_freedom
    limit = math.sqrt(float(chi2_distribution.isf(CHANCE, freedom)) / freedom)
    if relation.scatter_deg > 0.0:
        return Check(
            name,
            False,
            relation.stated_birge_ratio,
            limit,
            "The values of h from single scans scatter more than their uncertainties allow. The "
            "excess was added to the uncertainty as if it were random: look for its cause, and "
            "for a trend in the residuals of the relation.",
            f"{BIRGE} before that",
        )
    passed = relation.birge_ratio <= limit
    return Check(
        name,
        passed,
        relation.birge_ratio,
        limit,
        "The values of h from single scans agree within their uncertainties."
        if passed
        else "The values of h from single scans do not agree within their uncertainties.",
        BIRGE,
    )


def _leave_one_out(relation: Relation) -> Check:
    name, measure = "influence of a single scan", "largest shift of h / u"
    if len(relation.influence) < 3:
        none = "Too few scans to leave one out."
        return Check(name, None, None, INFLUENCE_LIMIT, none, measure)
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
        measure,
    )


def _routes_agree(routes: Mapping[str, Route]) -> Check:
    """Compare the usable routes with the linear one, in units of its u."""
    name = "agreement of the routes"
    measure = "largest difference / u"
    base = routes["linear"]
    others = [route for key, route in routes.items() if key != "linear" and route.usable]
    if not others or not base.standard_uncertainty_J_s > 0.0:
        return Check(name, None, None, VALUE_TOLERANCE, "Only one route was taken.", measure)
    u = base.standard_uncertainty_J_s
    worst = max(
        max(
            abs(route.value_J_s - base.value_J_s) / u,
            abs(route.standard_uncertainty_J_s / u - 1.0),
        )
        for route in others
    )
    passed = worst <= VALUE_TOLERANCE
    return Check(
        name,
        passed,
        worst,
        VALUE_TOLERANCE,
        "All routes that can be used give nearly the same h and u."
        if passed
        else "The routes differ: the relation is not linear over the uncertainties, or the data "
        "teach something about an input.",
        measure,
    )
