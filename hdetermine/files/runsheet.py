"""Reading a run: the run sheet, its scans, and how everything was understood."""

from __future__ import annotations

import os
import tomllib
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from hdetermine.errors import InputError
from hdetermine.files.apparatus import apparatus_of
from hdetermine.files.limits import (
    MAX_LINE_CHARACTERS,
    MAX_LINE_DOTS,
    MAX_NESTING,
    MAX_RUN_POINTS,
    MAX_SHEET_BYTES,
    MAX_TABLE_BYTES,
    check_limit,
)
from hdetermine.files.plaintext import plain_text, quoted
from hdetermine.files.quantities import describe
from hdetermine.files.runfolder import RunFolder
from hdetermine.files.scantable import read_points
from hdetermine.files.sheetcheck import check_sheet
from hdetermine.files.sheetmodel import RunSheet, ScanPart, TableReading, derived_name
from hdetermine.files.tables import Table, TableFile
from hdetermine.records.apparatus import Apparatus
from hdetermine.records.run import Run, SheetEntry
from hdetermine.records.scan import Scan

SHEET_NAME = "run.toml"
TRUTH_NAME = "truth.toml"


def read_run(folder: str | Path, sheet: str | Path | None = None) -> Run:
    """Read a run folder.

    Parameters
    ----------
    folder : str or Path
        Folder with the scan tables, and with ``run.toml`` unless `sheet` is given.
    sheet : str or Path, optional
        Another run sheet; its files are still looked for in `folder`.

    Returns
    -------
    Run

    Raises
    ------
    InputError
        In one sentence that names the place and the remedy.
    """
    run_folder = RunFolder(Path(folder))
    if not run_folder.path.is_dir():
        raise InputError(
            f"{quoted(Path(folder).name)}: there is no such folder; name a run folder."
        )
    content, where = _sheet_content(run_folder, sheet)
    checked = check_sheet(content, where)
    apparatus, remarks = apparatus_of(checked, where)
    scans = _read_scans(run_folder, checked, apparatus, where)
    if checked.goniometer.step_deg is None:
        apparatus = _with_step(apparatus, scans)
    return Run(
        title=checked.run.title,
        date=checked.run.date,
        operator=checked.run.operator,
        laboratory=checked.run.laboratory,
        apparatus=apparatus,
        scans=scans,
        files=tuple(run_folder.files.values()),
        sheet=_understood(checked, apparatus),
        remarks=remarks,
        truth=_truth(run_folder, checked),
    )


def parse_sheet(data: bytes, where: str) -> dict[str, Any]:
    """Parse TOML within the limits.

    Raises
    ------
    InputError
        If it is not UTF-8, not TOML, or nested too deep.
    """
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError:
        raise InputError(
            f"{where}: a run sheet must be text in UTF-8; save it in that encoding."
        ) from None
    for number, line in enumerate(text.split("\n"), start=1):
        check_limit(len(line), MAX_LINE_CHARACTERS, f"{where}, line {number}", "characters")
        check_limit(line.count("."), MAX_LINE_DOTS, f"{where}, line {number}", "dots")
    try:
        content = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise InputError(f"{where}: this is not valid TOML: {_lowered(error)}.") from None
    except (RecursionError, ValueError):
        raise InputError(
            f"{where}: brackets are nested too deep or a number is too long; simplify it."
        ) from None
    if _depth(content) > MAX_NESTING:
        raise InputError(f"{where}: it is nested deeper than {MAX_NESTING} levels; simplify it.")
    return content


def _lowered(error: tomllib.TOMLDecodeError) -> str:
    text = plain_text(str(error))
    return text[:1].lower() + text[1:200]


def _depth(value: object) -> int:
    """Depth of nesting, found level by level (no recursion)."""
    level: list[object] = [value]
    depth = 0
    while level and depth <= MAX_NESTING:
        depth += 1
        inner: list[object] = []
        for item in level:
            if isinstance(item, Mapping):
                inner.extend(item.values())
            elif isinstance(item, list):
                inner.extend(item)
        level = [item for item in inner if isinstance(item, Mapping | list)]
    return depth


def _sheet_content(folder: RunFolder, sheet: str | Path | None) -> tuple[dict[str, Any], str]:
    if sheet is None:
        path, where = folder.locate(SHEET_NAME, "file", SHEET_NAME), SHEET_NAME
        if not os.path.lexists(path):
            raise InputError(
                f"{quoted(folder.path)}: the folder has no {SHEET_NAME}; write one, for "
                "instance with hdetermine draft."
            )
    else:
        path = Path(sheet)
        where = plain_text(path.name)
    return parse_sheet(folder.read(path, where, MAX_SHEET_BYTES), where), where


