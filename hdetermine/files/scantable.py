"""From a table to a scan: which columns, which units, and whole counts."""

from __future__ import annotations

import datetime
import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hdetermine.errors import InputError
from hdetermine.files.columns import Choice, choose_columns
from hdetermine.files.limits import MAX_COUNTS, MAX_POINTS, check_limit
from hdetermine.files.numerals import Decimal, Marks, decimals_of, parse_numeral
from hdetermine.files.plaintext import quoted
from hdetermine.files.sheetmodel import ScanPart
from hdetermine.files.tables import Cell, Column, Table

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

_DROPOUT_CHANCE = 1e-8
"""A zero is a dropout if its Poisson chance, from its neighbours, is below this."""

_MANY_DECIMALS = 12


@dataclass(frozen=True, slots=True)
class Points:
    """Points of a scan as read from a table."""

    reading_deg: FloatArray
    counts: IntArray
    dwell_s: FloatArray
    rate_rounding: float | None
    remarks: tuple[str, ...]


def read_points(table: Table, entry: ScanPart, spacing_pm: float, sheet: str) -> Points:
    """Read the points of one scan.

    Parameters
    ----------
    table : Table
        The scan's table.
    entry : ScanPart
        Its entry in the run sheet, defaults for every scan filled in.
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
    remarks = list(choice.remarks)
    rows = _filled_rows(table, choice)
    check_limit(len(rows), MAX_POINTS, table.where, "points of a scan")
    decimal = _decimal(table, choice, entry, sheet)
    abscissa = _numbers(table, choice.abscissa, rows, decimal)
    ordinate = _numbers(table, choice.ordinate, rows, decimal)
    dwell = _dwell(table, choice, entry, rows, decimal, sheet)
    reading, note = _readings(table, choice, rows, abscissa, spacing_pm, sheet)
    remarks += note
    kind = _kind(choice, ordinate, table, sheet)
    rounding = None
    if kind == "rate":
        if dwell is None:
            raise InputError(
                f"{table.where}: column {quoted(choice.ordinate.header)} holds rates; state "
                f"dwell_s for this scan in {sheet}."
            )
        counts, rounding, note = _counts_from_rates(table, choice, rows, ordinate, dwell, decimal)
        remarks += note
    else:
        counts = _whole_counts(table, choice.ordinate, rows, ordinate)
    if dwell is None:
        raise InputError(
            f"{table.where}: its counting time is not stated; state dwell_s for this scan in "
            f"{sheet}."
        )
    reading, counts, dwell, note = _ascending(table, choice, rows, reading, counts, dwell)
    remarks += note
    keep, note = _without_dropouts(reading, counts)
    return Points(reading[keep], counts[keep], dwell[keep], rounding, (*remarks, *note))


def _filled_rows(table: Table, choice: Choice) -> list[int]:
    """Rows from the first to the last that has a value in the ordinate's column."""
    filled = [i for i, cell in enumerate(choice.ordinate.cells) if cell is not None]
    if not filled:
        raise InputError(f"{table.where}: column {quoted(choice.ordinate.header)} is empty.")
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
    values = np.empty(len(rows))
    for i, row in enumerate(rows):
        values[i] = _number(table, column, row, decimal)
    return values


def _number(table: Table, column: Column, row: int, decimal: Decimal) -> float:
    cell: Cell = column.cells[row]
    place = table.place(row, column)
    if isinstance(cell, datetime.date | datetime.time | datetime.timedelta):
        raise InputError(
            f"{place}: a date or time stands where a number should be (spreadsheets turn 1.5 into "
            "one); format the column as numbers and enter it again."
        )
    if isinstance(cell, bool) or cell is None:
        raise InputError(f"{place}: {quoted(cell)} is not a number; correct it.")
    if isinstance(cell, str):
        try:
            value = parse_numeral(cell, decimal)
        except ValueError:
            raise InputError(f"{place}: {quoted(cell, 40)} is not a number; correct it.") from None
    else:
        value = float(cell)
    if not math.isfinite(value):
        raise InputError(f"{place}: {quoted(cell, 40)} is not a finite number; correct it.")
    return value


