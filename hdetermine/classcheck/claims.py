"""Reading a group's claim sheet, ``claim.toml``.

::

    schema = 1

    [h]
    value = 6.55e-34
    unit = "J s"            # or "eV s"
    u = 0.04e-34            # or: expanded = 0.08e-34 and k = 2

    [[cutoff]]              # optional, one a voltage
    tube_voltage_kV = 20.0
    wavelength_pm = 61.2    # or wavelength_nm, wavelength_angstrom,
                            # glancing_angle_deg, two_theta_deg
"""

from __future__ import annotations

import itertools
import re
import tomllib
from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any, cast

from hdetermine.classcheck.claim import JOULES, Claim, ClaimedCutoff, PlanckUnit
from hdetermine.classcheck.numeral import Numeral, read_numeral
from hdetermine.errors import InputError
from hdetermine.files.limits import (
    MAX_LINE_CHARACTERS,
    MAX_LINE_DOTS,
    MAX_NESTING,
    MAX_SCANS,
    MAX_SHEET_BYTES,
    check_limit,
)
from hdetermine.files.plaintext import quoted
from hdetermine.files.runfolder import read_bytes

CUTOFF_UNITS: dict[str, tuple[str, float]] = {
    "wavelength_pm": ("wavelength", 1.0),
    "wavelength_nm": ("wavelength", 1e3),
    "wavelength_angstrom": ("wavelength", 1e2),
    "glancing_angle_deg": ("angle", 1.0),
    "two_theta_deg": ("angle", 0.5),
}
"""Keys of a claimed cutoff: what each is, and its factor to pm or degrees of theta."""

LARGEST_kV = 1000.0
FARTHEST_J_s, FARTHEST_CUTOFF, FARTHEST_RATIO = 1e80, 1e18, 1e25
"""No two slips lead farther out than these, or their reciprocals: h, a cutoff, u over h."""
_TOP_KEYS = ("schema", "group", "h", "cutoff", "note")
_H_KEYS = ("value", "unit", "u", "expanded", "k", "note")


class _Written(str):
    """A float of the file, kept as it was written."""


def read_claim(path: Path, group: str, shown: str) -> Claim:
    """Read a claim sheet.

    Parameters
    ----------
    path : Path
        The file.
    group : str
        Name of the group's folder.
    shown : str
        How messages name the file.

    Returns
    -------
    Claim

    Raises
    ------
    InputError
        If the file is no claim sheet; the sentence names file, key and remedy.
    """
    document = _load(path, shown)
    _refuse_unknown(document, _TOP_KEYS, shown)
    if document.get("schema", 1) != 1:
        raise InputError(f"{shown}: schema must be 1, not {quoted(document['schema'])}.")
    named = document.get("group", group)
    if not isinstance(named, str) or named != group:
        raise InputError(
            f"{shown}: group is {quoted(named)}, but the folder is {quoted(group)}; "
            "leave the key out or make them agree."
        )
    claim = build_claim(group, shown, _h_cells(document.get("h", {}), shown), shown)
    cutoffs = document.get("cutoff", [])
    if not isinstance(cutoffs, list) or not all(isinstance(row, dict) for row in cutoffs):
        raise InputError(f"{shown}: cutoffs are written as [[cutoff]] tables.")
    check_limit(len(cutoffs), MAX_SCANS, shown, "cutoffs")
    rows = [_cutoff(row, f"{shown}, cutoff {i}") for i, row in enumerate(cutoffs, 1)]
    return with_cutoffs(claim, rows, shown)


def _load(path: Path, shown: str) -> dict[str, Any]:
    content = read_bytes(path, shown, MAX_SHEET_BYTES)
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise InputError(f"{shown} is not UTF-8 text; save it as UTF-8.") from error
    for number, line in enumerate(text.split("\n"), start=1):
        check_limit(len(line), MAX_LINE_CHARACTERS, f"{shown}, line {number}", "characters")
        # The reader's time and memory grow with the square of the parts of a key.
        check_limit(line.count("."), MAX_LINE_DOTS, f"{shown}, line {number}", "dots")
    check_limit(_nesting(text), MAX_NESTING, shown, "nested brackets")
    try:
        return tomllib.loads(text, parse_float=_Written)
    except (tomllib.TOMLDecodeError, RecursionError) as error:
        raise InputError(f"{shown} is not valid TOML: {error}.") from error
    except ValueError as error:
        raise InputError(f"{shown} holds a number or date that cannot be: {error}.") from error


def _nesting(text: str) -> int:
    """Deepest nesting of square brackets and braces, counted without understanding the text."""
    depth = deepest = 0
    for character in text:
        if character in "[{":
            depth += 1
            deepest = max(deepest, depth)
        elif character in "]}":
            depth = max(depth - 1, 0)
    return deepest


def _refuse_unknown(table: Mapping[str, Any], known: tuple[str, ...], where: str) -> None:
    for key in table:
        if key not in known:
            raise InputError(
                f"{where}: key {quoted(key)} is not known; allowed are {', '.join(known)}."
            )


def _number(table: Mapping[str, Any], key: str, where: str) -> Numeral | None:
    if key not in table:
        return None
    value = table[key]
    place = f"{where}: {key}"
    if isinstance(value, str):
        return read_numeral(value.replace("_", "") if isinstance(value, _Written) else value, place)
    if isinstance(value, int) and not isinstance(value, bool) and abs(value) < 10**18:
        return Numeral(float(value), 1.0)
    raise InputError(f"{place} must be a number, not {quoted(value)}.")


