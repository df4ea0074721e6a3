"""The budget as a person reads it: sources, inputs, improvements, suppositions."""

from __future__ import annotations

import math
from collections.abc import Sequence

from hdetermine.budget.planck import limiting_sentence, scan_family
from hdetermine.budget.suppose import BudgetStudy, WhatIf
from hdetermine.records.results import Budget, BudgetRow
from hdetermine.report.rounding import typeset_figure
from hdetermine.report.spoken import input_words, scan_of, sources
from hdetermine.report.table import (
    Cell,
    Group,
    Table,
    decimals,
    digits,
    plus_minus,
    spelled,
    symbol,
    table,
    united,
    words,
)


def headline(budget: Budget) -> str:
    """The result with its expanded uncertainty, in one line."""
    freedom = budget.effective_degrees_of_freedom
    shown = f"{freedom:.1f}" if freedom < 1e4 else "∞"
    value = plus_minus(budget.value, budget.expanded_uncertainty, budget.unit).text
    u = digits(budget.combined_standard_uncertainty, 2, budget.unit).text
    return (
        f"{budget.measurand} = {value}; u = {u}, ν = {shown}, "
        f"k = {budget.coverage_factor:.2f}, p = {100.0 * budget.coverage_probability:g} %, linear "
        "propagation"
    )


def floor_line(study: BudgetStudy) -> str:
    """What perfect counting statistics would leave of U."""
    unit, now = study.budget.unit, study.budget.expanded_uncertainty
    gain = 100.0 * (1.0 - study.counting_floor / now) if now > 0.0 else 0.0
    floor = digits(study.counting_floor, 2, unit).text
    return (
        f"With perfect counting statistics U stays at {floor}, "
        f"{decimals(gain, 1, '%').text} below the {digits(now, 2, unit).text} of today."
    )


def source_table(budget: Budget) -> Table:
    """Sources of uncertainty, the largest first."""
    rows = [
        (
            words(source.words),
            Cell("all alike" if source.common else "each its own"),
            Cell(str(source.count), source.count),
            decimals(100.0 * source.variance_share, 1),
        )
        for source in sources(budget)
    ]
    return table(
        "sources",
        "What the uncertainty comes from",
        ("source", "voltages", "inputs", "share / %"),
        rows,
        numeric=(2, 3),
        note=limiting_sentence(budget),
    )


def condensed(full: Table, budget: Budget) -> Table:
    """The budget table with one line for each kind of input that every scan has.

    Such a line shows the range of the standard uncertainties, the root of the sum of squares
    of the contributions, and the sum of the shares.
    """
    own = [row for row in budget.rows if not row.common]
    kinds: dict[str, list[BudgetRow]] = {}
    for row in own:
        kinds.setdefault(scan_family(row.quantity), []).append(row)
    if all(len(rows) == 1 for rows in kinds.values()):
        return full
    common = [group for group in full.groups if any(_is_common(row, budget) for row in group.rows)]
    exponent = math.floor(math.log10(budget.combined_standard_uncertainty or 1.0))
    ranked = sorted(kinds.items(), key=lambda item: -_root_sum(item[1]))
    lines = tuple(_kind_line(name, rows, exponent) for name, rows in ranked)
    heading = next(group.heading for group in full.groups if group not in common)
    note = f"{full.note} Inputs that every scan has are put together, kind by kind."
    return Table(full.key, full.caption, full.columns, (*common, Group(heading, lines)), note)


def _is_common(cells: tuple[Cell, ...], budget: Budget) -> bool:
    return any(row.common and row.quantity == cells[0].detail for row in budget.rows)


def _root_sum(rows: list[BudgetRow]) -> float:
    return math.hypot(*(row.contribution for row in rows))


