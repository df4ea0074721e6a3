"""Whole counts from what a table gives: counts as recorded, or rates rounded for print."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from hdetermine.errors import InputError
from hdetermine.files.limits import MAX_COUNTS
from hdetermine.files.numerals import Decimal, decimals_of
from hdetermine.files.tables import Cell, Column, Table

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

_DROPOUT_CHANCE = 1e-8
"""A zero is a dropout if its Poisson chance, from its neighbours, is below this."""

_MANY_DECIMALS = 12


def whole_counts(table: Table, column: Column, rows: list[int], values: FloatArray) -> IntArray:
    """Take numbers as counts.

    Parameters
    ----------
    table, column : Table, Column
        Where they stand.
    rows : list of int
        Rows of the scan, n of them.
    values : ndarray, shape (n,)
        The numbers.

    Returns
    -------
    ndarray of int, shape (n,)

    Raises
    ------
    InputError
        Naming the first that is negative, fractional or beyond any counter.
    """
    bad = (values < 0) | (values > MAX_COUNTS) | (values != np.rint(values))
    if bad.any():
        i = int(np.argmax(bad))
        if values[i] < 0:
            said = "is negative, and counts cannot be; correct it"
        elif values[i] > MAX_COUNTS:
            said = "is more than any counter can count; correct it"
        else:
            said = (
                "is not a whole number of counts; give the counts as recorded, or state "
                'ordinate = "rate" with dwell_s'
            )
        raise InputError(f"{table.place(rows[i], column)}: {values[i]:.12g} {said}.")
    return np.asarray(values, dtype=np.int64)


def counts_from_rates(
    table: Table,
    column: Column,
    rows: list[int],
    rates: FloatArray,
    dwell_s: FloatArray,
    decimal: Decimal,
) -> tuple[IntArray, float, list[str]]:
    """Restore counts as the whole numbers nearest to rate times dwell.

    Parameters
    ----------
    table, column, rows : Table, Column, list of int
        As in `whole_counts`.
    rates, dwell_s : ndarray, shape (n,)
        Rates, 1/s, and counting times, s.
    decimal : {"point", "comma"}
        Decimal mark of the published rates.

    Returns
    -------
    ndarray of int, shape (n,)
        Counts.
    float
        Half the last published digit of the rate times the longest dwell, counts.
    list of str
        Remarks: whether rate times dwell comes to whole counts within the rounding.

    Raises
    ------
    InputError
        Naming the first rate that is negative or beyond any counter.
    """
    product = rates * dwell_s
    bad = (product < 0) | (product > MAX_COUNTS)
    if bad.any():
        i = int(np.argmax(bad))
        said = "negative" if product[i] < 0 else "more than any counter can count"
        raise InputError(
            f"{table.place(rows[i], column)}: the rate {rates[i]:.12g} is {said}; correct it."
        )
    counts = np.asarray(np.rint(product), dtype=np.int64)
    digit = 10.0 ** -max(_published_decimals(column.cells[row], decimal) for row in rows)
    rounding = 0.5 * digit * float(np.max(dwell_s))
    miss = np.abs(product - counts)
    missed = miss > 0.5 * digit * dwell_s + 1e-6
    remarks = [f"counts were restored as rate x dwell (rates are given to {digit:g} per s)"]
    if np.any(missed):
        remarks.append(
            f"rates x dwell miss whole counts by up to {float(np.max(miss)):.2g} at "
            f"{int(np.sum(missed))} of {len(rows)} points, more than their rounding explains: "
            "check dwell_s"
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


def without_dropouts(
    reading_deg: FloatArray, counts: IntArray
) -> tuple[NDArray[np.bool_], list[str]]:
    """Mark isolated zeros that counting statistics cannot explain.

    The expectation at a zero is the smaller of the means of up to three points on either side;
    both neighbours must stand at a third of it or more. It is a dropout if a Poisson zero has a
    chance below 1e-8, that is, if more than 18.4 counts are expected.

    Parameters
    ----------
    reading_deg : ndarray, shape (n,)
        Readings, degrees.
    counts : ndarray of int, shape (n,)
        Counts.

    Returns
    -------
    ndarray of bool, shape (n,)
        True for the points to keep.
    list of str
        One remark a dropout.
    """
    keep = np.ones(counts.size, dtype=bool)
    least = -math.log(_DROPOUT_CHANCE)
    remarks: list[str] = []
    middle = counts[1:-1] == 0
    isolated = 1 + np.flatnonzero(middle & (counts[:-2] > 0) & (counts[2:] > 0))
    for i in isolated:
        below, above = counts[max(0, i - 3) : i], counts[i + 1 : i + 4]
        expected = min(float(np.mean(below)), float(np.mean(above)))
        if expected > least and min(below[-1], above[0]) >= expected / 3.0:
            keep[i] = False
            remarks.append(
                f"no count at {reading_deg[i]:.6g}° where the neighbours let about "
                f"{expected:.0f} be expected: taken as a dropout of the counter and left out"
            )
    return keep, remarks
