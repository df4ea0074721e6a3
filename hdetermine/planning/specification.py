"""A specification: a run sheet plus a ``[truth]`` table, checked before anything is simulated."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path, PurePosixPath
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hdetermine.errors import InputError
from hdetermine.files.apparatus import apparatus_of
from hdetermine.files.limits import MAX_POINTS, MAX_RUN_POINTS, MAX_SHEET_BYTES, check_limit
from hdetermine.files.plaintext import plain_text, quoted
from hdetermine.files.runfolder import read_bytes
from hdetermine.files.runsheet import parse_sheet
from hdetermine.files.sheetcheck import check_sheet
from hdetermine.files.sheetmodel import RunSheet, ScanPart
from hdetermine.physics.lines import K_EDGE_pm, line_groups
from hdetermine.planning.truthtable import Sweep, TruthTable, check_truth
from hdetermine.records.apparatus import Apparatus

FloatArray = NDArray[np.float64]

SPECIFICATION_NAME = "spec.toml"
OWN_NAMES = ("run.toml", "truth.toml")
SCAN_SUFFIXES = (".csv", ".txt")

DEFAULT_LINE_STRENGTHS_DEG = {"K-L2,3": 2.0, "K-M2,3": 0.4}
DEFAULT_OTHER_STRENGTH_DEG = 0.1
"""Area of a line at twice its excitation energy over the continuum's scale (common practice:
K-L2,3 peaks some times higher than the continuum at 35 kV; no source)."""

SHEET_READING_KEYS = (
    "abscissa_column",
    "abscissa_unit",
    "decimal",
    "sheet",
)
"""Keys that tell how a foreign table is read; a simulated table needs none of them."""


@dataclass(frozen=True, slots=True, eq=False)
class PlannedScan:
    """One scan to simulate.

    Attributes
    ----------
    name, file : str
        Its name and its file.
    tube_voltage_kV, emission_current_mA, dwell_s : float
        Displayed voltage, tube current, and time a point.
    reading_deg : ndarray, shape (n,)
        Readings.
    two_theta, as_rate : bool
        How the file shows it: twice the glancing angle, counts per second.
    part : ScanPart
        The run sheet's entry.
    """

    name: str
    file: str
    tube_voltage_kV: float
    emission_current_mA: float
    dwell_s: float
    reading_deg: FloatArray
    two_theta: bool
    as_rate: bool
    part: ScanPart


@dataclass(frozen=True, slots=True, eq=False)
class Specification:
    """What is to be simulated.

    Attributes
    ----------
    where : str
        Name of the specification's file, for messages.
    content : mapping
        The run sheet as TOML content, without ``[truth]``.
    sheet : RunSheet
        The same, checked.
    apparatus : Apparatus
        What the run sheet knows of the instrument.
    truth : TruthTable
        What is stated of the truth.
    line_strengths_deg : mapping of str to float
        Area of each line group, in units of the continuum's scale.
    scans : tuple of PlannedScan
        In the order of the run sheet.
    """

    where: str
    content: Mapping[str, Any]
    sheet: RunSheet
    apparatus: Apparatus
    truth: TruthTable
    scans: tuple[PlannedScan, ...]
    line_strengths_deg: Mapping[str, float] = field(default_factory=dict)


def read_specification(path: str | Path) -> Specification:
    """Read a specification.

    Parameters
    ----------
    path : str or Path
        A TOML file, or a folder with ``spec.toml``.

    Returns
    -------
    Specification

    Raises
    ------
    InputError
        In one sentence that names the place and the remedy.
    """
    file = Path(path)
    if file.is_dir():
        file = file / SPECIFICATION_NAME
    where = plain_text(file.name)
    content = parse_sheet(read_bytes(file, where, MAX_SHEET_BYTES), where)
    return check_specification(content, where)


def check_specification(content: Mapping[str, Any], where: str = "spec") -> Specification:
    """Check a specification given as TOML content.

    Parameters
    ----------
    content : mapping
        Run sheet and ``truth`` table.
    where : str
        Name for messages.

    Returns
    -------
    Specification

    Raises
    ------
    InputError
        In one sentence that names the place and the remedy.
    """
    if "truth" not in content:
        raise InputError(
            f"{where}: there is no [truth] table; add one (its keys may be few: from_deg, to_deg "
            "and draw = true are enough)."
        )
    run_sheet = {key: value for key, value in content.items() if key != "truth"}
    sheet = check_sheet(run_sheet, where)
    if not isinstance(content["truth"], Mapping):
        raise InputError(
            f"{where}: key truth: found {quoted(content['truth'])}; allowed is a table of keys."
        )
    truth = check_truth(content["truth"], where)
    apparatus, _ = apparatus_of(sheet, where)
    if apparatus.tube.filter and apparatus.tube.filter not in K_EDGE_pm:
        raise InputError(
            f"{where}: key tube.filter: the K edge of {apparatus.tube.filter} is not known here; "
            f"known are {', '.join(K_EDGE_pm)}."
        )
    return Specification(
        where=where,
        content=run_sheet,
        sheet=sheet,
        apparatus=apparatus,
        truth=truth,
        scans=_planned_scans(sheet, truth, where),
        line_strengths_deg=_line_strengths(truth, apparatus.tube.anode, where),
    )


def _line_strengths(truth: TruthTable, anode: str, where: str) -> dict[str, float]:
    known = [group.name for group in line_groups(anode)]
    if truth.line_strengths_deg is None:
        return {
            name: DEFAULT_LINE_STRENGTHS_DEG.get(name, DEFAULT_OTHER_STRENGTH_DEG) for name in known
        }
    for name in truth.line_strengths_deg:
        if name not in known:
            raise InputError(
                f"{where}: key truth.line_strengths_deg: there is no line group {quoted(name)} of "
                f"{anode}; known are {', '.join(known) or 'none'}."
            )
    return dict(truth.line_strengths_deg)


def _planned_scans(sheet: RunSheet, truth: TruthTable, where: str) -> tuple[PlannedScan, ...]:
    scans: list[PlannedScan] = []
    points = 0
    for number, part in enumerate(sheet.scan, start=1):
        scan = _planned_scan(part, sheet, truth, f"{where}: key scan[{number}]")
        for other in scans:
            if other.name == scan.name or other.file.casefold() == scan.file.casefold():
                raise InputError(
                    f"{where}: key scan[{number}]: the name and the file of {quoted(scan.name)} "
                    "must be its own; rename one of the two."
                )
        points += scan.reading_deg.size
        check_limit(points, MAX_RUN_POINTS, where, "points in all its scans")
        scans.append(scan)
    for name in truth.sweep:
        if name not in {scan.name for scan in scans}:
            raise InputError(
                f"{where}: key truth.sweep: no scan is called {quoted(name)}; the scans are "
                f"{', '.join(quoted(scan.name) for scan in scans[:8])}."
            )
    return tuple(scans)


def _planned_scan(part: ScanPart, sheet: RunSheet, truth: TruthTable, key: str) -> PlannedScan:
    common = sheet.every_scan
    dwell = part.dwell_s or common.dwell_s
    if dwell is None:
        raise InputError(f"{key}.dwell_s: it is missing; state the seconds a point.")
    foreign = [name for name in SHEET_READING_KEYS if getattr(part, name) or getattr(common, name)]
    if part.column is not None:
        foreign.append("column")
    abscissa = part.abscissa or common.abscissa or "theta"
    if foreign or abscissa == "wavelength":
        raise InputError(
            f"{key}.{foreign[0] if foreign else 'abscissa'}: simulated scans are written as one "
            "plain table each, over theta or two_theta; leave this key out."
        )
    file = PurePosixPath(part.file)
    inside = not file.is_absolute() and ".." not in file.parts and "\\" not in part.file
    if not inside or file.suffix.lower() not in SCAN_SUFFIXES or part.file in OWN_NAMES:
        raise InputError(
            f"{key}.file: found {quoted(part.file)}; allowed is the name of a .csv or .txt file "
            "inside the run folder."
        )
    name = part.name or file.stem
    sweep = truth.sweep.get(name)
    start, stop, step = (
        _sweep_value(end, name, sweep, truth, sheet.goniometer.step_deg, key)
        for end in ("from_deg", "to_deg", "step_deg")
    )
    if stop < start + 2 * step:
        raise InputError(
            f"{key}: the sweep of {quoted(name)} from {start:g} to {stop:g} degrees has fewer "
            "than three points; set to_deg higher."
        )
    points = int((stop - start) / step + 1.0 + 1e-9)
    check_limit(points, MAX_POINTS, key, "points of a scan")
    # Rounded as they are written, so that the analysis reads the very same angles.
    reading = np.round(start + step * np.arange(points), 6)
    return PlannedScan(
        name=name,
        file=part.file,
        tube_voltage_kV=part.tube_voltage_kV,
        emission_current_mA=part.emission_current_mA or common.emission_current_mA or 1.0,
        dwell_s=dwell,
        reading_deg=reading,
        two_theta=abscissa == "two_theta",
        as_rate=(part.ordinate or common.ordinate) == "rate",
        part=part,
    )


def _sweep_value(
    end: str,
    name: str,
    sweep: Sweep | None,
    truth: TruthTable,
    nominal_step_deg: float | None,
    key: str,
) -> float:
    """Find one end or the step of a sweep: the scan's own, or that of all scans."""
    for place in (sweep, truth):
        value = getattr(place, end, None)
        if value is not None:
            return float(value)
    if end == "step_deg" and nominal_step_deg is not None:
        return nominal_step_deg
    raise InputError(f"{key}: the sweep of {quoted(name)} has no {end}; state it under [truth].")
