"""What is inside a spreadsheet file, unpacked within limits before a reader sees it.

A spreadsheet is a zip archive of XML. A few kilobytes can claim gigabytes: by compression, by
one cell in the last corner of the sheet, or by a repeat count. The parts are unpacked here within
limits, walked through once by a streaming parser that only measures, and packed again plainly, so
that the reader behind it sees nothing that was not measured.
"""

from __future__ import annotations

import io
import re
import zipfile
import zlib
from collections.abc import Callable
from typing import ClassVar
from xml.parsers import expat

from hdetermine.errors import InputError
from hdetermine.files.limits import (
    MAX_ARCHIVE_ENTRIES,
    MAX_CELLS,
    MAX_EXPANDED_BYTES,
    MAX_NESTING,
    check_limit,
)

_PARTS = (".xml", ".rels")
_ADDRESS = re.compile(r"([A-Za-z]{1,3})([0-9]{1,7})")
_SHEET_ROWS = 1_048_576
_SHEET_COLUMNS = 16_384
_DEPTH = 4 * MAX_NESTING


def measured_archive(data: bytes, where: str) -> bytes:
    """Unpack, measure and repack a spreadsheet.

    Parameters
    ----------
    data : bytes
        The file.
    where : str
        Its name, for messages.

    Returns
    -------
    bytes
        An uncompressed archive of the measured parts.

    Raises
    ------
    InputError
        If it is damaged, no spreadsheet, or larger inside than the limits allow.
    """
    parts = _unpacked(data, where)
    packed = io.BytesIO()
    cells = 0
    with zipfile.ZipFile(packed, "w", zipfile.ZIP_STORED) as archive:
        for name, content in parts.items():
            if name.endswith(_PARTS):
                cells = _measure(content, where, cells)
            elif name != "mimetype":
                continue
            archive.writestr(zipfile.ZipInfo(name), content)
    return packed.getvalue()


def _unpacked(data: bytes, where: str) -> dict[str, bytes]:
    damaged = InputError(f"{where}: this spreadsheet is damaged; open it and save it again.")
    parts: dict[str, bytes] = {}
    try:
        with zipfile.ZipFile(io.BytesIO(data)) as archive:
            entries = archive.infolist()
            check_limit(len(entries), MAX_ARCHIVE_ENTRIES, where, "parts of a spreadsheet")
            size = sum(entry.file_size for entry in entries)
            check_limit(size, MAX_EXPANDED_BYTES, where, "bytes when unpacked")
            for entry in entries:
                parts[entry.filename] = archive.read(entry)
    except (zipfile.BadZipFile, zlib.error, EOFError, OSError, ValueError):
        raise damaged from None
    except (NotImplementedError, RuntimeError):
        raise InputError(
            f"{where}: this file is encrypted or packed in an unusual way; save it again as xlsx "
            "or ods without a password."
        ) from None
    if "xl/workbook.xml" not in parts and "content.xml" not in parts:
        raise InputError(
            f"{where}: this archive is no spreadsheet; save the table as xlsx, ods or CSV."
        )
    return parts


