"""The rows of provenance: files, scans, versions, settings and the run sheet as read."""

from __future__ import annotations

import re

from hdetermine.records.results import Determination
from hdetermine.records.run import SheetEntry
from hdetermine.records.scan import Scan
from hdetermine.report.plaintext import sentence
from hdetermine.report.rounding import typeset_figure
from hdetermine.report.rows_scale import diagnostic_rows
from hdetermine.report.spoken import ROUTE_WORDS
from hdetermine.report.table import NONE, Cell, Table, decimals, digits, table, united, words

# What `SheetEntry.text` holds: numbers, and units after a space.
_EXPONENT = re.compile(r"(?<![\w.])-?\d+(?:\.\d+)?e[+-]?\d+(?![\w.])")
_UNIT = re.compile(r"(?<=[\d⁰¹²³⁴⁵⁶⁷⁸⁹]) (degC|deg|us|1/K|keV|eV|kV|pm)\b")
_MOST_DIGITS = 8
"""A number with more digits was computed, not stated, and is shown with four."""


def file_rows(d: Determination) -> Table:
    """Input files with their checksums."""
    rows = [(words(one.name), Cell(one.sha256)) for one in d.run.files]
    return table("files", "Files that were read", ("file", "SHA-256"), rows)


def scan_rows(d: Determination) -> Table:
    """Scans as read: range, step and dwell of each, and what it is for."""
    rows = [
        (
            words(scan.name),
            digits(scan.tube_voltage_kV, 4),
            Cell(NONE)
            if scan.emission_current_mA is None
            else Cell(f"{scan.emission_current_mA:g}", scan.emission_current_mA),
            _range(scan),
            Cell(f"{scan.step_deg:.3g}", scan.step_deg),
            Cell(f"{scan.reading_deg.size}", float(scan.reading_deg.size)),
            _dwell(scan),
            words("left out" if scan.leave_out else "edge and lines" if scan.edge else "lines"),
        )
        for scan in d.run.scans
    ]
    return table(
        "scans",
        "Scans as read",
        ("scan", "voltage / kV", "current / mA", "readings / °", "step / °", "points", "dwell / s",
         "for"),
        rows,
        numeric=(1, 2, 3, 4, 5, 6),
    )  # fmt: skip


def _range(scan: Scan) -> Cell:
    if not scan.reading_deg.size:
        return Cell(NONE)
    first, last = (decimals(float(scan.reading_deg[place]), 2).text for place in (0, -1))
    return Cell(f"{first} to {last}", float(scan.reading_deg[0]))


def _dwell(scan: Scan) -> Cell:
    if not scan.dwell_s.size:
        return Cell(NONE)
    low, high = float(scan.dwell_s.min()), float(scan.dwell_s.max())
    return Cell(f"{low:g}" if low == high else f"{low:g} to {high:g}", low)


def version_rows(d: Determination) -> Table:
    """Versions and the seed."""
    made = d.provenance
    rows = [(Cell("hdetermine"), words(made.package_version))]
    rows += [(words(name), words(version)) for name, version in made.versions.items()]
    rows.append((Cell("seed of the random numbers"), Cell(f"{made.seed}", float(made.seed))))
    return table("versions", "Versions and seed", ("program", "version"), rows)


def setting_rows(d: Determination) -> Table | None:
    """Settings of the analysis; None without any."""
    spoken = {str(route): name for route, name in ROUTE_WORDS.items()}
    settings = {spoken.get(key, key): value for key, value in d.provenance.settings.items()}
    return diagnostic_rows("settings", "Settings", settings)


def sheet_rows(d: Determination) -> Table | None:
    """The run sheet as it was read, defaults marked; None for a run made without one."""
    if not d.run.sheet:
        return None
    given = {one.name: one.source or one.note for one in d.run.apparatus.quantities()}
    rows = [
        (
            words(entry.key),
            Cell(_typeset(entry)),
            Cell("default" if entry.is_default else "stated"),
            words(given.get(entry.key, "") or NONE),
        )
        for entry in d.run.sheet
    ]
    return table("sheet", "Run sheet as read", ("key", "understood as", "origin", "source"), rows)


def _typeset(entry: SheetEntry) -> str:
    """Set the numbers and units of an entry as everywhere else in the report."""

    def number(match: re.Match[str]) -> str:
        found = match.group()
        count = sum(one.isdigit() for one in found.partition("e")[0])
        return typeset_figure(float(found), 4 if count > _MOST_DIGITS else max(count, 1))

    text = _EXPONENT.sub(number, sentence(entry.text, 300) or NONE)
    return _UNIT.sub(lambda match: united("", match[1]), text)
