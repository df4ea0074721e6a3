"""Scan tables, text or spreadsheet, as columns with their headers."""

from __future__ import annotations

import datetime
from collections.abc import Sequence
from dataclasses import dataclass, field

from hdetermine.errors import InputError
from hdetermine.files.headers import meaning_of
from hdetermine.files.limits import MAX_CELLS, check_limit
from hdetermine.files.numerals import looks_numeric, tidy
from hdetermine.files.plaintext import plain_text, quoted
from hdetermine.files.texttable import (
    TextLines,
    comment_cells,
    decode,
    is_comment,
    split_lines,
)

Cell = str | float | bool | datetime.date | datetime.time | datetime.timedelta | None
_Row = tuple[int, list[Cell]]

_NO_NUMBERS = "there are no rows of numbers below its header; put the counts into it."


@dataclass(frozen=True, slots=True)
class Column:
    """One column of a table.

    Attributes
    ----------
    number : int
        Counted from 1.
    parts : tuple of str
        Its header lines, top to bottom, without empty ones.
    cells : tuple
        Its cells below the header; None where blank.
    """

    number: int
    parts: tuple[str, ...]
    cells: tuple[Cell, ...]

    @property
    def header(self) -> str:
        """Header lines, joined."""
        return " ".join(self.parts)


@dataclass(frozen=True, slots=True)
class Table:
    """A scan table.

    Attributes
    ----------
    where : str
        File (and sheet), for messages.
    columns : tuple of Column
        Those that hold anything.
    lines : tuple of int
        Line or row number of each row.
    spreadsheet : bool
        True if cells have addresses such as B7.
    titles : tuple of str
        Lines that are neither header nor data, in order.
    """

    where: str
    columns: tuple[Column, ...]
    lines: tuple[int, ...]
    spreadsheet: bool = False
    titles: tuple[str, ...] = field(default=())

    def place(self, row: int, column: Column) -> str:
        """Name a cell for a message."""
        return _place(self.where, self.lines[row], column.number, self.spreadsheet)

    def listing(self) -> str:
        """Name the columns for a message."""
        shown = [quoted(c.header or f"column {c.number}", 30) for c in self.columns[:12]]
        return ", ".join(shown) + (", …" if len(self.columns) > 12 else "")


class TableFile:
    """A file with one scan table, or a spreadsheet with several; read once.

    Parameters
    ----------
    data : bytes
        Content of the file.
    where : str
        Its name, for messages.

    Raises
    ------
    InputError
        In one sentence that names the file, the place and the remedy; so do the methods.
    """

    def __init__(self, data: bytes, where: str) -> None:
        self.where = where
        self._tables: dict[str, Table] = {}
        self._sheets: dict[str, list[list[Cell]]] | None = None
        if _is_archive(data):
            from hdetermine.files.spreadsheet import read_sheets

            self._sheets = read_sheets(data, where)
        else:
            self._tables[""] = _from_text(split_lines(decode(data, where), where), where)

    def table(self, sheet: str | None = None) -> Table:
        """Return the table of a sheet; without a name, the only one that holds numbers."""
        if self._sheets is None:
            if sheet is not None:
                raise InputError(
                    f"{self.where}: sheet {quoted(sheet)} is asked for, but this is a text file; "
                    "leave sheet out of the run sheet."
                )
            return self._tables[""]
        from hdetermine.files.spreadsheet import choose_sheet

        name = choose_sheet(self._sheets, self._with_data(), sheet, self.where)
        if name not in self._tables:
            place = f"{self.where}, sheet {quoted(name)}"
            self._tables[name] = _from_grid(self._sheets[name], place)
        return self._tables[name]

    def tables(self) -> dict[str, Table]:
        """Every table by the name of its sheet (empty for a text file)."""
        if self._sheets is None:
            return self._tables
        return {name: self.table(name) for name in self._with_data()}

    def _with_data(self) -> list[str]:
        """Names of the sheets that have rows of numbers."""
        sheets = self._sheets or {}
        return [name for name, rows in sheets.items() if _first_data_row(rows) is not None]


def _is_archive(data: bytes) -> bool:
    return data.startswith(b"PK\x03\x04")