def _truth(folder: RunFolder, sheet: RunSheet) -> Mapping[str, object]:
    """Truth of a simulated run: from the sheet, or from the file beside it."""
    path = folder.locate(TRUTH_NAME, "file", TRUTH_NAME)
    if sheet.truth or not os.path.lexists(path):
        return sheet.truth
    unlisted = RunFolder(folder.path)
    content = parse_sheet(unlisted.read(path, TRUTH_NAME, MAX_SHEET_BYTES), TRUTH_NAME)
    truth = content.get("truth", content)
    return truth if isinstance(truth, dict) else content


def _merged(entry: ScanPart, common: TableReading) -> ScanPart:
    """Fill in what is stated for every scan."""
    stated = {
        name: getattr(common, name)
        for name in TableReading.model_fields
        if getattr(entry, name) is None and getattr(common, name) is not None
    }
    return entry.model_copy(update=stated)


def _read_scans(
    folder: RunFolder, sheet: RunSheet, apparatus: Apparatus, where: str
) -> tuple[Scan, ...]:
    tables: dict[str, TableFile] = {}
    scans: list[Scan] = []
    total = 0
    for number, raw in enumerate(sheet.scan, start=1):
        entry = _merged(raw, sheet.every_scan)
        key = f"scan[{number}]"
        name = entry.name or derived_name(entry.file, entry.sheet, entry.column)
        if any(scan.name == name for scan in scans):
            raise InputError(
                f"{where}: key {key}: two scans are called {quoted(name)}; give one of them a "
                "name of its own."
            )
        if entry.file not in tables:
            path = folder.locate(entry.file, f"{key}.file", where)
            shown = plain_text(entry.file)
            tables[entry.file] = TableFile(folder.read(path, shown, MAX_TABLE_BYTES), shown)
        table = tables[entry.file].table(entry.sheet)
        scan = _scan(table, entry, name, apparatus, f"{where}, {key}")
        total += scan.counts.size
        check_limit(total, MAX_RUN_POINTS, where, "points in all its scans")
        scans.append(scan)
    return tuple(scans)


def _scan(table: Table, entry: ScanPart, name: str, apparatus: Apparatus, where: str) -> Scan:
    low, high = entry.fit_from_deg, entry.fit_to_deg
    if low is not None and high is not None and low >= high:
        raise InputError(
            f"{where}: fit_from_deg = {low:g} is not below fit_to_deg = {high:g}; swap them."
        )
    points = read_points(table, entry, apparatus.crystal.spacing_pm.value, where)
    return Scan(
        name=name,
        tube_voltage_kV=entry.tube_voltage_kV,
        reading_deg=points.reading_deg,
        counts=points.counts,
        dwell_s=points.dwell_s,
        emission_current_mA=entry.emission_current_mA,
        file=plain_text(entry.file),
        fit_from_deg=low,
        fit_to_deg=high,
        leave_out=entry.leave_out,
        edge=entry.edge,
        remarks=points.remarks,
        rate_rounding=points.rate_rounding,
    )


def _with_step(apparatus: Apparatus, scans: tuple[Scan, ...]) -> Apparatus:
    from dataclasses import replace

    step = float(np.median([scan.step_deg for scan in scans]))
    return replace(apparatus, goniometer=replace(apparatus.goniometer, step_deg=step))


def _understood(sheet: RunSheet, apparatus: Apparatus) -> tuple[SheetEntry, ...]:
    """The run sheet as understood, line by line."""
    crystal = apparatus.crystal
    entries = [
        SheetEntry("tube.anode", apparatus.tube.anode, False),
        SheetEntry("tube.filter", apparatus.tube.filter or "none", not apparatus.tube.filter),
        SheetEntry("crystal.material", crystal.material, False),
        SheetEntry("crystal.reflection", crystal.reflection or "not stated", False),
        SheetEntry(
            "crystal.reference_temperature_C",
            f"{crystal.reference_temperature_C:g} degC",
            sheet.crystal.reference_temperature_C is None,
        ),
    ]
    entries += [
        SheetEntry(quantity.name, describe(quantity), quantity.is_default)
        for quantity in apparatus.quantities()
    ]
    if apparatus.goniometer.resolution_deg is None:
        entries.append(SheetEntry("goniometer.resolution_deg", "not stated", True))
    entries += [
        SheetEntry(
            "goniometer.step_deg",
            f"{apparatus.goniometer.step_deg:.6g} deg",
            sheet.goniometer.step_deg is None,
        ),
        SheetEntry(
            "counter.dead_time_model",
            apparatus.counter.dead_time_model,
            "dead_time_model" not in sheet.counter.model_fields_set,
        ),
    ]
    return tuple(entries)
