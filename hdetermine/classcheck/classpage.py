"""class.html and the pages of feedback: self-contained, complete without any script."""

from __future__ import annotations

import math
from dataclasses import dataclass

from markupsafe import Markup

from hdetermine import __version__
from hdetermine.classcheck.classpicture import class_picture
from hdetermine.classcheck.classwork import ClassFinding, GroupRow
from hdetermine.classcheck.columns import alarm_text, count_verdicts, fault_text, feedback_name
from hdetermine.classcheck.feedback import feedback_of, kept_together
from hdetermine.classcheck.finding import VERDICT_WORDS, Verdict
from hdetermine.classcheck.screens import CLASS_CHANCE
from hdetermine.report.page import render_page
from hdetermine.report.plaintext import sentence
from hdetermine.report.table import Cell, decimals, digits, plus_minus, words
from hdetermine.report.templates import Templates

CLASS_TEMPLATE = "class.html"
FEEDBACK_TEMPLATE = "feedback.html"
SCRIPT = "class.js"

MARKS: dict[Verdict, str] = {
    "agrees": "✓", "scatter": "≈", "statement": "!", "slip": "!", "differs": "?",
    "no claim": "○", "unusable claim": "○", "consistent": "✓", "inconsistent": "?",
    "alone": "○", "nothing": "×",
}  # fmt: skip
"""One sign a verdict, beside its words: nothing is said by colour alone."""
GOOD: frozenset[Verdict] = frozenset(("agrees", "scatter", "consistent", "no claim"))


@dataclass(frozen=True, slots=True)
class ClassCell:
    """A cell of the class table: what is shown, and what it is sorted by."""

    cell: Cell
    key: str


@dataclass(frozen=True, slots=True)
class ClassLine:
    """A row of the class table."""

    label: str
    href: str
    mark: str
    good: bool
    verdict: str
    order: int
    fault: str
    data: ClassCell
    data_E_n: ClassCell
    claim: ClassCell
    claim_E_n: ClassCell
    uncertainty: str
    slips: tuple[str, ...]
    alarms: str


def class_page(finding: ClassFinding, templates: Templates) -> bytes:
    """Write the page of the class: picture, sortable table, and how to read it."""
    script = templates.find(SCRIPT).read_text(encoding="utf-8")
    content = {
        "title": finding.title,
        "lines": [_line(row) for row in finding.rows],
        "counts": count_verdicts(finding),
        "remarks": [sentence(remark) for remark in finding.remarks],
        "screened": sum(bool(row.finding.alarms) for row in finding.rows),
        "picture": class_picture(finding),
        "script": Markup(script),
        "class_chance": f"{CLASS_CHANCE:.0%}".replace("%", "\N{NARROW NO-BREAK SPACE}%"),
        "simulated": any(row.finding.simulated for row in finding.rows),
        "program": f"hdetermine {__version__}",
    }
    return render_page(templates, CLASS_TEMPLATE, content, [script])


def feedback_page(row: GroupRow, title: str, templates: Templates) -> bytes:
    """Write the page of feedback for one group."""
    content = {
        "feedback": feedback_of(row),
        "class_title": title,
        "mark": MARKS[row.finding.verdict],
        "good": row.finding.verdict in GOOD,
        "program": f"hdetermine {__version__}",
    }
    return render_page(templates, FEEDBACK_TEMPLATE, content)


def _line(row: GroupRow) -> ClassLine:
    found = row.finding
    reanalysis, planck = found.reanalysis, found.planck
    nothing = ClassCell(words(""), "")
    data = data_E_n = claim = claim_E_n = nothing
    uncertainty = ""
    if reanalysis is not None:
        shown = plus_minus(reanalysis.planck_J_s, reanalysis.expanded_uncertainty_J_s)
        data = ClassCell(shown, f"{reanalysis.planck_J_s:.6e}")
        data_E_n = ClassCell(decimals(reanalysis.E_n, 2), f"{abs(reanalysis.E_n):.6e}")
    if planck is not None:
        u = planck.claimed_u_J_s
        stated = math.isfinite(u) and u > 0.0
        shown = plus_minus(planck.claimed_J_s, u) if stated else digits(planck.claimed_J_s, 4)
        claim = ClassCell(shown, f"{planck.claimed_J_s:.6e}")
        claim_E_n = ClassCell(_short(planck.E_n), _key(abs(planck.E_n)))
        uncertainty = _uncertainty(planck.uncertainty_ratio, u)
    return ClassLine(
        label=row.label,
        href=feedback_name(row),
        mark=MARKS[found.verdict],
        good=found.verdict in GOOD,
        verdict=VERDICT_WORDS[found.verdict],
        order=list(VERDICT_WORDS).index(found.verdict),
        fault=sentence(fault_text(row)),
        data=data,
        data_E_n=data_E_n,
        claim=claim,
        claim_E_n=claim_E_n,
        uncertainty=uncertainty,
        slips=tuple(kept_together(slip.title) for slip in found.slips),
        alarms=alarm_text(row),
    )


def _short(value: float) -> Cell:
    """E_n of a claim: two places, or three digits where it is far out."""
    return decimals(value, 2) if abs(value) < 100.0 else digits(value, 3)


def _key(value: float) -> str:
    return f"{value:.6e}" if math.isfinite(value) else ""


def _uncertainty(ratio: float, u: float) -> str:
    if u == 0.0:
        return "u stated as zero"
    if not math.isfinite(ratio) or 1.0 / 3.0 <= ratio <= 5.0:
        return ""
    if ratio < 1.0:
        return f"u {digits(1.0 / ratio, 2).text} times too small"
    return f"u {digits(ratio, 2).text} times as large as needed"
