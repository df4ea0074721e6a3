"""Which of the three routes counts.

The rule: the linear result is reported if it passes the validation of JCGM 101:2008, clause 8,
against the Monte Carlo route; otherwise the Monte Carlo result is. The posterior is shown beside
them. Wherever a route differs from the reported one by more than 0.3 standard uncertainties in
value, or by more than 15 % in standard uncertainty, a sentence says which, and what is behind it.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

from hdetermine.records.results import Route, RouteName

VALUE_TOLERANCE = 0.3
"""Largest difference of the values, in standard uncertainties."""
UNCERTAINTY_TOLERANCE = 0.15
"""Largest relative difference of the standard uncertainties."""

# An input that the cutoffs themselves narrowed, or moved, is worth naming.
_NARROWED = 0.85
_MOVED = 0.5

_TITLES: Mapping[str, str] = {
    "linear": "The linear route",
    "monte_carlo": "The Monte Carlo route",
    "posterior": "The posterior route",
}


def choose_route(
    routes: Mapping[str, Route], linear_validated: bool | None = None
) -> tuple[RouteName, str]:
    """Pick the reported route, and say why.

    Parameters
    ----------
    routes : mapping of name to Route
        All routes taken; the linear one always.
    linear_validated : bool or None
        Outcome of the validation; by default that in the diagnostics of the Monte Carlo route.

    Returns
    -------
    name : {"linear", "monte_carlo"}
    reason : str
        One sentence, followed by one for every route that disagrees or is not usable.
    """
    name, reason = _pick(routes, linear_validated)
    return name, " ".join([reason, *disagreements(routes, name)])


def _pick(routes: Mapping[str, Route], linear_validated: bool | None) -> tuple[RouteName, str]:
    carlo = routes.get("monte_carlo")
    if carlo is None:
        return "linear", (
            "The linear result is reported; the Monte Carlo route was not taken, so it is not "
            "validated."
        )
    if not carlo.usable:
        return "linear", (
            "The linear result is reported; it is not validated, because the Monte Carlo route "
            "is not usable."
        )
    found = carlo.diagnostics.get("validation")
    validation: Mapping[str, Any] = found if isinstance(found, Mapping) else {}
    passed = validation.get("passed", False) if linear_validated is None else linear_validated
    figures = ""
    if validation:
        u = carlo.standard_uncertainty_J_s or 1.0
        worst = max(validation["low_difference"], validation["high_difference"]) / u
        figures = (
            f": the ends of its interval differ from those of the Monte Carlo route by up to "
            f"{worst:.4f} u, with {validation['tolerance'] / u:.4f} u allowed"
        )
    if passed:
        return "linear", (
            f"The linear result is reported, for it passes the validation of JCGM 101, clause 8"
            f"{figures}."
        )
    return "monte_carlo", (
        f"The Monte Carlo result is reported, for the linear one fails the validation of "
        f"JCGM 101, clause 8{figures}."
    )


def disagreements(routes: Mapping[str, Route], reported: str) -> Iterator[str]:
    """Yield a sentence for every route that differs from the reported one or is not usable."""
    base = routes[reported]
    for name, route in routes.items():
        if name == reported:
            continue
        if not route.usable:
            yield f"{_TITLES[name]} is not usable: {route.reason}"
            continue
        u = base.standard_uncertainty_J_s
        if not u > 0.0:
            continue
        shift = (route.value_J_s - base.value_J_s) / u
        ratio = route.standard_uncertainty_J_s / u
        if abs(shift) <= VALUE_TOLERANCE and abs(ratio - 1.0) <= UNCERTAINTY_TOLERANCE:
            continue
        wider = f"{100.0 * (ratio - 1.0):+.0f}\N{NARROW NO-BREAK SPACE}%"
        yield (
            f"{_TITLES[name]} differs: its value by {shift:+.2f} u, its standard uncertainty by "
            f"{wider}; {_cause(name, reported, route)}."
        )


def _cause(name: str, reported: str, route: Route) -> str:
    if name != "posterior":
        other = "Monte Carlo" if reported == "linear" else "reported"
        return (
            "the inputs' distributions are not normal or the cutoffs' likelihoods lopsided, which "
            f"only the {other} one takes into account"
        )
    learned = []
    priors = route.diagnostics.get("priors", ())
    for row in priors if isinstance(priors, list) else ():
        if not row.get("posterior_standard_uncertainty") or not row.get("standard_uncertainty"):
            continue
        narrowed = row["posterior_standard_uncertainty"] / row["standard_uncertainty"]
        moved = (row["posterior_value"] - row["value"]) / row["standard_uncertainty"]
        if narrowed < _NARROWED or abs(moved) > _MOVED:
            learned.append(f"{row['quantity']} by {moved:+.1f} of its u")
    if learned:
        return f"the cutoffs themselves narrow or move inputs there, {', '.join(learned)}"
    return (
        "there the cutoffs are combined by the product of their lopsided likelihoods instead of "
        "with fixed weights"
    )
