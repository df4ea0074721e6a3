"""report.html: one file that asks nothing of any network."""

from __future__ import annotations

from pathlib import Path

from hdetermine.records.results import Determination
from hdetermine.report.document import Document, report_document
from hdetermine.report.page import render_page
from hdetermine.report.templates import find_templates

TEMPLATE = "report.html"


def render_html(
    d: Determination,
    *,
    brief: bool = False,
    laboratory: str = "",
    templates: str | Path | None = None,
    document: Document | None = None,
) -> bytes:
    """Write the report as a page.

    Parameters
    ----------
    d : Determination
        What the analysis found.
    brief : bool
        The one-page version.
    laboratory : str
        Name in place of the run sheet's.
    templates : path or None
        A folder with templates of the laboratory's own.
    document : Document or None
        The content, if it was put together before (the pictures take most of the time);
        `brief` and `laboratory` are then those of the document.

    Returns
    -------
    bytes
        The page, UTF-8; the same bytes for the same determination.
    """
    if document is None:
        document = report_document(d, brief=brief, laboratory=laboratory)
    return render_page(find_templates(templates), TEMPLATE, {"document": document})
