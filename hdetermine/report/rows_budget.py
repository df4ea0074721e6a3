"""The rows of the uncertainty budget, common inputs and those of single scans kept apart."""

from __future__ import annotations

import math

import numpy as np

from hdetermine.budget.planck import scan_family
from hdetermine.records.results import Budget, BudgetRow
from hdetermine.report.rounding import power_of_ten, typeset_figure, unbroken
from hdetermine.report.spoken import input_words, scan_of, sources
from hdetermine.report.table import (
    NONE,
    Cell,
    Column,
    Group,
    Table,
    decimals,
    digits,
    spelled,
    symbol,
    table,
    with_uncertainty,
    words,
)

LEAST_CORRELATION = 0.005
SMALLEST_SHARE = 5e-4
"""Sources below it share a line."""
TELLING_CORRELATION = 0.05
"""From this size on a correlation can move a share by a visible amount."""
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
    Column("share /\N{NO-BREAK SPACE}%", True),
)


def source_rows(budget: Budget) -> Table:
    """Sum the budget up: one row a source, the largest share first, and the whole at the foot."""
    exponent = _exponent(budget.combined_standard_uncertainty)
    unit = 10.0**exponent

    def part(share: float) -> Cell:
        if share < 0.0:
            return Cell(NONE)
        size = math.sqrt(share) * budget.combined_standard_uncertainty
        return Cell(_two_digits_plain(size / unit), size)

    every = sources(budget)
    shown = [source for source in every if abs(source.variance_share) >= SMALLEST_SHARE]
    rows = [
        (
            words(source.words),
            words(_inputs_of(source.words, source.common, budget)),
            Cell("common to all scans" if source.common else "each scan its own"),
            part(source.variance_share),
            Cell(decimals(100.0 * source.variance_share, 2).text, source.variance_share),
        )
        for source in shown
    ]
    small = [source for source in every if source not in shown]
    others = ""
    if small:
        rest = sum(source.variance_share for source in small)
        others = f" All others: {', '.join(source.words for source in small)}."
        rows.append(
            (Cell("all others"), Cell(f"of {len(small)} sources"), Cell(NONE), part(rest),
             Cell(decimals(100.0 * rest, 2).text, rest))
        )  # fmt: skip
    rows.append(
        (Cell("all together"), Cell(f"{len(budget.rows)} inputs"), Cell(""), part(1.0),
         Cell(decimals(100.0, 2).text, 1.0))
    )  # fmt: skip
    return table(
        "sources",
        f"Budget of {budget.measurand} by source",
        ("source", "inputs", "voltages", _power_heading("part of u", exponent, budget.unit),
         "share /\N{NO-BREAK SPACE}%"),
        rows,
        numeric=(3, 4),
        note="Share: of the variance u². Part of u: its root, so that the squares of the parts sum "
        "to that of u; none where correlations make a share negative. Symbols: see the budget "
        f"below.{others}",
    )  # fmt: skip


def _inputs_of(source: str, common: bool, budget: Budget) -> str:
    """Symbols of the inputs behind a source; for inputs of single scans, of how many."""
    rows = [
        row
        for row in budget.rows
        if (row.group or input_words(row.quantity)) == source and row.common is common
    ]
    if not common and len(rows) > 1:
        return f"one for each of {len(rows)} scans"
    return ", ".join(_sign(row) for row in rows)


