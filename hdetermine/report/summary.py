"""The summary for the terminal: what a person wants to see at a glance."""

from __future__ import annotations

import re

from hdetermine.budget.planck import limiting_sentence
from hdetermine.records.results import Determination
from hdetermine.report.plaintext import plain, remark
from hdetermine.report.spoken import ROUTE_WORDS, checks_in_words
from hdetermine.report.table import decimals, digits, plus_minus, with_uncertainty

INDENT = "    "
LONGEST_NAME = 32


def summary_lines(d: Determination) -> list[str]:
    """Lines of plain text: h, comparison, checks, what limits it, cutoffs, refusals.

    Parameters
    ----------
    d : Determination
        What was found.

    Returns
    -------
    list of str
        Without control characters whatever the run's names hold.
    """
    h, comparison = d.h, d.comparison
    deviation = decimals(100.0 * comparison.relative_deviation, 2, "%", signed=True).text
    lines = [
        plain(d.run.title) or "untitled run",
        "",
        f"  h = {plus_minus(h.value_J_s, h.expanded_uncertainty_J_s, 'J s').text}",
        f"      U with k = {h.coverage_factor:.2f}, p = {100 * h.coverage_probability:.0f} %; "
        f"u = {digits(100 * h.relative_standard_uncertainty, 2, '%').text}; "
        f"route: {ROUTE_WORDS[h.route]}",
        f"  deviation from the SI value {deviation}, E_n = {decimals(comparison.E_n, 2).text}: "
        f"{comparison.verdict}",
        "",
        f"  {limiting_sentence(d.budget)}",
    ]
    failed = [check for check in d.checks if check.passed is False]
    # The names of the failed ones follow, each with what it means.
    lines.append(f"  {checks_in_words(d.checks).partition(': ')[0]}{':' if failed else ''}")
    lines += [f"{INDENT}{check.name}: {check.meaning}" for check in failed]
    width = min(LONGEST_NAME, max(len(plain(cutoff.scan)) for cutoff in d.cutoffs))
    lines += ["", f"  {'scan':{width}s}  voltage / kV  angle / °  cutoff / pm"]
    for cutoff in d.used:
        wavelength = with_uncertainty(cutoff.wavelength_pm, cutoff.standard_uncertainty_pm).text
        lines.append(
            f"  {_fitting(cutoff.scan, width)}  {cutoff.tube_voltage_kV:12.2f}  "
            f"{cutoff.glancing_angle_deg:9.3f}  {wavelength:>11s}"
        )
    if d.refused:
        lines += ["", "  Without a cutoff:"]
        lines += [
            f"{INDENT}{_fitting(cutoff.scan, width)}  {cutoff.reason}" for cutoff in d.refused
        ]
    remarks = [*d.run.remarks, *d.angle_scale.remarks]
    if remarks:
        lines += ["", "  Remarks:"]
        lines += [f"{INDENT}{remark(one)}" for one in remarks]
    return [_plain_line(line) for line in lines]


def _fitting(name: str, width: int) -> str:
    text = plain(name)
    return f"{text[: width - 1]}…" if len(text) > width else f"{text:{width}s}"


def _plain_line(line: str) -> str:
    """Clean a line and leave its indentation and columns alone."""
    parts = re.split(r"( {2,})", line)
    return "".join(part if part.isspace() else plain(part, 500) for part in parts)