def _h_cells(table: object, shown: str) -> dict[str, Numeral | str | None]:
    if not isinstance(table, dict):
        raise InputError(f"{shown}: h is a table [h] with value, unit and u.")
    _refuse_unknown(table, _H_KEYS, f"{shown}, [h]")
    unit = table.get("unit")
    if unit is not None and not isinstance(unit, str):
        raise InputError(f"{shown}: h.unit is text, not {quoted(unit)}.")
    cells: dict[str, Numeral | str | None] = {"unit": unit}
    for key in ("value", "u", "expanded", "k"):
        cells[key] = _number(table, key, f"{shown}, [h]")
    return cells


def _cutoff(row: Mapping[str, Any], where: str) -> ClaimedCutoff:
    _refuse_unknown(row, ("tube_voltage_kV", *CUTOFF_UNITS, "note"), where)
    voltage = _number(row, "tube_voltage_kV", where)
    if voltage is None:
        raise InputError(f"{where}: tube_voltage_kV is missing.")
    given = {key: _number(row, key, where) for key in CUTOFF_UNITS if key in row}
    return claimed_cutoff(voltage.value, given, where)


def parse_unit(text: str, where: str) -> PlanckUnit:
    """Recognise the unit of h.

    Raises
    ------
    InputError
        For any other unit.
    """
    plain = re.sub(r"[\s·*_.]", "", text)
    for unit in JOULES:
        if plain.casefold() == unit.replace(" ", "").casefold():
            return cast(PlanckUnit, unit)
    raise InputError(f'{where}: unit {quoted(text)} of h is not known; use "J s" or "eV s".')


def build_claim(
    group: str, source: str, cells: Mapping[str, Numeral | str | None], where: str
) -> Claim:
    """Make a claim without cutoffs from the cells ``value, unit, u, expanded, k``.

    Raises
    ------
    InputError
        If a unit is missing, or a number cannot be.
    """
    h, standard, expanded, k = (
        cast(Numeral | None, cells.get(key)) for key in ("value", "u", "expanded", "k")
    )
    unit_text = cells.get("unit")
    if h is None and (standard is not None or expanded is not None):
        raise InputError(f"{where}: an uncertainty without a value of h; give both.")
    if h is not None and unit_text is None:
        raise InputError(f'{where}: the unit of h is missing; state "J s" or "eV s".')
    if h is not None and h.value == 0.0:
        raise InputError(f"{where}: h cannot be zero.")
    for what, number in (("standard", standard), ("expanded", expanded)):
        if number is not None and number.value < 0.0:
            raise InputError(f"{where}: the {what} uncertainty cannot be negative.")
    _refuse_far(h, FARTHEST_J_s, f"{where}, h")
    for name, number in (("u", standard), ("U", expanded)):
        if number is not None and h is not None:
            ratio = Numeral(number.value / abs(h.value), 0.0)
            _refuse_far(ratio, FARTHEST_RATIO, f"{where}, {name} over h")
    if k is not None and not 0.1 <= k.value <= 100.0:
        raise InputError(f"{where}: the coverage factor k = {k.value:g} cannot be; 2 is usual.")
    if k is not None and expanded is None and k.value != 1.0:
        raise InputError(
            f"{where}: k belongs to an expanded uncertainty; give expanded and k, or u alone."
        )
    unit = parse_unit(str(unit_text), where) if unit_text is not None else "J s"
    return Claim(group, source, h, unit, standard, expanded, 2.0 if k is None else k.value)


def _refuse_far(number: Numeral | None, farthest: float, where: str) -> None:
    """Refuse a number of an exponent that nothing explains: ratios and squares stay finite."""
    if number is not None and number.value and not 1.0 / farthest < abs(number.value) < farthest:
        raise InputError(f"{where}: {number.value:g} cannot be; check its exponent.")


def claimed_cutoff(
    voltage_kV: float, given: Mapping[str, Numeral | None], where: str
) -> ClaimedCutoff:
    """Make one claimed cutoff from its cells (keys of `CUTOFF_UNITS`).

    Raises
    ------
    InputError
        If a number cannot be, or one thing is said twice.
    """
    if not 0.1 <= voltage_kV <= LARGEST_kV:
        raise InputError(f"{where}: a tube voltage of {voltage_kV:g} kV cannot be; check the unit.")
    found: dict[str, Numeral] = {}
    for key, number in given.items():
        if number is None:
            continue
        what, factor = CUTOFF_UNITS[key]
        if what in found:
            raise InputError(f"{where}: the {what} is given twice; leave one out.")
        if not number.value > 0.0 or (what == "angle" and number.value >= 180.0):
            raise InputError(f"{where}: {key} = {number.value:g} cannot be a cutoff.")
        _refuse_far(number, FARTHEST_CUTOFF, f"{where}, {key}")
        found[what] = Numeral(number.value * factor, number.step * factor)
    return ClaimedCutoff(voltage_kV, found.get("wavelength"), found.get("angle"))


def with_cutoffs(claim: Claim, rows: list[ClaimedCutoff], where: str) -> Claim:
    """Add cutoffs to a claim, by rising voltage.

    Raises
    ------
    InputError
        If a voltage is named twice.
    """
    kept = sorted(
        (row for row in rows if not (row.wavelength_pm is None and row.glancing_angle_deg is None)),
        key=lambda row: row.tube_voltage_kV,
    )
    for one, other in itertools.pairwise(kept):
        if one.tube_voltage_kV == other.tube_voltage_kV:
            raise InputError(
                f"{where}: two cutoffs for {one.tube_voltage_kV:g} kV; a claim has one a voltage."
            )
    full = replace(claim, cutoffs=tuple(kept))
    if full.is_empty:
        raise InputError(f"{where}: the claim holds no number; give h, or cutoffs, or both.")
    return full
