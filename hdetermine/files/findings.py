"""What a folder of scan tables reveals without a run sheet: every finding says whence."""

from __future__ import annotations

import os
import re
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass, field
from pathlib import Path

from hdetermine.errors import InputError
from hdetermine.files.columns import column_meanings
from hdetermine.files.headers import (
    ABSCISSA_ROLES,
    ORDINATE_ROLES,
    Meaning,
    normalise,
    voltage_in,
)
from hdetermine.files.limits import MAX_FOLDER_ENTRIES, MAX_SCANS, MAX_TABLE_BYTES, check_limit
from hdetermine.files.numerals import decimals_of
from hdetermine.files.plaintext import plain_text, quoted
from hdetermine.files.runfolder import RunFolder
from hdetermine.files.scantable import read_points
from hdetermine.files.sheetmodel import ScanPart, derived_name
from hdetermine.files.tables import Column, Table, TableFile

SUFFIXES = (".csv", ".tsv", ".txt", ".dat", ".asc", ".prn", ".xy", ".xlsx", ".ods")
_NOT_SCANS = re.compile(r"readme|claims?\.|licen[cs]e", re.IGNORECASE)
_SECONDS = re.compile(r"(?<![\d.,a-z])(\d{1,4}(?:[.,]\d{1,2})?)\s*s(?:ec|ek)?\b(?!\s*\^)")
_MILLIAMPERES = re.compile(r"(?<![\d.,a-z])(\d{1,3}(?:[.,]\d{1,3})?)\s*ma\b")
_REFERENCE = re.compile(r"(?<![a-z])(?:ref|reference|referenz|lines?|linien|full)(?![a-z])")
_REMEDIES = {
    "decimal": ("point", "comma"),
    "abscissa_unit": ("deg", "rad", "pm", "nm", "angstrom"),
}
_SINGLED_OUT_BY = ("sheet", "column")
_ANY_SPACING_PM = 3000.0
_VOLTS_ALONE = re.compile(r"\d{1,2}(?:[.,]\d{1,2})?")


@dataclass(frozen=True, slots=True)
class Finding:
    """A value and where it was found; the value is None if nothing was."""

    value: str | float | int | None = None
    whence: str = ""
    is_guess: bool = True


@dataclass(frozen=True, slots=True)
class FoundScan:
    """One scan as far as its table and names tell.

    `settings` are keys of a scan beyond file and voltage, in the order of the run sheet;
    `trouble` says why its table cannot be read yet, empty if it can.
    """

    file: str
    voltage_kV: Finding
    dwell_s: Finding
    current_mA: Finding
    has_dwell_column: bool
    settings: dict[str, Finding] = field(default_factory=dict)
    trouble: str = ""


@dataclass(frozen=True, slots=True)
class Findings:
    """Everything found in a folder.

    Attributes
    ----------
    scans : tuple of FoundScan
        By rising voltage.
    left_out : tuple of str
        Files that are no tables, each with the reason.
    words : tuple of str
        Names and title lines, in which anode and crystal may be named.
    """

    scans: tuple[FoundScan, ...]
    left_out: tuple[str, ...]
    words: tuple[str, ...]


def look_through(folder: Path) -> Findings:
    """Look through a folder for scan tables.

    Parameters
    ----------
    folder : Path
        The folder; its sub-folders are not entered.

    Returns
    -------
    Findings

    Raises
    ------
    InputError
        If there is no folder, or it holds more than the limits allow.
    """
    run_folder = RunFolder(folder)
    scans: list[FoundScan] = []
    left_out: list[str] = []
    words: list[str] = [own_name(folder)]
    for name in _candidates(folder):
        try:
            if plain_text(name) != name:
                raise InputError(f"{plain_text(name)}: its name has invisible characters.")
            path = run_folder.locate(name, "file", "run.toml")
            data = run_folder.read(path, name, MAX_TABLE_BYTES)
            tables = TableFile(data, name).tables()
        except InputError as error:
            left_out.append(str(error))
            continue
        for sheet, table in tables.items():
            words += [Path(name).stem, *table.titles]
            scans += _scans_of(name, sheet if len(tables) > 1 else None, table)
    check_limit(len(scans), MAX_SCANS, quoted(folder), "scans")
    _tell_apart(scans)
    scans.sort(key=lambda scan: (_sort_key(scan.voltage_kV), scan.file))
    return Findings(tuple(scans), tuple(left_out), tuple(words))