def _from_text(lines: TextLines, where: str) -> Table:
    rows: list[_Row] = [(number, [cell or None for cell in cells]) for number, cells in lines.rows]
    start = _first_data_row([cells for _, cells in rows])
    if start is None:
        raise InputError(f"{where}: {_NO_NUMBERS}")
    first_line = rows[start][0]
    titles = [line for number, line in lines.other if number < first_line]
    for number, line in lines.other:
        if number > first_line and not is_comment(line):
            raise InputError(
                f"{where}, line {number}: {quoted(line, 40)} is not a row like the others; correct "
                "it, or start it with # to make it a comment."
            )
    header = rows[:start]
    if not header:
        for number, line in reversed(lines.other):
            cells = comment_cells(line, lines.width) if number < first_line else None
            if cells and not all(looks_numeric(cell) for cell in cells if cell):
                header = [(number, [cell or None for cell in cells])]
                break
    return _assemble(header, rows[start:], where, False, titles)


def _from_grid(rows: Sequence[Sequence[Cell]], where: str) -> Table:
    filled: list[_Row] = []
    for number, row in enumerate(rows, start=1):
        cells = [(cell.strip() or None) if isinstance(cell, str) else cell for cell in row]
        if any(cell is not None for cell in cells):
            filled.append((number, cells))
    start = _first_data_row([cells for _, cells in filled])
    if start is None:
        raise InputError(f"{where}: {_NO_NUMBERS}")
    return _assemble(filled[:start], filled[start:], where, True, [])


def _assemble(
    header: list[_Row], rows: list[_Row], where: str, spreadsheet: bool, titles: list[str]
) -> Table:
    """Turn rows into columns; `titles` are lines above that do not belong to any column."""
    width = len(rows[0][1])
    for number, cells in rows:
        if len(cells) != width:
            raise InputError(
                f"{where}, line {number}: it has {len(cells)} columns where the first row of "
                f"numbers has {width}; make the rows equally long."
            )
    check_limit(width * len(rows), MAX_CELLS, where, "cells")
    heads: list[list[Cell]] = []
    for number, cells in header:
        filled = [cell for cell in cells if cell is not None]
        if len(filled) == 1 and cells[0] is not None and width > 1:
            titles = [*titles, _as_text(filled[0])]
        elif len(cells) == width:
            _check_header(cells, number, where, spreadsheet)
            heads.append(cells)
    columns = []
    for index in range(width):
        column = tuple(cells[index] for _, cells in rows)
        parts = tuple(
            plain_text(_as_text(head[index])) for head in heads if head[index] is not None
        )
        if any(cell is not None for cell in column):
            columns.append(Column(index + 1, parts, column))
    return Table(
        where,
        tuple(columns),
        tuple(number for number, _ in rows),
        spreadsheet,
        tuple(plain_text(title) for title in titles),
    )


def _check_header(row: list[Cell], number: int, where: str, spreadsheet: bool) -> None:
    """Refuse a broken row of numbers that would pass for a header."""
    first = next(cell for cell in row if cell is not None)
    others = [i for i, cell in enumerate(row) if cell is not None and not _is_number(cell)]
    starts_as_number = (
        isinstance(first, str)
        and tidy(first)[:1] in "0123456789.,+-"
        and meaning_of(first).role == "other"
    )
    has_number = any(_is_number(cell) for cell in row)
    if not others:
        place = _place(where, number, 1 + row.index(None), spreadsheet)
        raise InputError(f"{place}: there is no number; fill it in or remove the row.")
    if has_number and (_is_number(first) or starts_as_number):
        place = _place(where, number, others[0] + 1, spreadsheet)
        raise InputError(f"{place}: {quoted(row[others[0]], 40)} is not a number; correct it.")


def _as_text(cell: Cell) -> str:
    if isinstance(cell, float) and cell.is_integer():
        return f"{cell:.0f}"
    return str(cell)


def _is_number(cell: Cell) -> bool:
    if isinstance(cell, str):
        return looks_numeric(cell)
    return isinstance(cell, float | int) and not isinstance(cell, bool)


def _first_data_row(rows: Sequence[Sequence[Cell]]) -> int | None:
    """Index of the first row with two numbers or more and nothing else."""
    for index, row in enumerate(rows):
        filled = [cell for cell in row if cell is not None]
        if len(filled) > 1 and all(_is_number(cell) for cell in filled):
            return index
    return None


def _place(where: str, line: int, column: int, spreadsheet: bool) -> str:
    if not spreadsheet:
        return f"{where}, line {line}, column {column}"
    letters = ""
    while column:
        column, rest = divmod(column - 1, 26)
        letters = chr(ord("A") + rest) + letters
    return f"{where}, cell {letters}{line}"
