"""From a table to the points of a scan."""

from __future__ import annotations

import datetime
import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hdetermine.errors import InputError
from hdetermine.files.columns import Choice, choose_columns
from hdetermine.files.counts import counts_from_rates, whole_counts, without_dropouts
from hdetermine.files.limits import MAX_POINTS, check_limit
from hdetermine.files.numerals import Decimal, Marks, parse_numeral
from hdetermine.files.plaintext import quoted
from hdetermine.files.readings import readings_deg
from hdetermine.files.sheetmodel import ScanPart
from hdetermine.files.tables import Column, Table

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

_DWELLS_S = (1e-3, 1e6)


@dataclass(frozen=True, slots=True)
class Points:
    """Points of a scan as read from a table; arrays share the shape (n,).

    `rate_rounding` is as in `Scan`.
    """

    reading_deg: FloatArray
    counts: IntArray
    dwell_s: FloatArray
    rate_rounding: float | None
    remarks: tuple[str, ...]


@np.errstate(over="ignore")  # what overflows is refused as out of range
def read_points(table: Table, entry: ScanPart, spacing_pm: float, sheet: str) -> Points:
    """Read the points of one scan.

    Parameters
    ----------
    table : Table
        The scan's table.
    entry : ScanPart
        Its entry in the run sheet, what is stated for every scan filled in.
    spacing_pm : float
        Nominal spacing of the crystal, for tables in wavelengths, pm.
    sheet : str
        Name of the run sheet, for messages.

    Returns
    -------
    Points

    Raises
    ------
    InputError
        Naming file, line, column and remedy.
    """
    choice = choose_columns(table, entry, sheet)
    rows = _filled_rows(table, choice)
    check_limit(len(rows), MAX_POINTS, table.where, "points of a scan")
    decimal = _decimal(table, choice, entry, sheet)
    abscissa = _numbers(table, choice.abscissa, rows, decimal)
    ordinate = _numbers(table, choice.ordinate, rows, decimal)
    kind = _kind(choice, ordinate, table, sheet)
    dwell = _dwell(table, choice, entry, rows, decimal, sheet, kind)
    reading, remarks = readings_deg(table, choice, rows, abscissa, spacing_pm, sheet)
    remarks = [*choice.remarks, *remarks]
    rounding = None
    if kind == "rate":
        column = choice.ordinate
        counts, rounding, notes = counts_from_rates(table, column, rows, ordinate, dwell, decimal)
        remarks += notes
    else:
        counts = whole_counts(table, choice.ordinate, rows, ordinate)
    if _descends(table, choice, rows, reading):
        reading, counts, dwell = reading[::-1].copy(), counts[::-1].copy(), dwell[::-1].copy()
        remarks.append("the scan runs from large to small angles; its order was reversed")
    keep, notes = without_dropouts(reading, counts)
    remarks += notes
    return Points(reading[keep], counts[keep], dwell[keep], rounding, tuple(remarks))


def _filled_rows(table: Table, choice: Choice) -> list[int]:
    """Rows from the first to the last that has a value in the ordinate's column."""
    filled = [i for i, cell in enumerate(choice.ordinate.cells) if cell is not None]
    rows = list(range(filled[0], filled[-1] + 1))
    for column in (choice.abscissa, choice.ordinate):
        for row in rows:
            if column.cells[row] is None:
                raise InputError(
                    f"{table.place(row, column)}: there is no number; fill it in or remove the row."
                )
    return rows


def _decimal(table: Table, choice: Choice, entry: ScanPart, sheet: str) -> Decimal:
    if entry.decimal is not None:
        return entry.decimal
    marks = Marks()
    marks.note((c for c in choice.abscissa.cells if isinstance(c, str)), below_thousand=True)
    for column in (choice.ordinate, choice.dwell):
        if column is not None:
            marks.note(c for c in column.cells if isinstance(c, str))
    try:
        return marks.settle()
    except ValueError as error:
        raise InputError(
            f'{table.where}: {error}; state decimal = "point" or decimal = "comma" for this scan '
            f"in {sheet}."
        ) from None


def _numbers(table: Table, column: Column, rows: list[int], decimal: Decimal) -> FloatArray:
    return np.array([_number(table, column, row, decimal) for row in rows])


def _number(table: Table, column: Column, row: int, decimal: Decimal) -> float:
    cell = column.cells[row]
    if isinstance(cell, float):
        value = cell
    elif isinstance(cell, str):
        try:
            value = parse_numeral(cell, decimal)
        except ValueError:
            value = math.nan
    elif isinstance(cell, datetime.date | datetime.time | datetime.timedelta):
        raise InputError(
            f"{table.place(row, column)}: a date or time stands where a number should be "
            "(spreadsheets turn 1.5 into one); format the column as numbers and enter it again."
        )
    elif isinstance(cell, bool) or cell is None:
        value = math.nan
    else:
        value = float(cell)
    if not math.isfinite(value):
        raise InputError(
            f"{table.place(row, column)}: {quoted(cell, 40)} is not a finite number; correct it."
        )
    return value


def _dwell(
    table: Table,
    choice: Choice,
    entry: ScanPart,
    rows: list[int],
    decimal: Decimal,
    sheet: str,
    kind: str,
) -> FloatArray:
    """Counting time of each point: from the run sheet, or from a column of the table."""
    if entry.dwell_s is not None:
        return np.full(len(rows), entry.dwell_s)
    if choice.dwell is None:
        use = "turns its rates into counts" if kind == "rate" else "every scan needs"
        raise InputError(
            f"{table.where}: the counting time that {use} is not stated; state dwell_s for this "
            f"scan in {sheet}."
        )
    dwell = _numbers(table, choice.dwell, rows, decimal)
    bad = ~((dwell >= _DWELLS_S[0]) & (dwell <= _DWELLS_S[1]))
    if bad.any():
        row = int(np.argmax(bad))
        raise InputError(
            f"{table.place(rows[row], choice.dwell)}: {dwell[row]:g} cannot be a counting time in "
            f"seconds; correct it, or state dwell_s for this scan in {sheet}."
        )
    return dwell


def _kind(choice: Choice, ordinate: FloatArray, table: Table, sheet: str) -> str:
    """Counts or rate: as stated, as the header says, or rate if the numbers are not whole."""
    if choice.ordinate_kind != "intensity":
        return choice.ordinate_kind
    if np.any(ordinate != np.rint(ordinate)):
        return "rate"
    raise InputError(
        f"{table.where}: column {quoted(choice.ordinate.header)} may hold counts or rates; state "
        f'ordinate = "counts" or ordinate = "rate" for this scan in {sheet}.'
    )


def _descends(table: Table, choice: Choice, rows: list[int], reading: FloatArray) -> bool:
    """Whether the angles fall throughout; an error if they neither rise nor fall throughout."""
    steps = np.diff(reading)
    if np.all(steps > 0):
        return False
    if np.all(steps < 0):
        return True
    rising = np.sum(steps > 0) >= np.sum(steps < 0)
    bad = int(np.argmax(steps <= 0 if rising else steps >= 0)) + 1
    said = "repeats the one above it" if steps[bad - 1] == 0 else "is out of order"
    raise InputError(
        f"{table.place(rows[bad], choice.abscissa)}: the angle "
        f"{quoted(choice.abscissa.cells[rows[bad]], 40)} {said}; put the rows in order, each angle "
        "once."
    )