def _dwell(
    table: Table,
    choice: Choice,
    entry: ScanPart,
    rows: list[int],
    decimal: Decimal,
    sheet: str,
) -> FloatArray | None:
    if entry.dwell_s is not None:
        return np.full(len(rows), entry.dwell_s)
    if choice.dwell is None:
        return None
    dwell = _numbers(table, choice.dwell, rows, decimal)
    if not np.all((dwell > 1e-3) & (dwell <= 1e6)):
        bad = int(np.argmax(~((dwell > 1e-3) & (dwell <= 1e6))))
        raise InputError(
            f"{table.place(rows[bad], choice.dwell)}: {dwell[bad]:g} cannot be a counting time in "
            f"seconds; correct it, or state dwell_s in {sheet}."
        )
    return dwell


def _readings(
    table: Table,
    choice: Choice,
    rows: list[int],
    abscissa: FloatArray,
    spacing_pm: float,
    sheet: str,
) -> tuple[FloatArray, list[str]]:
    """Glancing angles in degrees from whatever the abscissa holds."""

    def refuse(bad: NDArray[np.bool_], why: str) -> None:
        if bad.any():
            row = int(np.argmax(bad))
            raise InputError(f"{table.place(rows[row], choice.abscissa)}: {abscissa[row]:g} {why}.")

    if choice.kind == "wavelength":
        factor = {"pm": 1.0, "nm": 1e3, "angstrom": 100.0}.get(choice.unit)
        if factor is None:
            found = f"in {choice.unit}" if choice.unit else "without a unit"
            raise InputError(
                f"{table.where}: column {quoted(choice.abscissa.header)} holds wavelengths "
                f'{found}; state abscissa_unit = "pm", "nm" or "angstrom" for this scan in {sheet}.'
            )
        sine = abscissa * factor / (2.0 * spacing_pm)
        limit = f"{2.0 * spacing_pm / factor:.4g} {choice.unit}"
        refuse(
            ~((sine > 0) & (sine < 1)),
            f"cannot be a wavelength in {choice.unit} that this crystal reflects (0 to {limit}); "
            f"correct it, or abscissa_unit in {sheet}",
        )
        if np.max(sine) < 1e-3:
            refuse(
                sine < 1e-3,
                f"is too short for a wavelength in {choice.unit}; state abscissa_unit in {sheet}",
            )
        remark = (
            "wavelengths were turned back into glancing angles with the nominal spacing "
            f"{spacing_pm:.6g} pm"
        )
        return np.degrees(np.arcsin(sine)), [remark]
    angle = np.degrees(abscissa) if choice.unit == "rad" else abscissa
    if not choice.unit and angle.size > 2 and np.max(np.abs(angle)) < math.pi / 2:
        raise InputError(
            f"{table.where}: column {quoted(choice.abscissa.header)} never reaches 1.6 and "
            f'names no unit; state abscissa_unit = "deg" or "rad" for this scan in {sheet}.'
        )
    if choice.kind == "two_theta":
        refuse((angle < -20) | (angle > 180), "cannot be twice a glancing angle in degrees")
        return angle / 2.0, ["the table gives twice the glancing angle; it was halved"]
    refuse(
        (angle < -10) | (angle > 90),
        "cannot be a glancing angle in degrees; if the column holds twice the angle, state "
        f'abscissa = "two_theta" for this scan in {sheet}',
    )
    return angle, []


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


def _whole_counts(table: Table, column: Column, rows: list[int], ordinate: FloatArray) -> IntArray:
    for i, value in enumerate(ordinate):
        if value < 0:
            said = "is negative, and counts cannot be; correct it"
        elif value > MAX_COUNTS:
            said = "is more than any counter can count; correct it"
        elif value != np.rint(value):
            said = (
                "is not a whole number of counts; give the counts as recorded, or state "
                'ordinate = "rate" with dwell_s'
            )
        else:
            continue
        raise InputError(f"{table.place(rows[i], column)}: {value:.12g} {said}.")
    return np.asarray(np.rint(ordinate), dtype=np.int64)