def _kind_line(name: str, rows: list[BudgetRow], exponent: int) -> tuple[Cell, ...]:
    first = rows[0]
    smallest = min(row.standard_uncertainty for row in rows)
    largest = max(row.standard_uncertainty for row in rows)
    spread = typeset_figure(largest)
    if smallest < largest:
        spread = f"{typeset_figure(smallest)} to {spread}"
    freedom = min(row.degrees_of_freedom for row in rows)
    share = sum(row.variance_share for row in rows)
    contribution = _root_sum(rows)
    return (
        Cell(f"{input_words(name)} ({len(rows)} scans)", None, name),
        symbol(first.symbol),
        Cell("0" if all(row.estimate == 0.0 for row in rows) else ""),
        Cell(spread, largest),
        Cell(spelled(first.unit)),
        Cell("/".join(sorted({row.evaluation for row in rows}))),
        Cell("/".join(sorted({row.distribution for row in rows}))),
        Cell("∞" if math.isinf(freedom) else f"{freedom:.0f}", freedom),
        Cell(""),
        Cell(digits(contribution / 10.0**exponent, 2).text, contribution),
        decimals(100.0 * share, 2),
    )


def improvement_table(study: BudgetStudy, longest: int | None = None) -> Table:
    """U that would remain if an input were better known, the largest gain first."""
    expanded, unit = study.budget.expanded_uncertainty, spelled(study.budget.unit)

    def change(remaining: float) -> Cell:
        share = remaining / expanded - 1.0 if expanded > 0.0 else 0.0
        return Cell(decimals(100.0 * share, 1, signed=True).text, share)

    rows = [
        (
            words(_spoken(one.quantity), one.quantity),
            digits(one.expanded_if_halved, 2),
            change(one.expanded_if_halved),
            digits(one.expanded_if_zero, 2),
            change(one.expanded_if_zero),
        )
        for one in study.improvements[:longest]
    ]
    return table(
        "improve",
        "What would improve the result",
        ("input", f"U / ({unit}), its u halved", "change / %", "U, its u zero", "change / %"),
        rows,
        numeric=(1, 2, 3, 4),
        note=floor_line(study),
    )


def _spoken(name: str) -> str:
    scan = scan_of(name)
    return input_words(name) + (f", {scan}" if scan else "")


def supposition_table(supposed: WhatIf) -> Table:
    """The supposed figures: which inputs get them."""
    units = {quantity.name: quantity.unit for quantity in supposed.model.inputs}
    rows = []
    for one in supposed.suppositions:
        unit = "" if one.field == "dof" else units[one.inputs[0]]
        figure = united(typeset_figure(one.value, 3), unit)
        rows.append(
            (words(one.name, _spoken(one.inputs[0])), Cell(one.field), Cell(figure, one.value))
        )
    return table("supposed", "Supposed", ("input", "figure", "value"), rows, numeric=(2,))


def what_if_table(supposed: WhatIf) -> Table:
    """The result as it is and as it would be."""
    before, after = supposed.before, supposed.after
    unit = before.unit

    def line(name: str, figures: Sequence[Cell]) -> tuple[Cell, ...]:
        return (Cell(name), *figures)

    def ratio(old: float, new: float) -> Cell:
        return decimals(100.0 * (new / old - 1.0) if old else 0.0, 1, signed=True)

    rows = [
        line(before.measurand, (
            plus_minus(before.value, before.expanded_uncertainty, unit),
            plus_minus(after.value, after.expanded_uncertainty, unit),
            decimals(100.0 * (after.value / before.value - 1.0), 2, signed=True))),
        line("u", (
            digits(before.combined_standard_uncertainty, 2, unit),
            digits(after.combined_standard_uncertainty, 2, unit),
            ratio(before.combined_standard_uncertainty, after.combined_standard_uncertainty))),
        line("k", (
            decimals(before.coverage_factor, 2),
            decimals(after.coverage_factor, 2),
            ratio(before.coverage_factor, after.coverage_factor))),
        line("U", (
            digits(before.expanded_uncertainty, 2, unit),
            digits(after.expanded_uncertainty, 2, unit),
            ratio(before.expanded_uncertainty, after.expanded_uncertainty))),
    ]  # fmt: skip
    return table(
        "what_if",
        "What if",
        ("", "as it is", "as supposed", "change / %"),
        rows,
        numeric=(1, 2, 3),
        note="The edges are not fitted again; the weights of the voltages are worked out anew.",
    )


def study_tables(study: BudgetStudy, full: Table) -> list[Table]:
    """All tables of a study in reading order, the given budget table in its place."""
    tables = [source_table(study.budget), full, improvement_table(study)]
    if study.supposed is not None:
        tables += [supposition_table(study.supposed), what_if_table(study.supposed)]
    return tables