class _Extent:
    """How far the cells of the sheets reach, whichever of the two formats they are in.

    `before` counts the cells of the rectangles of all sheets that are done with; `area` adds the
    one at hand.
    """

    def __init__(self, where: str, before: int) -> None:
        self.where = where
        self.before = before
        self.depth = 0
        self.cells = 0
        self.rows = self.columns = 0
        self.row = self.column = 0
        self.repeat_row = self.repeat_column = 1
        self.row_width = 0
        self.filled = False

    @property
    def area(self) -> int:
        return self.before + self.rows * self.columns

    def start(self, tag: str, attributes: dict[str, str]) -> None:
        self.depth += 1
        check_limit(self.depth, _DEPTH, self.where, "levels of XML")
        name = tag.rpartition(":")[2]
        handler = self._starts.get(name)
        if handler is not None:
            handler(self, {key.rpartition(":")[2]: value for key, value in attributes.items()})

    def end(self, tag: str) -> None:
        self.depth -= 1
        name = tag.rpartition(":")[2]
        handler = self._ends.get(name)
        if handler is not None:
            handler(self)

    # xlsx: <row r="7"><c r="B7">…; without addresses they count on
    def _xlsx_row(self, attributes: dict[str, str]) -> None:
        self.row = self._number(attributes.get("r"), self.row + 1, _SHEET_ROWS)
        self.column = 0

    def _xlsx_cell(self, attributes: dict[str, str]) -> None:
        match = _ADDRESS.fullmatch(attributes.get("r", ""))
        if match:
            self.column = 0
            for letter in match[1].upper():
                self.column = 26 * self.column + ord(letter) - 64
            self.row = int(match[2])
        elif "r" in attributes:
            self._damaged()
        else:
            self.column += 1
        self.cells += 1
        check_limit(self.cells, MAX_CELLS, self.where, "cells")
        self.filled = False

    def _xlsx_cell_end(self) -> None:
        if self.filled:
            self._reach(self.row, self.column)

    # ods: rows and cells with repeat counts
    def _ods_table(self, _attributes: dict[str, str]) -> None:
        self.before = self.area
        self.row = self.rows = self.columns = 0

    def _ods_row(self, attributes: dict[str, str]) -> None:
        repeat = attributes.get("number-rows-repeated")
        self.repeat_row = self._number(repeat, 1, _SHEET_ROWS)
        self.column = self.row_width = 0

    def _ods_cell(self, attributes: dict[str, str]) -> None:
        repeat = attributes.get("number-columns-repeated")
        self.repeat_column = self._number(repeat, 1, _SHEET_COLUMNS)
        self.filled = any("value" in key or key == "formula" for key in attributes)
        self.cells += 1
        check_limit(self.cells, MAX_CELLS, self.where, "cells")

    def _ods_cell_end(self) -> None:
        self.column += self.repeat_column
        if self.filled:
            self.row_width = self.column
        self.filled = False

    def _ods_row_end(self) -> None:
        self.row += self.repeat_row
        check_limit(self.row, 2 * _SHEET_ROWS, self.where, "rows")
        if self.row_width:
            self._reach(self.row, self.row_width)

    def _content(self, _attributes: dict[str, str]) -> None:
        self.filled = True

    def _reach(self, row: int, column: int) -> None:
        self.rows, self.columns = max(self.rows, row), max(self.columns, column)
        check_limit(self.area, MAX_CELLS, self.where, "cells in all its sheets")

    def _number(self, text: str | None, default: int, largest: int) -> int:
        if text is None:
            return default
        if not re.fullmatch(r"[0-9]{1,7}", text) or int(text) > largest:
            self._damaged()
        return int(text)

    def _damaged(self) -> None:
        raise InputError(
            f"{self.where}: this spreadsheet has cells at addresses that cannot be; open it and "
            "save it again."
        )

    _starts: ClassVar[dict[str, Callable[[_Extent, dict[str, str]], None]]] = {
        "row": _xlsx_row,
        "c": _xlsx_cell,
        "v": _content,
        "is": _content,
        "f": _content,
        "table": _ods_table,
        "table-row": _ods_row,
        "table-cell": _ods_cell,
        "covered-table-cell": _ods_cell,
        "p": _content,
    }
    _ends: ClassVar[dict[str, Callable[[_Extent], None]]] = {
        "c": _xlsx_cell_end,
        "table-cell": _ods_cell_end,
        "covered-table-cell": _ods_cell_end,
        "table-row": _ods_row_end,
    }


def _measure(content: bytes, where: str, before: int) -> int:
    """Walk through one part; returns the cells of it and of those before it."""
    extent = _Extent(where, before)

    def refuse(*_declaration: object) -> None:
        raise InputError(
            f"{where}: this spreadsheet defines XML entities of its own, which is not read; save "
            "it again from a spreadsheet program."
        )

    parser = expat.ParserCreate()
    parser.StartElementHandler = extent.start
    parser.EndElementHandler = extent.end
    parser.StartDoctypeDeclHandler = refuse
    parser.EntityDeclHandler = refuse
    try:
        parser.Parse(content, True)
    except (expat.ExpatError, ValueError, LookupError):
        raise InputError(
            f"{where}: this spreadsheet is damaged inside; open it and save it again."
        ) from None
    return extent.area
