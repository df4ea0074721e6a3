"""The class in a few lines for the terminal."""

from __future__ import annotations

from hdetermine.classcheck.classwork import ClassFinding, GroupRow
from hdetermine.classcheck.columns import alarm_text, count_verdicts, fault_text, slip_text
from hdetermine.classcheck.finding import VERDICT_WORDS
from hdetermine.report.plaintext import plain

_LABEL_WIDTH = 22
_TEXT_WIDTH = 110


def summary_lines(finding: ClassFinding) -> list[str]:
    """Say in a few lines what was found, for a terminal; text is inert there."""
    number = len(finding.rows)
    lines = [f"  {finding.title}: {number} group{'' if number == 1 else 's'}"]
    lines += [f"  {count:4d}  {words}" for words, count in count_verdicts(finding).items()]
    lines.append("")
    for row in finding.rows:
        lines += _group_lines(row)
    lines += [f"  {plain(remark)}" for remark in finding.remarks]
    return lines


def _group_lines(row: GroupRow) -> list[str]:
    found = row.finding
    label = plain(row.label, _LABEL_WIDTH)
    parts = [VERDICT_WORDS[found.verdict]]
    for text in (slip_text(row), alarm_text(row), fault_text(row)):
        if text:
            parts.append(plain(text, _TEXT_WIDTH))
    first, *rest = parts
    indent = " " * (_LABEL_WIDTH + 4)
    return [f"  {label:{_LABEL_WIDTH}s}  {first}", *(f"{indent}{part}" for part in rest)]
