"""Goniometer readings from whatever the abscissa of a table holds."""

from __future__ import annotations

import math
from typing import NoReturn

import numpy as np
from numpy.typing import NDArray

from hdetermine.errors import InputError
from hdetermine.files.columns import Choice
from hdetermine.files.plaintext import quoted
from hdetermine.files.tables import Table

FloatArray = NDArray[np.float64]

_PM_PER_UNIT = {"pm": 1.0, "nm": 1e3, "angstrom": 100.0}
_LEAST_SINE = 1e-3
"""Below this everything would lie under a twentieth of a degree: the unit cannot be right."""


def readings_deg(
    table: Table,
    choice: Choice,
    rows: list[int],
    abscissa: FloatArray,
    spacing_pm: float,
    sheet: str,
) -> tuple[FloatArray, list[str]]:
    """Glancing angles as read, degrees.

    Parameters
    ----------
    table, choice : Table, Choice
        The table and its columns.
    rows : list of int
        Rows of the scan, n of them.
    abscissa : ndarray, shape (n,)
        Numbers of the abscissa.
    spacing_pm : float
        Nominal spacing, by which wavelengths are turned back into angles, pm.
    sheet : str
        Name of the run sheet, for messages.

    Returns
    -------
    ndarray, shape (n,)
        Readings.
    list of str
        Remarks.

    Raises
    ------
    InputError
        If the numbers cannot be what they are said to be.
    """
    if choice.kind == "wavelength":
        return _from_wavelengths(table, choice, rows, abscissa, spacing_pm, sheet)
    angle = np.degrees(abscissa) if choice.unit == "rad" else abscissa
    name = quoted(choice.abscissa.header)
    if not choice.unit and angle.size > 2 and np.max(np.abs(angle)) < math.pi / 2:
        raise InputError(
            f"{table.where}: column {name} never reaches 1.6 and names no unit; state "
            f'abscissa_unit = "deg" or "rad" for this scan in {sheet}.'
        )
    if choice.unit not in ("", "deg", "rad"):
        raise InputError(
            f"{table.where}: column {name} holds angles in {choice.unit}, which is not read; "
            f'convert them to degrees, or state abscissa_unit = "deg" for this scan in {sheet}.'
        )
    if choice.kind == "two_theta":
        bad = (angle < -20.0) | (angle > 180.0)
        if bad.any():
            _refuse(table, choice, rows, bad, "cannot be twice a glancing angle in degrees")
        return angle / 2.0, ["the table gives twice the glancing angle; it was halved"]
    bad = (angle < -10.0) | (angle > 90.0)
    if bad.any():
        _refuse(
            table,
            choice,
            rows,
            bad,
            "cannot be a glancing angle in degrees; if the column holds twice the angle, state "
            f'abscissa = "two_theta" for this scan in {sheet}',
        )
    return angle, []


def _from_wavelengths(
    table: Table,
    choice: Choice,
    rows: list[int],
    wavelength: FloatArray,
    spacing_pm: float,
    sheet: str,
) -> tuple[FloatArray, list[str]]:
    factor = _PM_PER_UNIT.get(choice.unit)
    if factor is None:
        unit = f"in {choice.unit}" if choice.unit else "without a unit"
        remedy = "convert them to pm and " if choice.unit else ""
        raise InputError(
            f"{table.where}: column {quoted(choice.abscissa.header)} holds wavelengths {unit}; "
            f'{remedy}state abscissa_unit = "pm", "nm" or "angstrom" for this scan in {sheet}.'
        )
    sine = wavelength * (factor / (2.0 * spacing_pm))
    bad = ~((sine > 0.0) & (sine < 1.0))
    if bad.any() or np.max(sine) < _LEAST_SINE:
        _refuse(
            table,
            choice,
            rows,
            bad if bad.any() else sine < _LEAST_SINE,
            f"cannot be a wavelength in {choice.unit} (this crystal reflects up to "
            f"{2.0 * spacing_pm / factor:.4g} {choice.unit}); correct it, or state abscissa_unit "
            f"for this scan in {sheet}",
        )
    remark = (
        "wavelengths were turned back into glancing angles with the nominal spacing "
        f"{spacing_pm:.6g} pm"
    )
    return np.degrees(np.arcsin(sine)), [remark]


def _refuse(
    table: Table, choice: Choice, rows: list[int], bad: NDArray[np.bool_], why: str
) -> NoReturn:
    """Name the first bad cell of the abscissa."""
    row = rows[int(np.argmax(bad))]
    cell = quoted(choice.abscissa.cells[row], 40)
    raise InputError(f"{table.place(row, choice.abscissa)}: {cell} {why}.")
