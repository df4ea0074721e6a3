"""The rows of the result: one set for page, document and terminal, so that all agree."""

from __future__ import annotations

import math

import numpy as np

from hdetermine.physics.constants import ELEMENTARY_CHARGE_C, PLANCK_PER_SLOPE
from hdetermine.records.quantity import Quantity
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
         Cell("Welch–Satterthwaite" if h.route == "linear"
              else "Welch–Satterthwaite, of the linear route")),
        (Cell("relative standard uncertainty"),
         digits(100.0 * h.relative_standard_uncertainty, 2, "%"), Cell("u/h")),
        (Cell("relative deviation"), percent(d.comparison.relative_deviation),
         words("from the SI value, which is exact")),
        (Cell("Eₙ"), decimals(d.comparison.E_n, 2),
         Cell("deviation over U; from −1 to 1 the result agrees")),
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
            why = "serves the lines" if cutoff.scan in for_lines else "refused"
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
        ("scan", "voltage / kV", "reading / °", "θ / °", "λₘᵢₙ / pm", "hᵢ / 10⁻³⁴ J s",
         "shift / u", "deviance / ν", "used"),
        rows,
        numeric=(1, 2, 3, 4, 5, 6, 7),
        note="Voltage: as displayed. Reading: the cutoff on the goniometer; θ: less the zero "
        "offset. hᵢ: h from this scan alone. In parentheses: the standard uncertainty, of the "
        "reading from counting and the choice of fit alone, of λₘᵢₙ from all that bears on the "
        "wavelength, of hᵢ from the voltage too, much of it common to all scans. Shift: how far "
        "h moves, in units of u(h), when this scan is left out. Deviance of the fit "
        "of most weight, and its degrees of freedom ν.",
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
    ]  # fmt: skip
    if cutoff.windows:
        heaviest = cutoff.windows[0]
        lines, fits = heaviest.lines_modelled, len(cutoff.windows)
        which = f"the fit of most weight ({heaviest.weight:.2f}) of {fits}"
        facts.append(
            (
                "window",
                Cell(
                    f"{heaviest.from_deg:.2f}° to {heaviest.to_deg:.2f}°, in "
                    f"{which if fits > 1 else 'the only fit'}; "
                    f"background of {_counted(heaviest.background_terms, 'term')}, "
                    f"continuum with {_counted(heaviest.continuum_terms, 'smooth term')}, "
                    f"{_counted(lines, 'line') if lines else 'no line'} modelled"
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
    return table("refused", "Why there is no cutoff", ("scan", "voltage / kV", "reason"), rows,
                 numeric=(1,))  # fmt: skip


def backward_rows(d: Determination) -> Table:
    """With h exact: the implied voltage gain and the implied spacing."""
    back, kit = d.read_backwards, d.run.apparatus
    gain, spacing = kit.tube.gain, kit.crystal.spacing_pm
    rows = [
        (Cell("gain of the voltage display"),
         with_uncertainty(back.voltage_gain, back.voltage_gain_u),
         with_uncertainty(gain.value, gain.standard_uncertainty),
         _difference(back.voltage_gain, back.voltage_gain_u, gain)),
        (Cell("spacing of the crystal planes"),
         with_uncertainty(back.spacing_pm, back.spacing_u_pm, "pm"),
         with_uncertainty(spacing.value, spacing.standard_uncertainty, "pm"),
         _difference(back.spacing_pm, back.spacing_u_pm, spacing)),
    ]  # fmt: skip
    off = 100.0 * (back.voltage_gain - 1.0)
    percent_off = with_uncertainty(abs(off), 100.0 * back.voltage_gain_u, "%").text
    side = "above" if off >= 0.0 else "below"
    return table(
        "backwards",
        "Implied and stated values",
        ("quantity", "implied by this run with h exact", "stated in the run sheet",
         "difference / u"),
        rows,
        numeric=(1, 2, 3),
        note=f"The implied gain puts the true voltage {percent_off} {side} the displayed one. In "
        "parentheses: for implied values the standard uncertainty from all other inputs. "
        "Difference: implied less stated, over its standard uncertainty.",
    )  # fmt: skip


def _difference(implied: float, implied_u: float, stated: Quantity) -> Cell:
    u = math.hypot(implied_u, stated.standard_uncertainty)
    return decimals((implied - stated.value) / u if u > 0.0 else math.nan, 1, signed=True)


def check_rows(d: Determination, *, brief: bool = False) -> Table:
    """Consistency checks, the failed ones first, each with figure, limit and meaning.

    A brief table gives the meaning of failed ones only.
    """
    state = {True: "passed", False: "failed", None: "not possible"}
    rows = [
        (words(check.name, check.measure), Cell(state[check.passed]), decimals(check.figure, 2),
         decimals(check.limit, 2),
         Cell("" if brief and check.passed else sentence(check.meaning)))
        for check in sorted(d.checks, key=lambda check: check.passed is not False)
    ]  # fmt: skip
    headings = ("check", "outcome", "figure", "limit", "meaning")
    told = any(row[-1].text for row in rows)
    shown = len(headings) if told else len(headings) - 1
    return table(
        "checks",
        "Figure, limit and meaning of each check" if told else "Figure and limit of each check",
        headings[:shown],
        [row[:shown] for row in rows],
        numeric=(2, 3),
        note="Small print: what the figure is; a limit holds for its magnitude. About 99 % of "
        "sound runs keep each of the limits that come from a normal or a chi-square distribution. "
        "For the routes, the difference is that of h from the linear route in units of its u, or "
        "that of u as a part of it.",
    )


def improvement_rows(d: Determination) -> Table | None:
    """What U would remain if an input were better known; None without such figures.

    The figures are of the linear route, and so is the U that they are compared with.
    """
    if not d.improvements:
        return None
    whole = d.budget.expanded_uncertainty
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
    route = "" if d.h.route == "linear" else " by the linear route"
    note = (
        f"U is {digits(whole, 2, 'J s').text} now{route}; with perfect counting statistics it "
        f"would stay at {digits(d.counting_floor_J_s, 2, 'J s').text}. The weights of the scans "
        "are worked out anew for every row."
    )
    if len(gains) > shown:
        # Rounded up: "less than 0.0 %" would say nothing.
        rest = math.ceil(1e3 * max(LEAST_GAIN / 2.0, *gains[shown:])) / 10.0
        note += (
            f" None of the other {len(gains) - shown} inputs would lower U by more than "
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
