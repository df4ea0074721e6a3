"""Spreadsheets (xlsx and ods): the sheet that holds a scan, as rows of cells."""

from __future__ import annotations

import datetime
import difflib
import io
from collections.abc import Sequence

from python_calamine import CalamineError, CalamineWorkbook, SheetTypeEnum

from hdetermine.errors import InputError
from hdetermine.files.archive import measured_archive
from hdetermine.files.limits import MAX_COLUMNS, MAX_ROWS, MAX_SHEETS, check_limit
from hdetermine.files.plaintext import quoted

Cell = str | float | bool | datetime.date | datetime.time | datetime.timedelta | None


def read_sheets(data: bytes, where: str) -> dict[str, list[list[Cell]]]:
    """Read every sheet of a spreadsheet.

    Parameters
    ----------
    data : bytes
        The file.
    where : str
        Its name, for messages.

    Returns
    -------
    dict of str to list of list
        Rows from the first row and column of the sheet on; None in blank cells. Sheets without
        any cell are left out.

    Raises
    ------
    InputError
        If the file is damaged or beyond the limits.
    """
    sheets: dict[str, list[list[Cell]]] = {}
    try:
        book = CalamineWorkbook.from_filelike(io.BytesIO(measured_archive(data, where)))
        names = [
            sheet.name for sheet in book.sheets_metadata if sheet.typ == SheetTypeEnum.WorkSheet
        ]
        check_limit(len(names), MAX_SHEETS, where, "sheets")
        for name in names:
            rows = book.get_sheet_by_name(name).to_python(skip_empty_area=False)
            check_limit(len(rows), MAX_ROWS, where, "rows")
            check_limit(max(map(len, rows), default=0), MAX_COLUMNS, where, "columns")
            if rows:
                sheets[name] = [[None if cell == "" else cell for cell in row] for row in rows]
    except (CalamineError, ValueError, OverflowError):
        raise InputError(
            f"{where}: this spreadsheet cannot be read; open it, save it again as xlsx or ods "
            "without a password, or export CSV."
        ) from None
    return sheets


def choose_sheet(
    sheets: dict[str, list[list[Cell]]], with_data: Sequence[str], wanted: str | None, where: str
) -> str:
    """Choose the sheet that is meant.

    Parameters
    ----------
    sheets : dict
        All sheets.
    with_data : sequence of str
        Names of those with rows of numbers.
    wanted : str or None
        What the run sheet says.
    where : str
        Name of the file, for messages.

    Returns
    -------
    str

    Raises
    ------
    InputError
        If it is not among them, or several could be meant.
    """
    listing = ", ".join(quoted(name, 31) for name in list(sheets)[:12])
    if wanted is not None:
        if wanted in sheets:
            return wanted
        close = difflib.get_close_matches(wanted[:80], [n[:80] for n in sheets], n=1, cutoff=0.6)
        hint = f" (did you mean {quoted(close[0])}?)" if close else ""
        raise InputError(
            f"{where}: it has no sheet {quoted(wanted)}{hint}; its sheets with content are "
            f"{listing or 'none'}."
        )
    if len(with_data) == 1:
        return with_data[0]
    if not with_data:
        raise InputError(f"{where}: no sheet has rows of numbers; put the counts into one.")
    listing = ", ".join(quoted(name, 31) for name in with_data[:12])
    raise InputError(
        f"{where}: {len(with_data)} of its sheets have numbers ({listing}); state sheet for this "
        "scan in the run sheet."
    )
