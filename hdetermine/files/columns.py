"""Which columns of a table make a scan."""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from dataclasses import dataclass, replace

from hdetermine.errors import InputError
from hdetermine.files.headers import ABSCISSA_ROLES, ORDINATE_ROLES, Meaning, meaning_of, normalise
from hdetermine.files.plaintext import quoted
from hdetermine.files.sheetmodel import ScanPart
from hdetermine.files.tables import Column, Table


@dataclass(frozen=True, slots=True)
class Choice:
    """The columns of a scan and what they hold.

    Attributes
    ----------
    abscissa, ordinate : Column
        The two that are needed.
    dwell : Column or None
        Counting times, if the table has them.
    kind : str
        ``"theta"``, ``"two_theta"`` or ``"wavelength"``.
    unit : str
        Unit of the abscissa; empty if not named.
    ordinate_kind : str
        ``"counts"``, ``"rate"``, or ``"intensity"`` if the header leaves it open.
    remarks : tuple of str
        What was decided.
    """

    abscissa: Column
    ordinate: Column
    dwell: Column | None
    kind: str
    unit: str
    ordinate_kind: str
    remarks: tuple[str, ...]


def choose_columns(table: Table, entry: ScanPart, sheet: str) -> Choice:
    """Choose the columns of a scan by the run sheet's words, then by the headers' words.

    Parameters
    ----------
    table : Table
        The table.
    entry : ScanPart
        The scan's entry in the run sheet.
    sheet : str
        Name of the run sheet, for messages.

    Returns
    -------
    Choice

    Raises
    ------
    InputError
        If the headers leave it open; it asks for one line in the run sheet.
    """
    if len(table.columns) < 2:
        raise InputError(
            f"{table.where}: it has only one column; a scan needs an angle and a count in each row."
        )
    meanings = column_meanings(table)
    abscissa = _abscissa(table, entry, meanings, sheet)
    ordinate = _ordinate(table, entry, meanings, abscissa, sheet)
    dwells = [c for c in table.columns if meanings[c.number].role == "dwell"]
    found = meanings[abscissa.number]
    remarks: list[str] = []
    kind: str = entry.abscissa or found.role
    if (
        entry.abscissa
        and found.role in ABSCISSA_ROLES
        and found.role not in (entry.abscissa, "angle")
    ):
        remarks.append(
            f"column {quoted(abscissa.header)} is read as {entry.abscissa}, as the run sheet says"
        )
    if kind == "angle":
        kind = "theta"
        remarks.append(f"column {quoted(abscissa.header)} is taken for the glancing angle")
    elif kind not in ABSCISSA_ROLES:
        raise InputError(
            f"{table.where}: column {quoted(abscissa.header or str(abscissa.number))} does not say "
            'what it holds; state abscissa = "theta", "two_theta" or "wavelength" for this scan '
            f"in {sheet}."
        )
    spoken = meanings[ordinate.number].role
    ordinate_kind = entry.ordinate or (spoken if spoken in ORDINATE_ROLES else "intensity")
    if entry.ordinate and spoken in ("counts", "rate") and spoken != entry.ordinate:
        remarks.append(
            f"column {quoted(ordinate.header)} is read as {entry.ordinate}, as the run sheet says"
        )
    return Choice(
        abscissa=abscissa,
        ordinate=ordinate,
        dwell=dwells[0] if len(dwells) == 1 else None,
        kind=kind,
        unit=entry.abscissa_unit or found.unit,
        ordinate_kind=ordinate_kind,
        remarks=tuple(remarks),
    )


def column_meanings(table: Table) -> dict[int, Meaning]:
    """What each column holds, by its number.

    Of several header lines no more are used, from the lowest up, than it takes to find an abscissa
    and an ordinate: what stands above may be about the run as a whole. A tube voltage counts from
    any line.
    """
    whole = {column.number: meaning_of(column.header) for column in table.columns}
    for lines in range(1, max((len(column.parts) for column in table.columns), default=0)):
        low = {c.number: meaning_of(" ".join(c.parts[-lines:])) for c in table.columns}
        roles = {meaning.role for meaning in low.values()}
        if roles & set(ABSCISSA_ROLES) and roles & {"counts", "rate"}:
            return {
                number: replace(meaning, voltage_kV=whole[number].voltage_kV)
                for number, meaning in low.items()
            }
    return whole


