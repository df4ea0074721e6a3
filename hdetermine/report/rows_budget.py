"""The rows of the uncertainty budget, common inputs and those of single scans kept apart."""

from __future__ import annotations

import math

import numpy as np

from hdetermine.records.results import Budget, BudgetRow
from hdetermine.report.rounding import power_of_ten, typeset_figure
from hdetermine.report.spoken import input_words, scan_of
from hdetermine.report.table import (
    Cell,
    Column,
    Group,
    Table,
    decimals,
    digits,
    spelled,
    symbol,
    with_uncertainty,
)

LEAST_CORRELATION = 0.005
DEFAULT_MARK = "†"
CORRELATED_MARK = "‡"
COLUMNS = (
    Column("quantity"),
    Column("symbol"),
    Column("estimate", True),
    Column("u", True),
    Column("unit"),
    Column("type"),
    Column("distribution"),
    Column("ν", True),
    Column("sensitivity", True),
    Column("contribution", True),
    Column("share / %", True),
)


def budget_rows(budget: Budget) -> Table:
    """Set the budget: every input with its signed sensitivity, contribution and share."""
    groups = []
    exponent = _exponent(budget.combined_standard_uncertainty)
    for common, heading in (
        (True, "Common to all voltages: more voltages do not reduce these"),
        (False, "Independent from scan to scan"),
    ):
        rows = _sorted([row for row in budget.rows if row.common is common], common)
        if not rows:
            continue
        share = sum(row.variance_share for row in rows)
        title = f"{heading} (together {decimals(100.0 * share, 1, '%').text} of the variance)"
        groups.append(Group(title, tuple(_row(row, budget, exponent) for row in rows)))
    unit = spelled(budget.unit)
    return Table(
        "budget",
        f"Uncertainty budget of {budget.measurand}",
        (
            *COLUMNS[:-2],
            Column(_contribution_heading(exponent, unit), True),
            COLUMNS[-1],
        ),
        tuple(groups),
        _note(budget),
    )


def _contribution_heading(exponent: int, unit: str) -> str:
    power = power_of_ten(exponent).replace(" × ", "")
    return f"contribution /\N{NO-BREAK SPACE}{power}\N{NO-BREAK SPACE}{unit}"


def _exponent(number: float) -> int:
    return math.floor(math.log10(number)) if number > 0.0 else 0


def _sorted(rows: list[BudgetRow], common: bool) -> list[BudgetRow]:
    """Largest contribution first; rows of single scans by kind, then in the scans' order."""
    if common:
        return sorted(rows, key=lambda row: -abs(row.contribution))
    weight: dict[str, float] = {}
    for row in rows:
        kind = input_words(row.quantity)
        weight[kind] = weight.get(kind, 0.0) + row.contribution**2
    return sorted(rows, key=lambda row: -weight[input_words(row.quantity)])


def _row(row: BudgetRow, budget: Budget, exponent: int) -> tuple[Cell, ...]:
    scan = scan_of(row.quantity)
    mark = (DEFAULT_MARK if row.is_default else "") + (
        CORRELATED_MARK if _partners(row, budget) else ""
    )
    name = input_words(row.quantity) + (f" {mark}" if mark else "")
    rounded = with_uncertainty(row.estimate, row.standard_uncertainty).text
    number, _, rest = rounded.partition("(")
    estimate = "0" if row.estimate == 0.0 else number + rest.partition(")")[2]
    return (
        Cell(name, None, scan or row.quantity),
        symbol(row.symbol),
        Cell(estimate, row.estimate),
        digits(row.standard_uncertainty, 2),
        Cell(spelled(row.unit)),
        Cell(row.evaluation),
        Cell(row.distribution),
        Cell("∞" if math.isinf(row.degrees_of_freedom) else f"{row.degrees_of_freedom:.0f}",
             row.degrees_of_freedom),
        digits(row.sensitivity, 3),
        Cell(_two_digits_plain(row.contribution / 10.0**exponent), row.contribution),
        Cell(decimals(100.0 * row.variance_share, 2).text, row.variance_share),
    )  # fmt: skip


def _two_digits_plain(number: float) -> str:
    """Two significant digits without a power of ten, four decimals at most."""
    if number == 0.0:
        return "0"
    places = min(4, max(0, 1 - math.floor(math.log10(abs(number)))))
    return decimals(number, places).text


def _partners(row: BudgetRow, budget: Budget) -> tuple[str, ...]:
    place = next(i for i, other in enumerate(budget.rows) if other is row)
    found = np.flatnonzero(np.abs(budget.correlation[place]) >= LEAST_CORRELATION)
    return tuple(budget.rows[i].quantity for i in found.tolist() if i != place)


def _note(budget: Budget) -> str:
    unit = spelled(budget.unit)
    parts = [
        f"Contribution: sensitivity times u, with its sign; sensitivity in {unit} per "
        "unit of the quantity. Shares include correlations, so that they sum to 100 %, and may "
        "be negative.",
        f"Combined standard uncertainty {typeset_figure(budget.combined_standard_uncertainty)} "
        f"{unit}.",
    ]
    second = budget.second_order_standard_uncertainty
    if second is not None:
        parts.append(f"With the next terms of the Taylor series: {typeset_figure(second)} {unit}.")
    if any(row.is_default for row in budget.rows):
        parts.append(f"{DEFAULT_MARK} A documented default, not stated in the run sheet.")
    pairs = correlated_pairs(budget)
    if pairs:
        listed = "; ".join(f"{one} with {two}: {r}" for one, two, r in pairs)
        parts.append(f"{CORRELATED_MARK} Correlated: {listed}.")
    return " ".join(parts)


def correlated_pairs(budget: Budget) -> tuple[tuple[str, str, str], ...]:
    """Pairs of inputs that are correlated: two names in words, and r."""
    found = []
    matrix = budget.correlation
    for i, j in zip(*np.nonzero(np.triu(np.abs(matrix), 1) >= LEAST_CORRELATION), strict=True):
        one, two = (_full_words(budget.rows[int(k)].quantity) for k in (i, j))
        found.append((one, two, f"r = {decimals(float(matrix[i, j]), 2).text}"))
    return tuple(found)


def _full_words(name: str) -> str:
    scan = scan_of(name)
    return input_words(name) + (f" ({scan})" if scan else "")
