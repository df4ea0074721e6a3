"""A group's page of feedback as a PDF, set by the same means as the report."""

from __future__ import annotations

from dataclasses import asdict

from hdetermine import __version__
from hdetermine.classcheck.classwork import GroupRow
from hdetermine.classcheck.feedback import feedback_of
from hdetermine.report.pdf import compile_document, table_data
from hdetermine.report.templates import Templates

TEMPLATE = "feedback.typ"
SLIPS_HEADING = "What would produce these numbers"


def feedback_pdf(row: GroupRow, title: str, templates: Templates) -> bytes:
    """Set the page of one group.

    Returns
    -------
    bytes
        A tagged PDF; the same bytes for the same finding.
    """
    feedback = feedback_of(row)
    content = {
        "title": f"Feedback: {row.label}",
        "class_title": title,
        "program": f"hdetermine {__version__}",
        "slips_heading": SLIPS_HEADING,
        "wording": templates.wording(),
        "feedback": {**asdict(feedback), "tables": [table_data(one) for one in feedback.tables]},
    }
    return compile_document(templates.sources(), TEMPLATE, content)
