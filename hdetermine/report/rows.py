"""The rows of the result: one set for page, document and terminal, so that all agree."""

from __future__ import annotations

import math

import numpy as np

from hdetermine.physics.constants import ELEMENTARY_CHARGE_C, PLANCK_PER_SLOPE
from hdetermine.records.results import Cutoff, Determination
from hdetermine.report.plaintext import sentence
from hdetermine.report.spoken import ROUTE_WORDS, input_words, scan_of
from hdetermine.report.table import (
    NONE,
    Cell,
    Table,
    decimals,
    digits,
    in_units,
    percent,
    plus_minus,
    table,
    with_uncertainty,
    words,
)

MOST_IMPROVEMENTS = 12
LEAST_GAIN = 0.001
"""Relative gain below which an input is not worth a row of its own."""


def result_rows(d: Determination) -> Table:
    """Result: h, U, k, p, relative deviation, E_n, and what goes with them."""
    h = d.h
    rows = [
        (Cell("Planck constant h"),
         with_uncertainty(h.value_J_s, h.standard_uncertainty_J_s, "J s"),
         words("estimate with its standard uncertainty u in parentheses")),
        (Cell("h ± U"), plus_minus(h.value_J_s, h.expanded_uncertainty_J_s, "J s"),
         words("U = k u, the expanded uncertainty")),
        (Cell("coverage factor k"), decimals(h.coverage_factor, 2),
         Cell("Student's t for the effective degrees of freedom" if h.route == "linear"
              else "half the 95 % interval over u")),
        (Cell("coverage probability p"), decimals(100.0 * h.coverage_probability, 1, "%"),
         Cell("that the interval h ± U holds the value")),
        (Cell("effective degrees of freedom"), _freedom(h.effective_degrees_of_freedom),
         Cell("Welch–Satterthwaite")),
        (Cell("relative standard uncertainty"),
         digits(100.0 * h.relative_standard_uncertainty, 2, "%"), Cell("u/h")),
        (Cell("relative deviation"), percent(d.comparison.relative_deviation),
         words("from the SI value, which is exact")),
        (Cell("Eₙ"), decimals(d.comparison.E_n, 2),
         Cell("deviation over U; agreement up to 1 in magnitude")),
        (Cell("h in electronvolt seconds"),
         with_uncertainty(h.value_J_s / ELEMENTARY_CHARGE_C,
                          h.standard_uncertainty_J_s / ELEMENTARY_CHARGE_C, "eV s"),
         Cell("the same value, divided by the elementary charge")),
        (Cell("route"), Cell(ROUTE_WORDS[h.route]), Cell("see the three routes")),
    ]  # fmt: skip
    return table("result", "The result in figures", ("quantity", "value", "meaning"), rows)


def _freedom(number: float) -> Cell:
    if not math.isfinite(number) or number >= 1e4:
        return Cell("∞" if number > 0 else NONE, number)
    return Cell(f"{math.floor(number + 1e-9)}", number)


def single_values_J_s(d: Determination) -> dict[str, tuple[float, float]]:
    """Give h and its standard uncertainty from each used scan alone, by name, J s."""
    relation = d.relation
    energies = relation.voltages_kV
    wavelengths = relation.wavelengths_pm
    values = wavelengths * energies * PLANCK_PER_SLOPE
    relative = np.sqrt(
        np.diag(relation.covariance_pm2) / wavelengths**2
        + np.diag(relation.voltage_covariance_kV2) / energies**2
    )
    return {
        scan: (float(value), float(value * part))
        for scan, value, part in zip(relation.scans, values, relative, strict=True)
    }


