"""Reading the claims of a whole class, ``claims.csv`` or ``claims.xlsx``: a row a group."""

from __future__ import annotations

import csv
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from hdetermine.classcheck.claim import Claim, ClaimedCutoff
from hdetermine.classcheck.claimheaders import ClaimColumn, Role, understand_header
from hdetermine.classcheck.claims import build_claim, claimed_cutoff, with_cutoffs
from hdetermine.classcheck.numeral import Numeral, plain_numeral, read_numeral
from hdetermine.errors import InputError
from hdetermine.files.limits import (
    MAX_COLUMNS,
    MAX_GROUPS,
    MAX_LINE_CHARACTERS,
    MAX_TABLE_BYTES,
    MAX_TEXT_CHARACTERS,
    check_limit,
)
from hdetermine.files.plaintext import quoted
from hdetermine.files.runfolder import read_bytes
from hdetermine.files.texttable import decode, is_comment

_SEPARATORS = (";", "\t", ",", "|")
_SHOWN: dict[Role, str] = {"value": "h", "expanded": "U"}
"""What a message calls a column, where that is not its role."""


@dataclass(frozen=True, slots=True)
class ClaimEntry:
    """One row of a claim table: the claim, or why there is none.

    Attributes
    ----------
    group : str
        As written in the row.
    claim : Claim or None
        None if the row cannot be used.
    fault : str
        Then the reason, one sentence.
    """

    group: str
    claim: Claim | None
    fault: str = ""


def read_claim_table(path: Path) -> tuple[list[ClaimEntry], tuple[str, ...]]:
    """Read a claim table.

    Parameters
    ----------
    path : Path
        CSV (comma, semicolon, tab; decimal point or comma) or spreadsheet.

    Returns
    -------
    entries : list of ClaimEntry
        One a row, in order. A row that cannot be used does not stop the others.
    remarks : tuple of str
        Columns that were not understood.

    Raises
    ------
    InputError
        If the table as a whole cannot be read.
    """
    where = path.name
    data = read_bytes(path, where, MAX_TABLE_BYTES)
    grid = _spreadsheet(data, where) if data.startswith(b"PK\x03\x04") else _text(data, where)
    if not grid:
        raise InputError(f"{where}: there is no header line; its first row names the columns.")
    line, header = grid[0]
    columns = _columns([str(cell or "") for cell in header], f"{where}, line {line}")
    check_limit(len(grid) - 1, MAX_GROUPS, where, "groups")
    entries = [_entry(columns, cells, f"{where}, line {number}") for number, cells in grid[1:]]
    unknown = [
        quoted(cell)
        for cell, column in zip(header, columns, strict=True)
        if column.role == "other" and cell
    ]
    remark = f"{where}: not used, because not understood: column {', '.join(unknown)}."
    return entries, (remark,) if unknown else ()


def _text(data: bytes, where: str) -> list[tuple[int, list[object]]]:
    lines = [
        (number, line)
        for number, line in enumerate(decode(data, where).splitlines(), 1)
        if line.strip() and not is_comment(line)
    ]
    for number, line in lines:
        check_limit(len(line), MAX_LINE_CHARACTERS, f"{where}, line {number}", "characters")
    if not lines:
        return []
    head = lines[0][1]
    separator = max(_SEPARATORS, key=lambda mark: (head.count(mark), mark == ";"))
    rows: list[tuple[int, list[object]]] = []
    for number, line in lines:
        try:
            cells = next(csv.reader([line], delimiter=separator, strict=True))
        except (csv.Error, StopIteration) as error:
            raise InputError(
                f"{where}, line {number}: the quotation marks do not close; correct the line."
            ) from error
        rows.append((number, [cell.strip() or None for cell in cells]))
    check_limit(max(len(cells) for _, cells in rows), MAX_COLUMNS, where, "columns")
    return _rectangular(rows, where)


def _spreadsheet(data: bytes, where: str) -> list[tuple[int, list[object]]]:
    from hdetermine.files.spreadsheet import read_sheets

    sheets = read_sheets(data, where)
    if len(sheets) != 1:
        raise InputError(
            f"{where}: {len(sheets)} sheets hold something; leave one, with a row a group."
        )
    (grid,) = sheets.values()
    rows: list[tuple[int, list[object]]] = []
    for number, row in enumerate(grid, 1):
        cells = [(cell.strip() or None) if isinstance(cell, str) else cell for cell in row]
        if any(cell is not None for cell in cells):
            rows.append((number, list(cells)))
    return _rectangular(rows, where)


