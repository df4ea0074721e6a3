"""report.pdf: tagged, archivable, readable by a screen reader; set by Typst."""

from __future__ import annotations

import datetime
import json
from collections.abc import Iterator
from functools import lru_cache
from pathlib import Path
from typing import Any, Literal

import matplotlib
import typst
from matplotlib.ft2font import FT2Font

from hdetermine.errors import InputError
from hdetermine.files.sourcedate import source_date
from hdetermine.records.results import Determination
from hdetermine.report.document import Document, ScanPanel, report_document
from hdetermine.report.figure_svg import Picture
from hdetermine.report.table import Cell, Table
from hdetermine.report.templates import find_templates

TEMPLATE = "report.typ"
STANDARDS: list[Literal["ua-1", "a-2a"]] = ["ua-1", "a-2a"]
"""PDF/UA-1 (ISO 14289-1) and PDF/A-2a (ISO 19005-2); the compiler checks both."""

PAPERS = ("a4", "us-letter")
UNKNOWN = "\N{WHITE SQUARE}"


def render_pdf(
    d: Determination,
    *,
    paper: str = "a4",
    brief: bool = False,
    laboratory: str = "",
    templates: str | Path | None = None,
    document: Document | None = None,
) -> bytes:
    """Write the report as a PDF.

    Parameters
    ----------
    d : Determination
        What the analysis found.
    paper : {"a4", "us-letter"}
        Size of the sheet.
    brief : bool
        The one-page version.
    laboratory : str
        Name in place of the run sheet's.
    templates : path or None
        A folder with templates of the laboratory's own.
    document : Document or None
        The content, if it was put together before; `brief` and `laboratory` are then those of
        the document.

    Returns
    -------
    bytes
        A PDF that conforms to PDF/UA-1 and PDF/A-2a; the same bytes for the same
        determination. Its date is that of the run.

    Raises
    ------
    InputError
        If a template of the laboratory's own cannot be compiled.
    """
    if paper not in PAPERS:
        raise InputError(f'The paper "{paper}" is unknown; use one of {", ".join(PAPERS)}.')
    if document is None:
        document = report_document(d, brief=brief, laboratory=laboratory)
    found = find_templates(templates)
    wording = found.wording()
    content = {
        "paper": paper,
        "title": wording["title"] + (f": {document.title}" if document.title else ""),
        "date": run_date(document.date),
        "document": document_data(document),
        "wording": wording,
    }
    return compile_document(found.sources(), TEMPLATE, content)


def compile_document(sources: dict[str, bytes], template: str, content: dict[str, Any]) -> bytes:
    """Compile with our own fonts; ask for the machine's only where ours lack a character.

    Parameters
    ----------
    sources : dict of str to bytes
        Every template file by name.
    template : str
        The one to compile; it finds `content` in ``data.json``.
    content : dict
        Text, numbers, lists and dicts: data, never markup.

    Raises
    ------
    InputError
        If a template of the laboratory's own cannot be compiled.
    """
    strange = not _covers(_texts(content))
    attempts = ((content, False),) if not strange else (
        (content, True), (replaced(content), False))  # fmt: skip
    for number, (data, machine_fonts) in enumerate(attempts, start=1):
        # From memory: no folder for a killed process to leave behind.
        # (Any: the stub of typst does not list the mapping that its documentation describes.)
        files: Any = {**sources, "data.json": json.dumps(data, ensure_ascii=True).encode("ascii")}
        files["main.typ"] = files[template]
        try:
            pdf: bytes = typst.compile(
                files,
                format="pdf",
                pdf_standards=[*STANDARDS],
                # The compiler would take the clock. The run's own date goes before this one.
                timestamp=source_date() or 0,
                font_paths=[_font_folder()],
                ignore_system_fonts=not machine_fonts,
            )
            return pdf
        except typst.TypstError as error:
            if number < len(attempts):
                continue
            raise InputError(
                f"The template {template} cannot be set: {error.message}; mend it or take it away."
            ) from error
    raise AssertionError("one attempt always answers")


def run_date(text: str) -> tuple[int, int, int] | None:
    """Year, month and day of an ISO date at the start of a text; None without one."""
    try:
        date = datetime.date.fromisoformat(text[:10])
    except ValueError:
        return None
    return date.year, date.month, date.day


# --- data -------------------------------------------------------------------------------------


def document_data(document: Document) -> dict[str, Any]:
    """Return the content as lists, dicts and text, for JSON."""
    lead, figures = document.lead, document.figures
    return {
        "title": document.title,
        "laboratory": document.laboratory,
        "operator": document.operator,
        "date": document.date,
        "apparatus": document.apparatus,
        "simulated": document.simulated,
        "brief": document.brief,
        "lead": {name: getattr(lead, name) for name in type(lead).__slots__},
        "figures": {
            "relation": _picture(figures.relation),
            "budget": _picture(figures.budget),
            "routes": _picture(figures.routes),
            "lines": _picture(figures.lines),
            "posterior": [_picture(one) for one in figures.posterior],
        },
        "tables": {key: table_data(one) for key, one in document.tables.items()},
        "scans": [_scan(one) for one in document.scans],
        "posterior_state": document.posterior_state,
        "scale_remarks": document.scale_remarks,
        "run_remarks": document.run_remarks,
        "program": document.program,
    }


def _picture(picture: Picture | None) -> dict[str, str] | None:
    if picture is None:
        return None
    return {"svg": picture.svg, "alt": picture.alt, "caption": picture.caption}


def table_data(table: Table) -> dict[str, Any]:
    """Return a table as lists, dicts and text, for JSON."""
    return {
        "caption": table.caption,
        "columns": [
            {"heading": column.heading, "numeric": column.numeric} for column in table.columns
        ],
        "groups": [
            {
                "heading": group.heading,
                "rows": [[_cell(cell) for cell in row] for row in group.rows],
            }
            for group in table.groups
        ],
        "note": table.note,
    }


def _cell(cell: Cell) -> dict[str, str]:
    return {"text": cell.text, "detail": cell.detail, "subscript": cell.subscript}


def _scan(scan: ScanPanel) -> dict[str, Any]:
    return {
        "heading": scan.heading,
        "used": scan.used,
        "facts": [[label, cell.text] for label, cell in scan.facts],
        "remarks": scan.remarks,
        "pictures": [_picture(one) for one in scan.pictures],
    }


# --- characters that our fonts lack -----------------------------------------------------------


def _font_folder() -> str:
    return str(Path(matplotlib.get_data_path()) / "fonts" / "ttf")


@lru_cache(maxsize=1)
def _known() -> frozenset[int]:
    font = FT2Font(str(Path(_font_folder()) / "DejaVuSans.ttf"))
    return frozenset(font.get_charmap())


def _texts(content: object) -> Iterator[str]:
    if isinstance(content, str):
        yield content
    elif isinstance(content, dict):
        for value in content.values():
            yield from _texts(value)
    elif isinstance(content, (list, tuple)):
        for value in content:
            yield from _texts(value)


def _covers(texts: Iterator[str]) -> bool:
    seen: set[str] = set()
    for text in texts:
        seen.update(text)
    return all(ord(one) in _known() or one.isspace() for one in seen)


def replaced(content: Any) -> Any:
    """Return the content with a white square for every character that our fonts lack."""
    if isinstance(content, str):
        known = _known()
        return "".join(one if ord(one) in known or one.isspace() else UNKNOWN for one in content)
    if isinstance(content, dict):
        return {key: replaced(value) for key, value in content.items()}
    if isinstance(content, (list, tuple)):
        return [replaced(value) for value in content]
    return content