def cutoff_rows(d: Determination) -> Table:
    """Cutoffs: one row a scan, refused ones included."""
    single = single_values_J_s(d)
    influence = {one.scan: one for one in d.relation.influence}
    for_lines = {scan.name for scan in d.run.scans if not scan.edge}
    left_out = {scan.name for scan in d.run.scans if scan.leave_out}
    rows = []
    for cutoff in d.cutoffs:
        name, voltage = words(cutoff.scan), digits(cutoff.tube_voltage_kV, 4)
        if not cutoff.used:
            why = "for the lines only" if cutoff.scan in for_lines else "refused"
            why = "left out" if cutoff.scan in left_out else why
            rows.append((name, voltage, *([Cell(NONE)] * 6), Cell(f"no: {why}")))
            continue
        own_u = own_u_deg(cutoff)
        value, value_u = single.get(cutoff.scan, (math.nan, math.nan))
        shift = influence[cutoff.scan].shift_in_u if cutoff.scan in influence else math.nan
        rows.append(
            (
                name,
                voltage,
                with_uncertainty(cutoff.reading_deg, own_u),
                decimals(cutoff.glancing_angle_deg, 3),
                with_uncertainty(cutoff.wavelength_pm, cutoff.standard_uncertainty_pm),
                in_units(value, value_u, -34),
                decimals(shift, 2, signed=True),
                Cell(
                    f"{decimals(cutoff.deviance, 1).text} / {cutoff.degrees_of_freedom}",
                    cutoff.deviance,
                ),
                Cell("yes"),
            )
        )
    return table(
        "cutoffs",
        "Cutoff of each scan",
        ("scan", "U / kV", "reading / °", "θ / °", "λₘᵢₙ / pm", "hᵢ / 10⁻³⁴ J s", "shift / u",
         "deviance / ν", "used"),
        rows,
        numeric=(1, 2, 3, 4, 5, 6, 7),
        note="U: displayed tube voltage. In parentheses: the standard uncertainty, for the reading "
        "from counting and the choice of fit alone, for the wavelength and for hᵢ, the value from "
        "this scan alone, from everything. Shift: how far h moves, in units of u(h), when this "
        "scan is left out. Deviance of the heaviest fit and its degrees of freedom.",
    )  # fmt: skip


def own_u_deg(cutoff: Cutoff) -> float:
    """Standard uncertainty that the scan itself brings: counting, windows, backgrounds."""
    parts = (cutoff.counting_u_deg, cutoff.window_u_deg, cutoff.background_u_deg)
    return math.hypot(*(part for part in parts if math.isfinite(part)))


def scan_facts(cutoff: Cutoff) -> tuple[tuple[str, Cell], ...]:
    """What there is to say about one scan's fit: label and text."""
    if not cutoff.used:
        return (("no cutoff", Cell(sentence(cutoff.reason))),)
    own_u = own_u_deg(cutoff)
    facts = [
        ("cutoff, as read", with_uncertainty(cutoff.reading_deg, own_u, "deg")),
        ("cutoff wavelength",
         with_uncertainty(cutoff.wavelength_pm, cutoff.standard_uncertainty_pm, "pm")),
        ("deviance", Cell(f"{decimals(cutoff.deviance, 1).text} with "
                          f"{cutoff.degrees_of_freedom} degrees of freedom", cutoff.deviance)),
        ("shape", words(cutoff.shape)),
    ]  # fmt: skip
    if cutoff.windows:
        heaviest = cutoff.windows[0]
        lines = heaviest.lines_modelled
        facts.append(
            (
                "heaviest of " + _counted(len(cutoff.windows), "fit"),
                Cell(
                    f"{heaviest.from_deg:.2f}° to {heaviest.to_deg:.2f}°, "
                    f"{_counted(heaviest.background_terms, 'term')} of background, "
                    f"{_counted(heaviest.continuum_terms, 'term')} of continuum, "
                    f"{_counted(lines, 'line') if lines else 'no line'} modelled, "
                    f"weight {heaviest.weight:.2f}"
                ),
            )
        )
    if cutoff.fixed_window is not None:
        fixed = cutoff.fixed_window
        text = with_uncertainty(fixed.reading_deg, fixed.reading_u_deg, "deg").text
        facts.append(
            ("your window", Cell(f"{text} from {fixed.from_deg:.2f}° to {fixed.to_deg:.2f}°"))
        )
    return tuple(facts)