def _rectangular(
    rows: list[tuple[int, list[object]]], where: str
) -> list[tuple[int, list[object]]]:
    if not rows:
        return []
    width = len(rows[0][1])
    filled = []
    for number, cells in rows:
        if any(cell is not None for cell in cells[width:]):
            raise InputError(
                f"{where}, line {number}: it has more cells than the header has columns; with "
                "decimal commas, separate the columns by semicolons."
            )
        filled.append((number, (cells + [None] * width)[:width]))
    return filled


def _columns(header: Sequence[str], where: str) -> list[ClaimColumn]:
    columns = [understand_header(cell, where) for cell in header]
    seen: set[tuple[str, float, str]] = set()
    for column, cell in zip(columns, header, strict=True):
        key = (column.role, column.voltage_kV, column.key)
        if column.role != "other" and key in seen:
            raise InputError(f"{where}: column {quoted(cell)} is there twice; leave one.")
        seen.add(key)
    roles = [column.role for column in columns]
    if "group" not in roles:
        raise InputError(f'{where}: no column is called "group"; name the column of the groups so.')
    if "value" not in roles and "cutoff" not in roles:
        raise InputError(
            f'{where}: no column holds a claim; name one "h [J s]", "h [eV s]" or '
            '"wavelength 20 kV [pm]".'
        )
    return columns


def _entry(columns: Sequence[ClaimColumn], cells: Sequence[object], where: str) -> ClaimEntry:
    by_role = {
        column.role: (column, cell)
        for column, cell in zip(columns, cells, strict=True)
        if column.role not in ("cutoff", "other")
    }
    group = _group_name(by_role["group"][1])
    try:
        if not group:
            raise InputError(f"{where}: the group has no name; fill the cell.")
        if len(group) > MAX_TEXT_CHARACTERS:
            raise InputError(
                f"{where}: the group's name has {len(group)} characters, more than the "
                f"{MAX_TEXT_CHARACTERS} that are read."
            )
        return ClaimEntry(group, _claim(group, columns, by_role, cells, where))
    except InputError as error:
        return ClaimEntry(group[:MAX_TEXT_CHARACTERS], None, str(error))


def _group_name(cell: object) -> str:
    if isinstance(cell, float) and cell.is_integer():
        return f"{cell:.0f}"  # a spreadsheet turns a group called 7 into 7.0
    return "" if cell is None else str(cell)


def _claim(
    group: str,
    columns: Sequence[ClaimColumn],
    by_role: Mapping[Role, tuple[ClaimColumn, object]],
    cells: Sequence[object],
    where: str,
) -> Claim:
    units = {column.unit for column, _ in by_role.values() if column.unit}
    unit_cell = by_role["unit"][1] if "unit" in by_role else None
    if len(units) > 1:
        raise InputError(f"{where}: h and its uncertainty have different units; use one.")
    numbers: tuple[Role, ...] = ("value", "u", "expanded", "k")
    written: dict[str, Numeral | str | None] = {
        role: _number(by_role[role][1], f"{where}, {_SHOWN.get(role, role)}")
        for role in numbers
        if role in by_role
    }
    written["unit"] = str(unit_cell) if unit_cell is not None else next(iter(units), None)
    if written.get("expanded") is None and written.get("u") is None:
        written["k"] = None  # a column of k belongs to the groups that state an uncertainty
    claim = build_claim(group, where, written, where)
    cutoffs: dict[float, dict[str, Numeral | None]] = {}
    for column, cell in zip(columns, cells, strict=True):
        if column.role == "cutoff":
            number = _number(cell, f"{where}, {column.key} at {column.voltage_kV:g} kV")
            cutoffs.setdefault(column.voltage_kV, {})[column.key] = number
    rows: list[ClaimedCutoff] = [
        claimed_cutoff(voltage, given, f"{where}, {voltage:g} kV")
        for voltage, given in cutoffs.items()
    ]
    return with_cutoffs(claim, rows, where)


def _number(cell: object, where: str) -> Numeral | None:
    if cell is None:
        return None
    if isinstance(cell, str):
        return read_numeral(cell, where)
    if isinstance(cell, int | float) and not isinstance(cell, bool):
        return plain_numeral(float(cell), where)
    raise InputError(f"{where}: {quoted(cell)} is not a number; check the format of the cell.")
