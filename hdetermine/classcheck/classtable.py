"""The class as files that other programs read: class.csv, class.xlsx, class.json."""

from __future__ import annotations

import datetime
import io
import json
import math
import re
import zipfile
from typing import Any

from hdetermine import __version__
from hdetermine.classcheck.classwork import ClassFinding, GroupRow
from hdetermine.classcheck.columns import FILE_COLUMNS, count_verdicts, feedback_name
from hdetermine.classcheck.comparison import CutoffLine
from hdetermine.classcheck.screens import Remark
from hdetermine.classcheck.slip import NamedSlip
from hdetermine.files.cells import Value, csv_bytes, inert_text
from hdetermine.files.sourcedate import source_date
from hdetermine.physics.reference import PLANCK_CONSTANT_J_S

SCHEMA = "hdetermine-class/1"
_EARLIEST = datetime.datetime(1980, 1, 1)
_WIDEST = 60


def class_csv(finding: ClassFinding) -> bytes:
    """Write the class table as CSV: a row a group, numbers in full, text inert."""
    rows = [[column.value(row) for column in FILE_COLUMNS] for row in finding.rows]
    return csv_bytes([column.header for column in FILE_COLUMNS], rows)


def class_xlsx(finding: ClassFinding) -> bytes:
    """Write the class table as a spreadsheet: text cells are text, never formulas."""
    from openpyxl import Workbook
    from openpyxl.styles import Font
    from openpyxl.utils import get_column_letter

    book = Workbook()
    sheet = book.active
    sheet.title = "class"
    for number, column in enumerate(FILE_COLUMNS, 1):
        cell = sheet.cell(row=1, column=number, value=column.header)
        cell.font = Font(bold=True)
        widest = len(column.header)
        for line, row in enumerate(finding.rows, 2):
            widest = max(widest, _write(sheet.cell(row=line, column=number), column.value(row)))
        sheet.column_dimensions[get_column_letter(number)].width = min(widest, _WIDEST) + 2
    sheet.freeze_panes = "B2"
    sheet.auto_filter.ref = sheet.dimensions
    stream = io.BytesIO()
    book.save(stream)
    return _without_clock(stream.getvalue())


def _write(cell: Any, value: Value) -> int:
    """Fill a cell; return the length of what stands in it."""
    if isinstance(value, str):
        cell.value = inert_text(value)
        # Whatever it begins with, it is text: openpyxl would take "=" for a formula.
        cell.data_type = "s"
        return len(value)
    cell.value = value
    if isinstance(value, float):
        cell.number_format = "0.0000E+00" if abs(value) < 1e-3 else "0.000"
        return 11
    return 0


def _without_clock(content: bytes) -> bytes:
    """Pack a spreadsheet again without the time of writing: same content, same bytes."""
    moment = datetime.datetime.fromtimestamp(source_date() or 0, tz=datetime.UTC)
    when = max(moment.replace(tzinfo=None), _EARLIEST)
    stamp = f"{when.isoformat()}Z".encode()
    packed = io.BytesIO()
    with (
        zipfile.ZipFile(io.BytesIO(content)) as source,
        zipfile.ZipFile(packed, "w", zipfile.ZIP_DEFLATED) as target,
    ):
        for name in source.namelist():
            part = source.read(name)
            if name == "docProps/core.xml":
                part = re.sub(
                    rb"(<dcterms:(?:created|modified)[^>]*>)[^<]*", rb"\g<1>" + stamp, part
                )
            info = zipfile.ZipInfo(name, when.timetuple()[:6])
            info.compress_type = zipfile.ZIP_DEFLATED
            info.external_attr = 0o644 << 16
            target.writestr(info, part)
    return packed.getvalue()


# --- JSON -------------------------------------------------------------------------------------


def class_json(finding: ClassFinding) -> bytes:
    """Write everything that was found, keys fixed, nan as null."""
    document = {
        "schema": SCHEMA,
        "title": finding.title,
        "anonymous": finding.anonymous,
        "reference_J_s": PLANCK_CONSTANT_J_S,
        "verdicts": count_verdicts(finding),
        "remarks": list(finding.remarks),
        "groups": [_group(row) for row in finding.rows],
        "provenance": {"package_version": __version__, "seed": finding.seed},
    }
    text = json.dumps(document, ensure_ascii=False, indent=1, allow_nan=False)
    return (text + "\n").encode("utf-8", errors="replace")


def _group(row: GroupRow) -> dict[str, Any]:
    found = row.finding
    return {
        "group": row.label,
        "verdict": found.verdict,
        "feedback": feedback_name(row),
        "data_fault": found.data_fault or None,
        "claim_fault": found.claim_fault or None,
        "reanalysis": _fields(found.reanalysis),
        "claim": _fields(found.planck),
        "planck_of_claimed_cutoffs_J_s": _finite(found.planck_of_cutoffs_J_s),
        "cutoffs": [_cutoff(line) for line in found.cutoffs],
        "slips": [_slip(slip) for slip in found.slips],
        "screening": [_remark(remark) for remark in found.remarks],
    }


def _fields(record: Any) -> dict[str, Any] | None:
    if record is None:
        return None
    return {name: _finite(getattr(record, name)) for name in record.__slots__}


def _finite(value: Any) -> Any:
    return None if isinstance(value, float) and not math.isfinite(value) else value


def _cutoff(line: CutoffLine) -> dict[str, Any]:
    return {**(_fields(line) or {}), "relative_difference": _finite(line.relative_difference)}


def _slip(slip: NamedSlip) -> dict[str, Any]:
    return {
        "codes": list(slip.codes),
        "title": slip.title,
        "sentence": slip.sentence,
        "note": slip.note or None,
        "predicted_J_s": _finite(slip.predicted_J_s),
        "fit_probability": _finite(slip.fit_probability),
        "odds": _finite(slip.odds),
    }


def _remark(remark: Remark) -> dict[str, Any]:
    return _fields(remark) or {}
