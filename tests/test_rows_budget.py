"""Rows of the budget: by source, by sets of correlated inputs, input by input."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from report_fixture import example

from hdetermine.inference import measurement as names
from hdetermine.records.results import Budget
from hdetermine.report import rows_budget
from hdetermine.report.spoken import sources


@pytest.fixture(scope="module")
def d():
    return example()


def test_budget_keeps_common_and_independent_apart(d):
    table = rows_budget.budget_rows(d.budget)
    common, independent = table.groups
    assert len(common.rows) + len(independent.rows) == len(d.budget.rows)
    assert "96.1" in common.heading
    assert "3.9" in independent.heading
    sizes = [abs(row[9].number) for row in common.rows]
    assert sizes == sorted(sizes, reverse=True)


def test_budget_shares_are_those_of_the_record(d):
    table = rows_budget.budget_rows(d.budget)
    assert sum(row[10].number for row in table.rows) == pytest.approx(1.0)
    assert sum(float(row[10].text.replace("−", "-")) for row in table.rows) == pytest.approx(
        100.0, abs=0.3
    )


def test_budget_marks_defaults_and_correlations(d):
    table = rows_budget.budget_rows(d.budget)
    named = {row[0].detail: row[0].text for row in table.rows}
    assert named["crystal.refraction"].endswith("†")
    assert named["goniometer.zero_deg"].endswith("‡")
    assert named["tube.voltage.gain"] == "gain of the voltage display"
    assert "r(d, z) = 0.31" in table.note


def test_budget_by_source_sums_up(d):
    table = rows_budget.source_rows(d.budget)
    *sources_, whole = table.rows
    assert sum(row[4].number for row in sources_) == pytest.approx(whole[4].number)
    assert whole[3].number == pytest.approx(d.budget.combined_standard_uncertainty)
    named = {row[0].text: row for row in table.rows}
    assert named["counting statistics"][1].text == f"one for each of {len(d.used)} scans"
    assert named["continuum shape near the limit"][1].text == "a, ε"
    assert named["spacing with temperature"][3].text == "–"
    assert named["all others"][1].text == "of 3 sources"
    assert "All others: cathode work function, refraction" in table.note
    parts = sum(row[3].number ** 2 for row in sources_ if row[3].number)
    negative = sum(row[4].number for row in sources_ if row[4].number < 0.0)
    u = d.budget.combined_standard_uncertainty
    assert parts == pytest.approx(u**2 * (1.0 - negative))


def test_correlated_inputs_stand_together_with_their_sum(d):
    table = rows_budget.correlated_rows(d.budget)
    assert [row[1].text for row in table.rows] == ["r(d, z) = 0.31"]
    shares = {row.quantity: row.variance_share for row in d.budget.rows}
    assert table.rows[0][3].number == pytest.approx(shares[names.ZERO] + shares[names.SPACING])
    alone = replace(d.budget, correlation=np.eye(len(d.budget.rows)))
    assert rows_budget.correlated_rows(alone) is None
    assert rows_budget.correlated_pairs(alone) == ()


def test_terms_of_one_series_are_named_once(d):
    first = replace(d.budget.rows[0], quantity="continuum.smooth_1", symbol="t1")
    second = replace(first, quantity="continuum.smooth_2", symbol="t2")
    matrix = np.array([[1.0, -0.7], [-0.7, 1.0]])
    table = rows_budget.correlated_rows(
        replace(d.budget, rows=(first, second), correlation=matrix))  # fmt: skip
    assert table.rows[0][0].text == "smooth factor of the continuum (t₁, t₂)"
    assert table.rows[0][1].text == "r(t₁, t₂) = −0.70"


def test_sets_of_correlated_inputs_are_linked_through_others(d):
    matrix = np.eye(len(d.budget.rows))
    for i, j, r in ((0, 3, 0.5), (3, 5, -0.4), (1, 2, 0.2), (4, 6, 0.01)):
        matrix[i, j] = matrix[j, i] = r
    found = rows_budget.correlated_sets(replace(d.budget, correlation=matrix))
    assert found == ((0, 3, 5), (1, 2))


def test_sources_sum_up_by_group(d):
    found = {one.words: one for one in sources(d.budget)}
    counting = found["counting statistics"]
    assert counting.count == len(d.used)
    assert not counting.common
    assert sum(one.variance_share for one in found.values()) == pytest.approx(1.0)


def test_budget_of_another_measurand():
    """The rows serve any budget, for instance one without groups or correlation."""
    one = example().budget
    row = replace(one.rows[0], quantity="length", group="", sensitivity=2.0)
    table = rows_budget.budget_rows(
        Budget("l", "mm", 5.0, 0.0, math.inf, 0.95, 2.0, 0.0, (row,), one.correlation[:1, :1])
    )
    assert table.rows[0][0].text == "length"
    assert table.caption == "Uncertainty budget of l"
