"""The summary for the terminal: what a person wants to see at a glance."""

from __future__ import annotations

from hdetermine.budget.planck import limiting_sentence
from hdetermine.records.results import Determination
from hdetermine.report.plaintext import plain
from hdetermine.report.spoken import sources
from hdetermine.report.table import decimals, plus_minus, with_uncertainty

LARGEST = 3


def summary_lines(d: Determination) -> list[str]:
    """Lines of plain text: h, comparison, cutoffs, largest contributions, refusals.

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
        f"u = {100 * h.relative_standard_uncertainty:.2f} %; "
        f"{h.route.replace('_', ' ')} route",
        f"  deviation from the SI value {deviation}, E_n = {decimals(comparison.E_n, 2).text}: "
        f"{comparison.verdict}",
        "",
        "  scan              U / kV   angle / °   cutoff / pm",
    ]
    for cutoff in d.used:
        wavelength = with_uncertainty(cutoff.wavelength_pm, cutoff.standard_uncertainty_pm).text
        lines.append(
            f"  {_fitting(cutoff.scan)}  {cutoff.tube_voltage_kV:6.2f}   "
            f"{cutoff.glancing_angle_deg:9.3f}   {wavelength}"
        )
    lines += ["", f"  {limiting_sentence(d.budget)}"]
    lines += [
        f"    {100 * source.variance_share:5.1f} % of the variance: {source.words}"
        f" ({'common to all voltages' if source.common else 'independent'})"
        for source in sources(d.budget)[:LARGEST]
    ]
    failed = [check for check in d.checks if check.passed is False]
    if failed:
        lines += ["", "  Checks that failed:"]
        lines += [f"    {check.name}: {check.meaning}" for check in failed]
    if d.refused:
        lines += ["", "  Not used:"]
        lines += [f"    {_fitting(cutoff.scan)}  {cutoff.reason}" for cutoff in d.refused]
    remarks = [*d.run.remarks, *d.angle_scale.remarks]
    if remarks:
        lines += ["", "  Remarks:"]
        lines += [f"    {remark}" for remark in remarks]
    return [_plain_line(line) for line in lines]


def _fitting(name: str) -> str:
    text = plain(name)
    return f"{text[:15]}…" if len(text) > 16 else f"{text:16s}"


def _plain_line(line: str) -> str:
    """Clean a line and leave its indentation and columns alone."""
    body = line.lstrip(" ")
    indent = " " * (len(line) - len(body))
    return indent + "  ".join(plain(part, 500) for part in body.split("  "))