def correlated_rows(budget: Budget) -> Table | None:
    """Inputs whose shares mean something together only; None if none are correlated."""
    rows = []
    for members in correlated_sets(budget):
        named = [budget.rows[i] for i in members]
        matrix = np.triu(budget.correlation[np.ix_(members, members)], 1)
        pairs = [
            f"r({_sign(named[i])}, {_sign(named[j])}) = {decimals(float(matrix[i, j]), 2).text}"
            for i, j in zip(*np.nonzero(np.abs(matrix) >= TELLING_CORRELATION), strict=True)
        ]
        shares = [decimals(100.0 * row.variance_share, 2).text for row in named]
        together = sum(row.variance_share for row in named)
        rows.append(
            (
                words(_named(named)),
                Cell("; ".join(pairs)),
                Cell(", ".join(shares)),
                Cell(decimals(100.0 * together, 2).text, together),
            )
        )
    if not rows:
        return None
    return table(
        "correlated",
        "Correlated inputs: their shares belong together",
        ("inputs", "correlation", "shares /\N{NO-BREAK SPACE}%", "together /\N{NO-BREAK SPACE}%"),
        rows,
        numeric=(3,),
        note="A fit that finds several inputs at once leaves them correlated: where one errs, so "
        "does the other. Their contributions then reinforce or cancel each other, so that a share "
        "by itself may be large or negative; what counts is the sum of the set.",
    )


def _named(rows: list[BudgetRow]) -> str:
    """Inputs in words with their symbols, terms of one series once."""
    signs: dict[str, list[str]] = {}
    for row in rows:
        series = scan_family(row.quantity)
        name = _full_words(row.quantity if series.startswith("scan.") else series)
        signs.setdefault(name, []).append(_sign(row))
    return "; ".join(f"{name} ({', '.join(found)})" for name, found in signs.items())


def correlated_sets(budget: Budget) -> tuple[tuple[int, ...], ...]:
    """Places of inputs that are linked by telling correlations, each set once."""
    linked = np.abs(budget.correlation) >= TELLING_CORRELATION
    left = set(np.flatnonzero(linked.sum(axis=1) > 1).tolist())
    found = []
    while left:
        members, edge = set(), {min(left)}
        while edge:
            members |= edge
            edge = {j for i in edge for j in np.flatnonzero(linked[i]).tolist()} - members
        left -= members
        found.append(tuple(sorted(members)))
    return tuple(found)


def _sign(row: BudgetRow) -> str:
    """Symbol of an input within a line of text."""
    one = symbol(row.symbol)
    return one.text + one.subscript.translate(str.maketrans("0123456789rs", "₀₁₂₃₄₅₆₇₈₉ᵣₛ"))


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
    return Table(
        "budget",
        f"Uncertainty budget of {budget.measurand}",
        (
            *COLUMNS[:-2],
            Column(_power_heading("contribution", exponent, budget.unit), True),
            COLUMNS[-1],
        ),
        tuple(groups),
        _note(budget),
    )


def _power_heading(name: str, exponent: int, unit: str) -> str:
    power = power_of_ten(exponent).replace(" × ", "")
    return f"{name} /\N{NO-BREAK SPACE}{power}\N{NO-BREAK SPACE}{spelled(unit)}"


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
        listed = "; ".join(f"r({one}, {two}) = {r}" for one, two, r in pairs)
        parts.append(f"{CORRELATED_MARK} Correlated: {listed}{_and_less(budget)}.")
    return unbroken(" ".join(parts))


def _and_less(budget: Budget) -> str:
    size = np.abs(np.triu(budget.correlation, 1))
    weak = (size >= LEAST_CORRELATION) & (size < TELLING_CORRELATION)
    return "; others below 0.05 in magnitude" if bool(weak.any()) else ""


def correlated_pairs(budget: Budget) -> tuple[tuple[str, str, str], ...]:
    """Pairs of inputs that are correlated enough to tell: two symbols, and r."""
    found = []
    matrix = budget.correlation
    for i, j in zip(*np.nonzero(np.triu(np.abs(matrix), 1) >= TELLING_CORRELATION), strict=True):
        one, two = (_sign(budget.rows[int(k)]) for k in (i, j))
        found.append((one, two, decimals(float(matrix[i, j]), 2).text))
    return tuple(found)


def _full_words(name: str) -> str:
    scan = scan_of(name)
    return input_words(name) + (f" ({scan})" if scan else "")