def _counted(number: int, thing: str) -> str:
    return f"{number} {thing}" if number == 1 else f"{number} {thing}s"


def refused_rows(d: Determination) -> Table | None:
    """Scans that took no part, with reasons; None if all did."""
    if not d.refused:
        return None
    rows = [
        (words(cutoff.scan), digits(cutoff.tube_voltage_kV, 4), Cell(sentence(cutoff.reason)))
        for cutoff in d.refused
    ]
    return table("refused", "Scans without a cutoff", ("scan", "U / kV", "reason"), rows,
                 numeric=(1,))  # fmt: skip


def backward_rows(d: Determination) -> Table:
    """With h exact: the implied voltage gain and the implied spacing."""
    back, kit = d.read_backwards, d.run.apparatus
    gain, spacing = kit.tube.gain, kit.crystal.spacing_pm
    rows = [
        (Cell("gain of the voltage display"),
         with_uncertainty(back.voltage_gain, back.voltage_gain_u),
         with_uncertainty(gain.value, gain.standard_uncertainty)),
        (Cell("spacing of the crystal planes"),
         with_uncertainty(back.spacing_pm, back.spacing_u_pm, "pm"),
         with_uncertainty(spacing.value, spacing.standard_uncertainty, "pm")),
    ]  # fmt: skip
    return table("backwards", "Implied and stated values",
                 ("quantity", "implied by this run with h exact", "stated in the run sheet"), rows,
                 numeric=(1, 2))  # fmt: skip


def check_rows(d: Determination) -> Table:
    """Consistency checks, each with figure, limit and meaning."""
    state = {True: "passed", False: "failed", None: "not possible"}
    rows = [
        (words(check.name), Cell(state[check.passed]), digits(check.figure, 3),
         digits(check.limit, 3), Cell(sentence(check.meaning)))
        for check in d.checks
    ]  # fmt: skip
    headings = ("check", "outcome", "figure", "limit", "meaning")
    caption = "Figure, limit and meaning of each check"
    return table("checks", caption, headings, rows, numeric=(2, 3))


def improvement_rows(d: Determination) -> Table | None:
    """What U would remain if an input were better known; None without such figures."""
    if not d.improvements:
        return None
    whole = d.h.expanded_uncertainty_J_s
    gains = [1.0 - one.expanded_if_zero / whole for one in d.improvements]
    shown = sum(gain >= LEAST_GAIN for gain in gains[:MOST_IMPROVEMENTS]) or 1
    rows = []
    for one in d.improvements[:shown]:
        scan = scan_of(one.quantity).replace("*", "all scans")
        name = input_words(one.quantity) + (f", {scan}" if scan else "")
        rows.append(
            (
                words(name, one.quantity),
                digits(one.expanded_if_halved, 2, "J s"),
                percent(one.expanded_if_halved / whole - 1.0, 1),
                digits(one.expanded_if_zero, 2, "J s"),
                percent(one.expanded_if_zero / whole - 1.0, 1),
            )
        )
    note = (
        f"U is {digits(whole, 2, 'J s').text} now; with perfect counting statistics it would "
        f"stay at {digits(d.counting_floor_J_s, 2, 'J s').text}."
    )
    if len(gains) > shown:
        rest = 100.0 * max(0.0, *gains[shown:])
        note += (
            f" None of the other {len(gains) - shown} entries would lower U by more than "
            f"{decimals(rest, 1, '%').text}."
        )
    return table(
        "improvements",
        "U(h) if one input were better known",
        ("input", "U with half its u", "change", "U with its u zero", "change"),
        rows,
        numeric=(1, 2, 3, 4),
        note=note,
    )