def own_name(folder: Path) -> str:
    """Name of a folder, also where it is given as ``.``."""
    return plain_text(os.path.basename(os.path.realpath(folder)))


def _tell_apart(scans: list[FoundScan]) -> None:
    """Give scans whose derived names are alike names of their own."""
    nothing = Finding()
    names = [
        derived_name(scan.file, *(scan.settings.get(key, nothing).value for key in _SINGLED_OUT_BY))
        for scan in scans
    ]
    for number, (scan, name) in enumerate(zip(scans, names, strict=True), start=1):
        if names.count(name) > 1:
            scan.settings["name"] = Finding(f"{name[:60]} ({number})", is_guess=False)


def _candidates(folder: Path) -> list[str]:
    try:
        entries = sorted(entry.name for entry in folder.iterdir())
    except NotADirectoryError:
        raise InputError(f"{quoted(folder)}: this is a file; name a folder.") from None
    except (OSError, ValueError):
        raise InputError(
            f"{quoted(folder)}: there is no such folder that can be read; name one with scan "
            "tables."
        ) from None
    check_limit(len(entries), MAX_FOLDER_ENTRIES, quoted(folder), "entries of a folder")
    tables = [
        name
        for name in entries
        if name.lower().endswith(SUFFIXES)
        and not name.startswith((".", "~"))
        and not _NOT_SCANS.search(name)
    ]
    check_limit(len(tables), MAX_SCANS, quoted(folder), "tables in a folder")
    return tables


def _sort_key(voltage: Finding) -> float:
    return voltage.value if isinstance(voltage.value, float) else float("inf")


def _scans_of(name: str, sheet: str | None, table: Table) -> Iterator[FoundScan]:
    meanings = column_meanings(table)
    abscissa, settings = _abscissa(table, meanings)
    if sheet is not None:
        settings["sheet"] = Finding(sheet, is_guess=False)
    ordinates = _ordinates(table, meanings, abscissa)
    stem = normalise(Path(name).stem)
    sources = [("the file's name", stem), ("the sheet's name", sheet or "")]
    sources += [("a line of the file", title) for title in table.titles]
    for column in ordinates:
        own = dict(settings)
        if len(ordinates) > 1 or meanings[column.number].role == "other":
            own["column"] = Finding(_reference_to(table, column), is_guess=False)
        own |= _ordinate_kind(column, meanings[column.number])
        if len(ordinates) == 1 and _REFERENCE.search(stem):
            own["edge"] = Finding(False, "its name speaks of lines or of a reference")
        heading = [("the column's header", column.header)] if len(ordinates) > 1 else []
        trouble = _trouble(table, own)
        voltage = _first(voltage_in, [("the column's header", column.header), *sources])
        if voltage.value is None and len(ordinates) > 1:
            voltage = _volts_alone(column)
        yield FoundScan(
            file=name,
            voltage_kV=voltage,
            dwell_s=_first(_single(_SECONDS), [*heading, *sources]),
            current_mA=_first(_single(_MILLIAMPERES), [*heading, *sources]),
            has_dwell_column=any(m.role == "dwell" for m in meanings.values()),
            settings=own,
            trouble=trouble,
        )


def _trouble(table: Table, settings: dict[str, Finding]) -> str:
    """Try to read the scan; what one more line would settle is left open in `settings`."""
    trouble = _trial(table, settings, {})
    if not trouble:
        return ""
    for key, options in _REMEDIES.items():
        if any(not _trial(table, settings, {key: option}) for option in options):
            settings[key] = Finding(None, " or ".join(f'"{option}"' for option in options))
            return ""
    return trouble


def _trial(table: Table, settings: dict[str, Finding], more: dict[str, str]) -> str:
    """Read the scan as the settings say and return the fault, if any."""
    content: dict[str, object] = {key: finding.value for key, finding in settings.items()}
    content |= {"file": "trial", "tube_voltage_kV": 20.0, "dwell_s": 1.0, **more}
    entry = ScanPart.model_validate(content)
    try:
        read_points(table, entry, _ANY_SPACING_PM, "the run sheet")
    except InputError as error:
        return str(error)
    return ""