def _counts_from_rates(
    table: Table,
    choice: Choice,
    rows: list[int],
    rates: FloatArray,
    dwell: FloatArray,
    decimal: Decimal,
) -> tuple[IntArray, float, list[str]]:
    """Nearest whole counts to rates times dwell, and how well they fit."""
    column = choice.ordinate
    product = rates * dwell
    for i, value in enumerate(product):
        if value < 0 or value > MAX_COUNTS:
            said = "negative" if value < 0 else "more than any counter can count"
            raise InputError(
                f"{table.place(rows[i], column)}: the rate {rates[i]:g} is {said}; correct it."
            )
    counts = np.asarray(np.rint(product), dtype=np.int64)
    decimals = max(_published_decimals(column.cells[row], decimal) for row in rows)
    rounding = 0.5 * 10.0**-decimals * float(np.max(dwell))
    miss = np.abs(product - counts)
    allowed = 0.5 * 10.0**-decimals * dwell + 1e-6
    remarks = [f"counts were restored as rate x dwell (rates given to {10.0**-decimals:g} per s)"]
    if np.any(miss > allowed):
        remarks.append(
            f"rates x dwell miss whole counts by up to {float(np.max(miss)):.2g} at "
            f"{int(np.sum(miss > allowed))} of {len(rows)} points, more than their rounding "
            "explains: check dwell_s"
        )
    elif rounding > 0.5:
        remarks.append(
            f"the rates are rounded so far that each count is known only to ± {rounding:.2g}"
        )
    return counts, rounding, remarks


def _published_decimals(cell: Cell, decimal: Decimal) -> int:
    if isinstance(cell, str):
        return min(_MANY_DECIMALS, decimals_of(cell, decimal))
    return min(_MANY_DECIMALS, decimals_of(repr(cell), "point"))


def _ascending(
    table: Table,
    choice: Choice,
    rows: list[int],
    reading: FloatArray,
    counts: IntArray,
    dwell: FloatArray,
) -> tuple[FloatArray, IntArray, FloatArray, list[str]]:
    steps = np.diff(reading)
    if np.all(steps > 0):
        return reading, counts, dwell, []
    if np.all(steps < 0):
        remark = "the scan runs from large to small angles; its order was reversed"
        return reading[::-1].copy(), counts[::-1].copy(), dwell[::-1].copy(), [remark]
    rising = np.sum(steps > 0) >= np.sum(steps < 0)
    bad = int(np.argmax(steps <= 0 if rising else steps >= 0)) + 1
    said = "repeats the angle above it" if steps[bad - 1] == 0 else "is out of order"
    raise InputError(
        f"{table.place(rows[bad], choice.abscissa)}: {choice.abscissa.cells[rows[bad]]} {said}; "
        "put the rows in order, each angle once."
    )


def _without_dropouts(reading: FloatArray, counts: IntArray) -> tuple[NDArray[np.bool_], list[str]]:
    """Mark isolated zeros that counting statistics cannot explain.

    The expectation at a zero is the smaller of the means of up to three points on either side;
    both neighbours must stand at a third of it or more.
    """
    keep = np.ones(counts.size, dtype=bool)
    least = -math.log(_DROPOUT_CHANCE)
    remarks = []
    for i in np.flatnonzero(counts == 0):
        below, above = counts[max(0, i - 3) : i], counts[i + 1 : i + 4]
        if not below.size or not above.size:
            continue
        expected = min(float(np.mean(below)), float(np.mean(above)))
        if expected > least and min(below[-1], above[0]) >= expected / 3.0:
            keep[i] = False
            remarks.append(
                f"no count at {reading[i]:.6g}° where the neighbours let about {expected:.0f} be "
                "expected: taken as a dropout of the counter and left out"
            )
    return keep, remarks
