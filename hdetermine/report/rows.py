"""The rows of the result: one set for page, document and terminal, so that all agree."""

from __future__ import annotations

import math

import numpy as np

from hdetermine.physics.constants import ELEMENTARY_CHARGE_C, PLANCK_PER_SLOPE
from hdetermine.records.results import Cutoff, Determination
from hdetermine.report.rounding import two_digits
from hdetermine.report.spoken import ROUTE_WORDS, input_words, scan_of
from hdetermine.report.table import (
    NONE,
    Cell,
    Table,
    decimals,
    digits,
    plus_minus,
    table,
    with_uncertainty,
    words,
)


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
        (Cell("relative deviation"), _percent(d.comparison.relative_deviation),
         words("from the SI value, which is exact")),
        (Cell("Eₙ"), decimals(d.comparison.E_n, 2),
         Cell("deviation over U; agreement up to 1 in magnitude")),
        (Cell("h in electronvolt seconds"),
         with_uncertainty(h.value_J_s / ELEMENTARY_CHARGE_C,
                          h.standard_uncertainty_J_s / ELEMENTARY_CHARGE_C, "eV s"),
         Cell("the same value, divided by the elementary charge")),
        (Cell("route"), Cell(ROUTE_WORDS[h.route]), words(h.route_reason)),
    ]  # fmt: skip
    return table("result", "The result in figures", ("quantity", "value", "meaning"), rows)


def _freedom(number: float) -> Cell:
    if not math.isfinite(number) or number >= 1e4:
        return Cell("∞" if number > 0 else NONE, number)
    return Cell(f"{math.floor(number + 1e-9)}", number)


def _percent(share: float, places: int = 2) -> Cell:
    return Cell(decimals(100.0 * share, places, "%", signed=True).text, share)


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
    rows = []
    for cutoff in d.cutoffs:
        name, voltage = words(cutoff.scan), digits(cutoff.tube_voltage_kV, 4)
        if not cutoff.used:
            rows.append((name, voltage, *([Cell(NONE)] * 5), Cell(NONE), Cell("no: refused")))
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
                _in_units(value, value_u, -34),
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


def _in_units(value: float, uncertainty: float, exponent: int) -> Cell:
    if not (math.isfinite(value) and math.isfinite(uncertainty)):
        return Cell(NONE)
    parts = two_digits(value, uncertainty, exponent=exponent)
    return Cell(f"{parts.value}({parts.last_digits})", value)


def scan_facts(cutoff: Cutoff) -> tuple[tuple[str, Cell], ...]:
    """What there is to say about one scan's fit: label and text."""
    if not cutoff.used:
        return (("refused", words(cutoff.reason)),)
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
        (words(cutoff.scan), digits(cutoff.tube_voltage_kV, 4), words(cutoff.reason))
        for cutoff in d.refused
    ]
    return table("refused", "Scans without a cutoff", ("scan", "U / kV", "reason"), rows,
                 numeric=(1,))  # fmt: skip


def route_rows(d: Determination) -> Table:
    """The routes side by side."""
    rows = []
    for name, spoken in ROUTE_WORDS.items():
        route = d.routes.get(name)
        if route is None:
            rows.append((Cell(spoken), Cell(NONE), Cell(NONE), Cell(NONE), Cell("not taken")))
            continue
        low, high = route.interval_95_J_s
        state = "reported" if name == d.h.route else "confirms"
        rows.append(
            (
                Cell(spoken),
                _in_units(route.value_J_s, route.standard_uncertainty_J_s, -34),
                _in_interval(low, high, route.standard_uncertainty_J_s),
                _percent(route.value_J_s / d.comparison.reference_J_s - 1.0),
                words(state if route.usable else f"not usable: {route.reason}"),
            )
        )
    return table(
        "routes",
        "h by three routes",
        ("route", "h / 10⁻³⁴ J s", "95 % interval / 10⁻³⁴ J s", "deviation", "use"),
        rows,
        numeric=(1, 2, 3),
    )


def _in_interval(low: float, high: float, uncertainty: float) -> Cell:
    ends = [two_digits(end, uncertainty, exponent=-34).value for end in (low, high)]
    return Cell(f"{ends[0]} to {ends[1]}", low)


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
    return table("backwards", "The result read backwards",
                 ("quantity", "implied by this run with h exact", "stated in the run sheet"), rows,
                 numeric=(1, 2))  # fmt: skip


def check_rows(d: Determination) -> Table:
    """Consistency checks, each with figure, limit and meaning."""
    state = {True: "passed", False: "failed", None: "not possible"}
    rows = [
        (words(check.name), Cell(state[check.passed]), digits(check.figure, 3),
         digits(check.limit, 3), words(check.meaning, longest=500))
        for check in d.checks
    ]  # fmt: skip
    return table("checks", "Consistency checks", ("check", "outcome", "figure", "limit", "meaning"),
                 rows, numeric=(2, 3))  # fmt: skip


def improvement_rows(d: Determination) -> Table | None:
    """What U would remain if an input were better known; None without such figures."""
    if not d.improvements:
        return None
    rows = []
    for one in d.improvements:
        scan = scan_of(one.quantity)
        name = input_words(one.quantity) + (f", {scan}" if scan else "")
        rows.append(
            (
                words(name, one.quantity),
                digits(one.expanded_if_halved, 2, "J s"),
                _percent(one.expanded_if_halved / d.h.expanded_uncertainty_J_s - 1.0, 1),
                digits(one.expanded_if_zero, 2, "J s"),
                _percent(one.expanded_if_zero / d.h.expanded_uncertainty_J_s - 1.0, 1),
            )
        )
    floor = digits(d.counting_floor_J_s, 2, "J s").text
    return table(
        "improvements",
        "U(h) if one input were better known",
        ("input", "U with half its u", "change", "U with its u zero", "change"),
        rows,
        numeric=(1, 2, 3, 4),
        note=f"With perfect counting statistics U would stay at {floor}; it is "
        f"{digits(d.h.expanded_uncertainty_J_s, 2, 'J s').text} now.",
    )