def _abscissa(
    table: Table, meanings: dict[int, Meaning]
) -> tuple[Column | None, dict[str, Finding]]:
    """The column of the abscissa and what the run sheet has to say about it."""
    for role in ABSCISSA_ROLES:
        found = [c for c in table.columns if meanings[c.number].role == role]
        if not found:
            continue
        settings: dict[str, Finding] = {}
        if role == "angle":
            settings["abscissa"] = Finding("theta", "the header says angle and no more")
        elif role == "wavelength":
            settings["abscissa"] = Finding("wavelength", is_guess=False)
        if len(found) > 1 or (role != "theta" and _several(meanings)):
            guess = len(found) > 1
            whence = "the first of several" if guess else ""
            reference = _reference_to(table, found[0])
            settings["abscissa_column"] = Finding(reference, whence, guess)
        return found[0], settings
    first = table.columns[0] if len(table.columns) > 1 else None
    if first is None:
        return None, {}
    return first, {
        "abscissa": Finding("theta", "no header says so"),
        "abscissa_column": Finding(first.number, "the first column"),
    }


def _several(meanings: dict[int, Meaning]) -> bool:
    return sum(m.role in ABSCISSA_ROLES for m in meanings.values()) > 1


def _ordinates(table: Table, meanings: dict[int, Meaning], abscissa: Column | None) -> list[Column]:
    """Columns that make a scan each: all voltages of a wide table, else the one with counts."""
    rest = [c for c in table.columns if c is not abscissa]
    spoken = [c for c in rest if meanings[c.number].role in ORDINATE_ROLES]
    if len({meanings[c.number].voltage_kV for c in spoken} - {None}) > 1:
        return [c for c in spoken if meanings[c.number].voltage_kV is not None]
    for role in ("counts", "rate"):
        found = [c for c in spoken if meanings[c.number].role == role]
        if len(found) == 1:
            return found
    if spoken:
        return spoken
    silent = [c for c in rest if meanings[c.number].role == "other"]
    by_volts = [c for c in silent if _volts_alone(c).value is not None]
    return by_volts if len(by_volts) > 1 else silent[:1]


def _ordinate_kind(column: Column, meaning: Meaning) -> dict[str, Finding]:
    if meaning.role in ("counts", "rate"):
        return {}
    fractional = any(_is_fractional(cell) for cell in column.cells)
    kind = "rate" if fractional else "counts"
    return {"ordinate": Finding(kind, "not whole" if fractional else "whole numbers")}


def _is_fractional(cell: object) -> bool:
    if isinstance(cell, str):
        return decimals_of(cell, "point") > 0 or decimals_of(cell, "comma") > 0
    return isinstance(cell, float) and not cell.is_integer()


def _reference_to(table: Table, column: Column) -> str | int:
    """Name a column by its header if that is unique, else by its number."""
    text = normalise(column.header)
    alike = [c for c in table.columns if normalise(c.header) == text]
    return column.header if text and len(alike) == 1 else column.number


def _volts_alone(column: Column) -> Finding:
    """A header that is a bare number which can be a tube voltage."""
    text = column.header.strip()
    if _VOLTS_ALONE.fullmatch(text):
        value = float(text.replace(",", "."))
        if 5.0 <= value <= 99.0:
            return Finding(value, "the column's header, a bare number")
    return Finding()


def _first(finder: Callable[[str], float | None], sources: Iterable[tuple[str, str]]) -> Finding:
    """The first source in which the finder finds a value."""
    for whence, text in sources:
        value = finder(text)
        if value is not None:
            return Finding(value, whence)
    return Finding()


def _single(pattern: re.Pattern[str]) -> Callable[[str], float | None]:
    """Make a finder of the one number that a pattern finds."""

    def find(text: str) -> float | None:
        values = {float(n.replace(",", ".")) for n in pattern.findall(normalise(text))} - {0.0}
        return values.pop() if len(values) == 1 else None

    return find
