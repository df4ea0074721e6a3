"""Rows of the report: what is shown is what the record holds, rounded once."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from report_fixture import example

from hdetermine.inference import measurement as names
from hdetermine.records.results import WindowFit
from hdetermine.report import rows, rows_routes, rows_scale, rows_source
from hdetermine.report.plaintext import remark, sentence
from hdetermine.report.spoken import checks_in_words, input_words, scan_of
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
    for change, said in (({"edge": False}, "no: serves the lines"),
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
    assert "the fit of most weight (0.70) of 2" in facts["window"].text
    assert "no line modelled" in facts["window"].text
    only = replace(d.used[0], windows=d.used[0].windows[:1])
    assert "in the only fit" in dict(rows.scan_facts(only))["window"].text


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
    checks = rows.check_rows(d)
    assert [cell.text for cell in column(checks, "outcome")] == [
        "failed", "passed", "not possible"]  # fmt: skip
    short = [cell.text for cell in column(rows.check_rows(d, brief=True), "meaning")]
    assert short[1] == ""
    sound = rows.check_rows(replace(d, checks=d.checks[:1]), brief=True)
    assert [one.heading for one in sound.columns] == ["check", "outcome", "figure", "limit"]
    assert len(sound.rows[0]) == 4
    assert [short[0], short[2]] == [checks.rows[0][4].text, checks.rows[2][4].text]
    assert [cell.text for cell in column(checks, "figure")] == ["−2.60", "0.40", "–"]
    backwards = rows.backward_rows(d)
    assert backwards.rows[0][1].number == d.read_backwards.voltage_gain
    # (0.9987 - 1)/sqrt(0.0041^2 + 0.004^2) and (281.6 - d)/sqrt(1.2^2 + 0.02^2)
    assert column(backwards, "difference / u")[0].number == pytest.approx(-0.227, abs=1e-3)
    assert "0.13(41) % below the displayed one" in plain_spaces(backwards.note)


def test_checks_in_one_sentence(d):
    assert checks_in_words(d.checks) == (
        "1 of 2 consistency checks failed and asks for a second look before the result is used: "
        "exponent."
    )
    assert checks_in_words(d.checks[:1]).startswith("The one consistency check")
    assert checks_in_words(d.checks[2:]) == "No consistency check was possible."
    both = (d.checks[0], replace(d.checks[1], passed=True))
    assert checks_in_words(both) == "All 2 consistency checks that the data allow passed."


def test_improvements(d):
    table = rows.improvement_rows(d)
    assert table.rows[0][0].text == "gain of the voltage display"
    assert table.rows[0][0].detail == names.GAIN
    assert table.rows[0][2].number == pytest.approx(-0.19)
    assert "would stay at" in table.note
    assert rows.improvement_rows(replace(d, improvements=())) is None


def test_improvements_are_held_against_the_linear_route(d):
    """They are figures of the linear route, whichever route is reported."""
    other = replace(d, h=replace(d.h, route="monte_carlo", expanded_uncertainty_J_s=1e-35))
    table = rows.improvement_rows(other)
    assert table.rows[0][2].number == pytest.approx(-0.19)
    assert "now by the linear route" in table.note


def test_inputs_that_would_not_help_are_told_with_a_bound_above_zero(d):
    small = replace(d.improvements[0], expanded_if_zero=d.budget.expanded_uncertainty * 0.99999)
    table = rows.improvement_rows(replace(d, improvements=(d.improvements[0], small)))
    assert len(table.rows) == 1
    assert "None of the other 1 inputs would lower U by more than 0.1" in table.note


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
    assert priors.rows[0][3].number == route.value_J_s
    wider = rows_routes.sensitivity_rows(route)
    assert [[cell.text for cell in row] for row in wider.rows] == [
        ["none: the posterior as it is", "6.622", "0.053"],
        ["of all Type B inputs, sampled again", "6.623", "0.11"]]  # fmt: skip
    assert "The other 1 inputs change h by less" in wider.note
    sampling = rows_routes.sampling_rows("posterior", "Posterior", route)
    assert [row[0].text for row in sampling.rows] == [
        "walkers", "steps", "acceptance fraction", "converged"]  # fmt: skip


def test_a_route_without_figures_makes_no_tables(d):
    bare = replace(d.routes["posterior"], diagnostics={})
    for make in (rows_routes.convergence_rows, rows_routes.prior_rows,
                 rows_routes.sensitivity_rows):  # fmt: skip
        assert make(bare) is None
        assert make(None) is None


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


def test_a_trend_along_the_residuals_is_told(d):
    """Residuals of one sign at low and of the other at high voltage: one change of sign."""
    relation = d.relation
    order = np.argsort(relation.voltages_kV)
    wavelengths = relation.slope_pm_kV / relation.voltages_kV
    trend = wavelengths.copy()
    trend[order] *= np.linspace(0.99, 1.01, order.size) + 1e-6
    assert rows_scale.sign_changes(replace(relation, wavelengths_pm=trend)) == (1, order.size - 1)
    shown = {row[0].text: row[1].text for row in rows_scale.relation_rows(
        replace(d, relation=replace(relation, wavelengths_pm=trend))).rows}  # fmt: skip
    assert shown["changes of sign along the residuals"] == "1 of 8"


def test_diagnostics_of_any_kind():
    table = rows_scale.diagnostic_rows(
        "x", "X", {"stable": True, "draws": 250_000, "spread": {"u_J_s": 1.5e-38}, "walls": [1, 2]}
    )
    assert [[plain_spaces(cell.text) for cell in row] for row in table.rows] == [
        ["stable", "yes"],
        ["draws", "250 000"],
        ["spread: u", "1.50 × 10⁻³⁸ J s"],
        ["walls", "1, 2"],
    ]
    assert rows_scale.diagnostic_rows("x", "X", {}) is None


def test_provenance(d):
    assert len(rows_source.file_rows(d).rows) == len(d.run.files)
    assert rows_source.version_rows(d).rows[-1][1].number == 1.0
    assert [row[2].text for row in rows_source.sheet_rows(d).rows] == [
        "stated", "stated", "default"]  # fmt: skip
    assert plain_spaces(rows_source.sheet_rows(d).rows[2][1].text) == (
        "3.98 × 10⁻⁵ with u = 5 × 10⁻⁷")  # fmt: skip
    scans = rows_source.scan_rows(d)
    assert [row[5].number for row in scans.rows] == [one.counts.size for one in d.run.scans]
    assert scans.rows[0][3].text == "2.50 to 9.00"
    assert {row[7].text for row in scans.rows} == {"edge and lines"}


@pytest.mark.parametrize(
    ("text", "shown"),
    [
        ("0 kV, u = 0.0289 kV, rectangular", "0 kV, u = 0.0289 kV, rectangular"),
        ("90 us, u = 10 us", "90 µs, u = 10 µs"),
        ("3.35e-05 1/K, u = 8.66e-07 1/K", "3.35 × 10⁻⁵ K⁻¹, u = 8.66 × 10⁻⁷ K⁻¹"),
        ("5.345785524e-05, u = 2.67e-06", "5.346 × 10⁻⁵, u = 2.67 × 10⁻⁶"),
        ("25 degC", "25 °C"),
        ("0 deg, u = 0.15 deg", "0°, u = 0.15°"),
        ("-2 kV of bench e5, 7 <b>", "−2 kV of bench e5, 7 <b>"),
    ],
)
def test_run_sheet_is_set_as_the_rest(d, text, shown):
    """Units and numbers as in the SI brochure, 9th ed. (2019), 5.4.3."""
    one = replace(d.run.sheet[0], text=text)
    table = rows_source.sheet_rows(replace(d, run=replace(d.run, sheet=(one,))))
    assert plain_spaces(table.rows[0][1].text) == shown


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


@pytest.mark.parametrize(
    ("text", "shown"),
    [
        ("counts were restored as rate x dwell", "Counts were restored as rate × dwell."),
        ("scan_3 is -2 off.", "scan_3 is −2 off."),
        ("", ""),
    ],
)
def test_remarks_are_sentences(text, shown):
    assert remark(text) == shown


@pytest.mark.parametrize("hostile", ["\x1b]0;x\x07", "a\u202eb", "line\nbreak", "x" * 9000])
def test_text_from_the_run_is_tamed(hostile):
    table = rows.refused_rows(
        replace(example(), cutoffs=(replace(example().refused[0], reason=hostile),))
    )
    shown = table.rows[0][2].text
    assert not any(ord(one) < 32 or one in "\u202e\u2066" for one in shown)
    assert len(shown) <= 500
