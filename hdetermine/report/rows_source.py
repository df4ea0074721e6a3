"""The rows of provenance: files, versions, settings and the run sheet as read."""

from __future__ import annotations

from hdetermine.records.results import Determination
from hdetermine.report.rows_scale import diagnostic_rows
from hdetermine.report.table import Cell, Table, table, words


def file_rows(d: Determination) -> Table:
    """Input files with their checksums."""
    rows = [(words(one.name), Cell(one.sha256)) for one in d.run.files]
    return table("files", "Files that were read", ("file", "SHA-256"), rows)


def version_rows(d: Determination) -> Table:
    """Versions and the seed."""
    made = d.provenance
    rows = [(Cell("hdetermine"), words(made.package_version))]
    rows += [(words(name), words(version)) for name, version in made.versions.items()]
    rows.append((Cell("seed of the random numbers"), Cell(f"{made.seed}", float(made.seed))))
    return table("versions", "Versions and seed", ("program", "version"), rows)


def setting_rows(d: Determination) -> Table | None:
    """Settings of the analysis; None without any."""
    return diagnostic_rows("settings", "Settings", d.provenance.settings)


def sheet_rows(d: Determination) -> Table | None:
    """The run sheet as it was read, defaults marked; None for a run made without one."""
    if not d.run.sheet:
        return None
    rows = [
        (words(entry.key), words(entry.text), Cell("default" if entry.is_default else "stated"))
        for entry in d.run.sheet
    ]
    return table("sheet", "Run sheet as read", ("key", "understood as", "origin"), rows)
