"""Rows of the report: what is shown is what the record holds, rounded once."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest
from report_fixture import example

from hdetermine.inference import measurement as names
from hdetermine.records.results import Budget, WindowFit
from hdetermine.report import rows, rows_budget, rows_routes, rows_scale, rows_source
from hdetermine.report.plaintext import sentence
from hdetermine.report.spoken import input_words, scan_of, sources
from hdetermine.report.table import (
    Cell,
    decimals,
    digits,
    plus_minus,
    symbol,
    united,
    with_uncertainty,
)


@pytest.fixture(scope="module")
def d():
    return example()


def column(table, heading):
    place = [one.heading for one in table.columns].index(heading)
    return [row[place] for row in table.rows]


def plain_spaces(text):
    return text.replace("\N{NO-BREAK SPACE}", " ").replace("\N{NARROW NO-BREAK SPACE}", " ")


# --- cells ------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("cell", "text"),
    [
        (with_uncertainty(6.62607e-34, 2.96e-36, "J s"), "6.626(30) × 10⁻³⁴ J s"),
        (plus_minus(6.62607e-34, 5.9e-36, "J s"), "(6.626 ± 0.059) × 10⁻³⁴ J s"),
        (plus_minus(282.01, 0.02, "pm"), "(282.010 ± 0.020) pm"),
        (with_uncertainty(5.1532, 0.0098, "deg"), "5.1532(98)°"),
        (with_uncertainty(22.0, 2.0, "°C"), "22.0(20) °C"),
        (with_uncertainty(math.nan, 1.0), "–"),
        (decimals(-0.4512, 2, "%", signed=True), "−0.45 %"),
        (decimals(0.4512, 2, "%", signed=True), "+0.45 %"),
        (decimals(-0.001, 2, signed=True), "0.00"),
        (digits(math.inf), "∞"),
        (digits(math.nan), "–"),
        (digits(None), "–"),
        (digits(-math.inf), "−∞"),
        (digits(2.1e-36, 2, "J s"), "2.1 × 10⁻³⁶ J s"),
    ],
)
def test_cells(cell, text):
    """Signs, spaces and places as in the SI brochure, 9th ed. (2019), 5.4.3 and 5.4.4."""
    assert plain_spaces(cell.text) == text


def test_degree_stands_close_and_ratio_has_no_unit():
    assert united("5.1", "deg") == "5.1°"
    assert united("0.999", "1") == "0.999"
    assert united("20", "kV") == "20\N{NARROW NO-BREAK SPACE}kV"


@pytest.mark.parametrize(
    ("plain_symbol", "letter", "below"),
    [("g", "g", ""), ("delta_r", "δ", "r"), ("s_λ", "s", "λ"), ("t1", "t", "1"), ("U_0", "U", "0"),
     ("7", "7", ""), ("", "–", "")],
)  # fmt: skip
def test_symbols(plain_symbol, letter, below):
    cell = symbol(plain_symbol)
    assert (cell.text, cell.subscript) == (letter, below)


# --- tables -----------------------------------------------------------------------------------


def test_result(d):
    table = rows.result_rows(d)
    shown = {row[0].text: row[1] for row in table.rows}
    assert shown["Planck constant h"].number == d.h.value_J_s
    assert shown["relative deviation"].number == d.comparison.relative_deviation
    assert shown["Eₙ"].number == d.comparison.E_n
    assert plain_spaces(shown["h ± U"].text) == "(6.623 ± 0.053) × 10⁻³⁴ J s"
    assert shown["effective degrees of freedom"].text == "412"


def test_infinite_degrees_of_freedom(d):
    other = replace(d, h=replace(d.h, effective_degrees_of_freedom=math.inf))
    shown = {row[0].text: row[1].text for row in rows.result_rows(other).rows}
    assert shown["effective degrees of freedom"] == "∞"


def test_cutoffs(d):
    table = rows.cutoff_rows(d)
    assert len(table.rows) == len(d.cutoffs)
    wavelengths = column(table, "λₘᵢₙ / pm")
    assert [cell.number for cell in wavelengths[1:]] == [one.wavelength_pm for one in d.used]
    assert wavelengths[0] == Cell("–")
    assert column(table, "used")[0].text == "no: refused"


def test_scans_that_were_never_meant_for_a_cutoff_are_not_called_refused(d):
    for change, said in (({"edge": False}, "no: for the lines only"),
                         ({"leave_out": "tube was warming up"}, "no: left out")):  # fmt: skip
        scans = (replace(d.run.scans[0], **change), *d.run.scans[1:])
        table = rows.cutoff_rows(replace(d, run=replace(d.run, scans=scans)))
        assert column(table, "used")[0].text == said


def test_value_from_one_scan_alone(d):
    """h_i = e U_i lambda_i / c, so that their weighted mean is h."""
    single = rows.single_values_J_s(d)
    mean = sum(
        weight * single[scan][0]
        for weight, scan in zip(d.relation.weights, d.relation.scans, strict=True)
    )
    assert mean == pytest.approx(d.h.value_J_s, rel=1e-9)


def test_own_uncertainty_of_a_scan(d):
    cutoff = replace(d.used[0], counting_u_deg=0.003, window_u_deg=0.004, background_u_deg=math.nan)
    assert rows.own_u_deg(cutoff) == pytest.approx(0.005)


def test_facts_of_a_scan_show_a_window_of_the_users_own(d):
    fixed = WindowFit(4.0, 6.0, 2, 1, 1, 5.16, 0.012, 20.0, 15, 0.0)
    facts = dict(rows.scan_facts(replace(d.used[0], fixed_window=fixed)))
    assert plain_spaces(facts["your window"].text) == "5.160(12)° from 4.00° to 6.00°"
    assert "no line modelled" in facts["heaviest of 2 fits"].text


def test_refused(d):
    table = rows.refused_rows(d)
    assert [cell.text for cell in table.rows[0]] == [
        "scan_18kV", "18.00", "a characteristic line stands inside the edge"]  # fmt: skip
    assert rows.refused_rows(example(refused=False)) is None


@pytest.mark.parametrize(
    ("posterior", "use"),
    [
        ("converged", "for comparison"),
        ("not converged", "not usable: the chain has not converged: split R-hat 1.31 exceeds 1.05"),
        ("absent", "not taken"),
    ],
)
def test_routes(posterior, use):
    table = rows_routes.route_rows(example(posterior=posterior))
    assert column(table, "use")[0].text == "reported"
    assert column(table, "use")[2].text == use


def test_checks_and_backwards(d):
    assert [cell.text for cell in column(rows.check_rows(d), "outcome")] == [
        "passed", "failed", "not possible"]  # fmt: skip
    backwards = rows.backward_rows(d)
    assert backwards.rows[0][1].number == d.read_backwards.voltage_gain


def test_improvements(d):
    table = rows.improvement_rows(d)
    assert table.rows[0][0].text == "gain of the voltage display"
    assert table.rows[0][0].detail == names.GAIN
    assert table.rows[0][2].number == pytest.approx(-0.19)
    assert "would stay at" in table.note
    assert rows.improvement_rows(replace(d, improvements=())) is None


def test_figures_behind_the_posterior(d):
    route = d.routes["posterior"]
    convergence = rows_routes.convergence_rows(route)
    assert [cell.text for cell in convergence.rows[0]] == [
        "h",
        "3.02",
        "25\N{NARROW NO-BREAK SPACE}798",
        "1.005",
    ]
    assert "split R-hat of at most 1.05" in convergence.note
    priors = rows_routes.prior_rows(route)
    assert [row[0].text for row in priors.rows] == ["h", "gain of the voltage display"]
    assert priors.rows[1][3].text == "1.0001(39)"
    wider = rows_routes.sensitivity_rows(route)
    assert [cell.text for cell in wider.rows[0]] == [
        "all Type B inputs, sampled again", "6.623", "0.11"]  # fmt: skip
    sampling = rows_routes.sampling_rows("posterior", "Posterior", route)
    assert [row[0].text for row in sampling.rows] == [
        "walkers", "steps", "acceptance fraction", "converged"]  # fmt: skip


def test_a_route_without_figures_makes_no_tables(d):
    bare = replace(d.routes["posterior"], diagnostics={})
    for make in (rows_routes.convergence_rows, rows_routes.prior_rows,
                 rows_routes.sensitivity_rows):  # fmt: skip
        assert make(bare) is None
        assert make(None) is None


# --- budget -----------------------------------------------------------------------------------


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
    assert "r = 0.31" in table.note


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


# --- scale and source -------------------------------------------------------------------------


def test_angle_scale_and_lines(d):
    table = rows_scale.scale_rows(d)
    assert plain_spaces(table.rows[0][1].text) == "0.112(11)°"
    assert rows_scale.line_rows(d).rows[2][-1].text == "no: blended with the edge"
    assert rows_scale.line_rows(example(lines=False)) is None


def test_relation_of_one_voltage_has_a_slope_only():
    table = rows_scale.relation_rows(example((30.0,), refused=False))
    assert [row[0].text for row in table.rows] == ["slope through the origin"]


def test_scatter_is_told():
    d = example()
    relation = replace(d.relation, scatter_deg=0.004, stated_birge_ratio=1.9)
    shown = {row[0].text: row[1].text for row in rows_scale.relation_rows(
        replace(d, relation=relation)).rows}  # fmt: skip
    assert shown["scatter between scans beyond all other inputs"] == "0.0040°"
    assert shown["Birge ratio without that scatter"] == "1.90"


def test_diagnostics_of_any_kind():
    table = rows_scale.diagnostic_rows(
        "x", "X", {"stable": True, "draws": 250_000, "spread": {"u_J_s": 1.5e-38}, "walls": [1, 2]}
    )
    assert [[plain_spaces(cell.text) for cell in row] for row in table.rows] == [
        ["stable", "yes"],
        ["draws", "250 000"],
        ["spread: u", "1.500 × 10⁻³⁸ J s"],
        ["walls", "1, 2"],
    ]
    assert rows_scale.diagnostic_rows("x", "X", {}) is None


def test_provenance(d):
    assert len(rows_source.file_rows(d).rows) == len(d.run.files)
    assert rows_source.version_rows(d).rows[-1][1].number == 1.0
    assert [row[2].text for row in rows_source.sheet_rows(d).rows] == [
        "stated", "stated", "default"]  # fmt: skip


def test_names_in_words():
    assert input_words("tube.voltage.gain") == "gain of the voltage display"
    assert input_words("scan.a.b.counting_deg") == "counting statistics"
    assert scan_of("scan.a.b.counting_deg") == "a.b"
    assert scan_of("tube.voltage.gain") == ""
    assert input_words("something.new") == "something.new"


@pytest.mark.parametrize(
    ("text", "shown"),
    [
        ("it differs by -0.35 u (-3)", "it differs by −0.35 u (−3)"),
        ("on 2026-03-12, K-L2,3, 1e-6, --2", "on 2026-03-12, K-L2,3, 1e-6, --2"),
    ],
)
def test_true_minus_in_sentences(text, shown):
    assert sentence(text) == shown


@pytest.mark.parametrize("hostile", ["\x1b]0;x\x07", "a\u202eb", "line\nbreak", "x" * 9000])
def test_text_from_the_run_is_tamed(hostile):
    table = rows.refused_rows(
        replace(example(), cutoffs=(replace(example().refused[0], reason=hostile),))
    )
    shown = table.rows[0][2].text
    assert not any(ord(one) < 32 or one in "\u202e\u2066" for one in shown)
    assert len(shown) <= 500
