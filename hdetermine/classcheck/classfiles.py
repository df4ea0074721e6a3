"""Every file of a class check, by name."""

from __future__ import annotations

import json
from pathlib import Path

from hdetermine.classcheck.classpage import class_page, feedback_page
from hdetermine.classcheck.classtable import SCHEMA, class_csv, class_json, class_xlsx
from hdetermine.classcheck.classwork import ClassFinding
from hdetermine.classcheck.columns import feedback_name
from hdetermine.classcheck.groups import RESULT_NAME
from hdetermine.classcheck.workers import Progress
from hdetermine.report.templates import Templates

LARGEST_RESULT_BYTES = 100_000_000


def class_outputs(
    finding: ClassFinding, templates: Templates, *, pdf: bool, progress: Progress
) -> dict[str, bytes]:
    """Make every output of a class check.

    Parameters
    ----------
    finding : ClassFinding
        What was found.
    templates : Templates
        Where the pages' templates are.
    pdf : bool
        Whether each page of feedback is also made as a PDF.
    progress : callable
        Called as ``progress("pages", done, total)``.

    Returns
    -------
    dict of str to bytes
        Contents by name; the same bytes for the same finding.
    """
    outputs = {
        RESULT_NAME: class_json(finding),
        "class.csv": class_csv(finding),
        "class.xlsx": class_xlsx(finding),
        "class.html": class_page(finding, templates),
    }
    for number, row in enumerate(finding.rows):
        progress("pages", number, len(finding.rows))
        outputs[feedback_name(row)] = feedback_page(row, finding.title, templates)
        if pdf:
            from hdetermine.classcheck.feedbackpdf import feedback_pdf

            outputs[feedback_name(row, "pdf")] = feedback_pdf(row, finding.title, templates)
    return outputs


def earlier_feedback(out: Path) -> list[str]:
    """Pages of an earlier check in the output folder: those of groups that are gone must go.

    Only names that the earlier result itself lists, and that have the form of its own names.
    """
    path = out / RESULT_NAME
    try:
        if path.is_symlink() or path.stat().st_size > LARGEST_RESULT_BYTES:
            return []
        content = json.loads(path.read_bytes())
        if content["schema"] != SCHEMA:
            return []
        names = [group["feedback"] for group in content["groups"]]
    except (OSError, ValueError, KeyError, TypeError, RecursionError):
        return []  # not of our making: nothing of it is touched
    found = []
    for name in names:
        if not isinstance(name, str) or not name.startswith("feedback/"):
            continue
        stem = name.removeprefix("feedback/").removesuffix(".html")
        if stem and all(one in "abcdefghijklmnopqrstuvwxyz0123456789_-" for one in stem):
            found += [f"feedback/{stem}.html", f"feedback/{stem}.pdf"]
    return found
