"""The rows of the routes: side by side, and each with the figures that vouch for it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from hdetermine.records.results import Determination, Route
from hdetermine.report.plaintext import sentence
from hdetermine.report.rounding import grouped
from hdetermine.report.rows_scale import diagnostic_rows
from hdetermine.report.spoken import ROUTE_WORDS, input_words, scan_of
from hdetermine.report.table import (
    NONE,
    Cell,
    Table,
    decimals,
    digits,
    in_units,
    interval,
    percent,
    spelled,
    table,
    with_uncertainty,
    words,
)

Figures = Mapping[str, object]

# Shown in tables of their own, or beside the result.
_TOLD_ELSEWHERE = {
    "autocorrelation_steps", "effective_sample_size", "split_rhat", "priors", "integrated_out",
    "prior_sensitivity", "limits", "coverage_probability",
}  # fmt: skip


def route_rows(d: Determination) -> Table:
    """The routes side by side."""
    rows = []
    for name, spoken in ROUTE_WORDS.items():
        route = d.routes.get(name)
        if route is None:
            rows.append((Cell(spoken), Cell(NONE), Cell(NONE), Cell(NONE), Cell("not taken")))
            continue
        state = "reported" if name == d.h.route else "for comparison"
        rows.append(
            (
                Cell(spoken),
                in_units(route.value_J_s, route.standard_uncertainty_J_s, -34),
                interval(route.interval_95_J_s, route.standard_uncertainty_J_s, -34),
                percent(route.value_J_s / d.comparison.reference_J_s - 1.0),
                Cell(state if route.usable else sentence(f"not usable: {route.reason}")),
            )
        )
    return table(
        "routes",
        "h by three routes",
        ("route", "h / 10⁻³⁴ J s", "95 % interval / 10⁻³⁴ J s", "deviation", "use"),
        rows,
        numeric=(1, 2, 3),
    )


def monte_carlo_rows(route: Route | None) -> Table | None:
    """Draws, stability, intervals and what the validation of the linear route found."""
    if route is None:
        return None
    found = route.diagnostics
    draws, stable = found.get("draws"), found.get("stable")
    rows = [
        (Cell("draws"), words(NONE if draws is None else grouped(f"{draws}")),
         Cell("of every input from its own distribution")),
        (Cell("stable to two digits"), Cell("yes" if stable else "no"),
         Cell("JCGM 101:2008, clause 7.9")),
    ]  # fmt: skip
    for key, name, remark in (
        (
            "symmetric_interval_J_s",
            "probabilistically symmetric",
            "2.5 % of the draws on either side",
        ),
        ("shortest_interval_J_s", "shortest", "the narrowest that holds 95 % of the draws"),
    ):
        ends = _sequence(found.get(key))
        if len(ends) == 2:
            cell = interval((_number(ends[0]), _number(ends[1])),
                            route.standard_uncertainty_J_s, -34)  # fmt: skip
            rows.append((Cell(f"{name} interval / 10⁻³⁴ J s"), cell, Cell(remark)))
    validation = _mapping(found.get("validation"))
    if validation:
        passed = "passed" if validation.get("passed") else "failed"
        low, high, most = (
            digits(_number(validation.get(key)), 2, "J s").text
            for key in ("low_difference", "high_difference", "tolerance")
        )
        rows.append(
            (Cell("validation of the linear route"), Cell(passed),
             Cell(f"ends differ by {low} and {high}, {most} allowed (clause 8)"))
        )  # fmt: skip
    return table("monte-carlo", "Monte Carlo: draws and validation",
                 ("figure", "value", "remark"), rows)  # fmt: skip


def sampling_rows(name: str, caption: str, route: Route | None) -> Table | None:
    """How a route was sampled: draws or steps, and whether they sufficed."""
    if route is None:
        return None
    kept = {key: one for key, one in route.diagnostics.items() if key not in _TOLD_ELSEWHERE}
    return diagnostic_rows(name, caption, kept)


def convergence_rows(route: Route | None) -> Table | None:
    """Autocorrelation, effective sample size and split R-hat of every sampled quantity."""
    if route is None:
        return None
    columns = [
        _mapping(route.diagnostics.get(key))
        for key in ("autocorrelation_steps", "effective_sample_size", "split_rhat")
    ]
    names = dict.fromkeys(name for column in columns for name in column)
    if not names:
        return None
    rows = []
    for name in names:
        steps, size, shrink = (_number(column.get(name)) for column in columns)
        rows.append(
            (words(input_words(name)), digits(steps, 3), decimals(size, 0), digits(shrink, 4))
        )
    return table(
        "convergence",
        "Convergence of the chain",
        ("quantity", "autocorrelation / steps", "effective sample size", "split R-hat"),
        rows,
        numeric=(1, 2, 3),
        note=_limits(_mapping(route.diagnostics.get("limits"))),
    )


def _limits(limits: Figures) -> str:
    said = {
        "steps_per_autocorrelation_time": "at least {} autocorrelation times of steps",
        "effective_sample_size": "an effective sample size of at least {}",
        "split_rhat": "split R-hat of at most {}",
    }
    parts = [
        text.format(grouped(f"{_number(limits[key]):g}"))
        for key, text in said.items()
        if key in limits
    ]
    return f"Asked for: {', '.join(parts)}." if parts else ""


def prior_rows(route: Route | None) -> Table | None:
    """Priors of the sampled quantities, with what the data made of them."""
    if route is None:
        return None
    rows = []
    for one in _sequence(route.diagnostics.get("priors")):
        prior = _mapping(one)
        if not prior.get("sampled"):
            continue
        name = str(prior.get("quantity", ""))
        before, after = (
            with_uncertainty(_number(prior.get(f"{stage}value")),
                             _number(prior.get(f"{stage}standard_uncertainty")))
            for stage in ("", "posterior_")
        )  # fmt: skip
        if name == "h":
            after = with_uncertainty(route.value_J_s, route.standard_uncertainty_J_s)
        rows.append(
            (words(input_words(name)), words(str(prior.get("distribution", ""))), before, after,
             words(spelled(str(prior.get("unit", "")))))
        )  # fmt: skip
    if not rows:
        return None
    return table(
        "priors",
        "Priors, and what the counts made of them",
        ("quantity", "distribution", "prior", "posterior", "unit"),
        rows,
        numeric=(2, 3),
        note=str(route.diagnostics.get("integrated_out", "")),
    )


def sensitivity_rows(route: Route | None) -> Table | None:
    """How h and U answer to priors twice as wide, below h and U as they are."""
    if route is None:
        return None
    found = _mapping(route.diagnostics.get("prior_sensitivity"))
    together = _mapping(found.get("all_doubled"))
    each = [_mapping(one) for one in _sequence(found.get("each_doubled_linear"))]
    if not together and not each:
        return None
    low, high = route.interval_95_J_s
    u = route.standard_uncertainty_J_s
    as_it_is = {"value_J_s": route.value_J_s, "expanded_uncertainty_J_s": 0.5 * (high - low)}
    rows = [_doubled("none: the posterior as it is", as_it_is, u)]
    if together:
        rows.append(_doubled("of all Type B inputs, sampled again", together, u))
    # A wider prior of an input that does not matter leaves U where it is.
    least = min((_number(entry.get("expanded_uncertainty_J_s")) for entry in each), default=0.0)
    telling = [entry for entry in each if _tells(entry, route.value_J_s, u, least)]
    for entry in telling:
        name = str(entry.get("quantity", ""))
        scan = scan_of(name)
        rows.append(_doubled(input_words(name) + (f", {scan}" if scan else ""), entry, u))
    note = (
        "One input at a time: to first order, without sampling again. U: half the 95 % interval "
        "where the posterior was sampled, k u elsewhere."
    )
    silent = len(each) - len(telling)
    if silent:
        note += f" The other {silent} inputs change h by less than 0.05 u and U by less than 1 %."
    return table(
        "sensitivity",
        "Prior sensitivity: h with a prior twice as wide",
        ("prior made twice as wide", "h / 10⁻³⁴ J s", "U / 10⁻³⁴ J s"),
        rows,
        numeric=(1, 2),
        note=note,
    )


def _tells(entry: Figures, value: float, u: float, least: float) -> bool:
    """Whether a prior twice as wide moves h or U by an amount worth a row."""
    shift = abs(_number(entry.get("value_J_s")) - value)
    return shift >= 0.05 * u or _number(entry.get("expanded_uncertainty_J_s")) >= 1.01 * least


def _doubled(name: str, entry: Figures, standard_uncertainty: float) -> tuple[Cell, ...]:
    value, expanded = (_number(entry.get(key)) for key in ("value_J_s", "expanded_uncertainty_J_s"))
    # One place in the whole column, that of h as it is.
    shown = in_units(value, standard_uncertainty, -34)
    return (
        words(name),
        Cell(shown.text.partition("(")[0], value),
        Cell(digits(expanded * 1e34, 2).text, expanded),
    )


def _mapping(value: object) -> Figures:
    return value if isinstance(value, Mapping) else {}


def _sequence(value: object) -> Sequence[object]:
    return value if isinstance(value, (list, tuple)) else ()


def _number(value: object) -> float:
    return float(value) if isinstance(value, (int, float)) else float("nan")