def _abscissa(table: Table, entry: ScanPart, meanings: dict[int, Meaning], sheet: str) -> Column:
    if entry.abscissa_column is not None:
        return _named(table, entry.abscissa_column, "abscissa_column", sheet)
    candidates = [c for c in table.columns if meanings[c.number].role in ABSCISSA_ROLES]
    wanted = entry.abscissa or "theta"
    for role in (wanted, "angle" if wanted != "wavelength" else wanted):
        exact = [c for c in candidates if meanings[c.number].role == role]
        if len(exact) == 1:
            return exact[0]
        if len(exact) > 1:
            raise InputError(
                f"{table.where}: {len(exact)} columns hold angles or wavelengths of one kind; "
                f"state abscissa_column and column for this scan in {sheet}, by header or number."
            )
    if len(candidates) == 1:
        return candidates[0]
    if not candidates and entry.abscissa is not None:
        others = [c for c in table.columns if meanings[c.number].role == "other"]
        if len(table.columns) == 2 and others:
            return others[0]
    raise InputError(
        f"{table.where}: its columns ({table.listing()}) do not say which one holds the angle; "
        f"state abscissa and abscissa_column for this scan in {sheet}, by header or number."
    )


def _ordinate(
    table: Table,
    entry: ScanPart,
    meanings: dict[int, Meaning],
    abscissa: Column,
    sheet: str,
) -> Column:
    if entry.column is not None:
        column = _named(table, entry.column, "column", sheet)
        if column is abscissa:
            raise InputError(
                f"{sheet}: column {quoted(entry.column)} of {table.where} is the angle; name the "
                "one with the counts."
            )
        return column
    rest = [c for c in table.columns if c is not abscissa]
    candidates = [c for c in rest if meanings[c.number].role in ORDINATE_ROLES]
    fitting = [c for c in candidates if meanings[c.number].voltage_kV == entry.tube_voltage_kV]
    if len(candidates) > 1 and fitting:
        candidates = fitting
    for role in (entry.ordinate or "counts", "counts", "rate"):
        exact = [c for c in candidates if meanings[c.number].role == role]
        if len(candidates) > 1 and len(exact) == 1:
            return exact[0]
    if len(candidates) == 1:
        return candidates[0]
    if not candidates and len(rest) == 1 and entry.ordinate is not None:
        return rest[0]
    key = "ordinate" if len(rest) == 1 else "column"
    raise InputError(
        f"{table.where}: its columns ({table.listing()}) do not say which one holds the counts of "
        f"this scan; state {key} for it in {sheet}."
    )


def _named(table: Table, wanted: str | int, key: str, sheet: str) -> Column:
    """Find a column by its number, or by its header or one line of it."""
    if isinstance(wanted, int):
        found = [c for c in table.columns if c.number == wanted]
    else:
        text = normalise(wanted)
        found = [c for c in table.columns if normalise(c.header) == text]
        found = found or [c for c in table.columns if text in map(normalise, c.parts)]
    if len(found) == 1:
        return found[0]
    if len(found) > 1:
        raise InputError(
            f"{sheet}: key {key}: {len(found)} columns of {table.where} are headed "
            f"{quoted(wanted)}; name it by its number, counted from 1."
        )
    near = _nearest(str(wanted), (c.header for c in table.columns))
    raise InputError(
        f"{sheet}: key {key}: {table.where} has no column {quoted(wanted)}{near}; its columns are "
        f"{table.listing()}."
    )


def _nearest(wanted: str, known: Iterable[str]) -> str:
    close = difflib.get_close_matches(wanted[:80], [name[:80] for name in known], n=1, cutoff=0.6)
    return f" (did you mean {quoted(close[0])}?)" if close else ""
