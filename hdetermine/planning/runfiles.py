"""The files of a simulated run: run sheet, scan tables, and the truth beside them."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from hdetermine.errors import InputError
from hdetermine.files.atomic import write_outputs
from hdetermine.files.limits import MAX_SHEET_BYTES
from hdetermine.files.plaintext import quoted
from hdetermine.files.runfolder import read_bytes
from hdetermine.files.runsheet import SHEET_NAME, TRUTH_NAME, parse_sheet
from hdetermine.planning.simulation import SimulatedRun
from hdetermine.planning.specification import PlannedScan
from hdetermine.planning.tomltext import toml_text

SIMULATED_MARK = "simulated"


def run_files(simulated: SimulatedRun) -> dict[str, bytes]:
    """Make the files of a simulated run.

    Parameters
    ----------
    simulated : SimulatedRun
        The run.

    Returns
    -------
    dict of str to bytes
        Contents by name: ``run.toml``, ``truth.toml`` and the scan tables. They depend on
        specification and seed alone.
    """
    specification = simulated.specification
    note = "# Simulated, not measured. The truth stands in truth.toml.\n"
    files = {
        SHEET_NAME: note + toml_text(specification.content),
        TRUTH_NAME: "# Truth of this simulated run; the analysis does not use it.\n"
        + toml_text(truth_content(simulated)),
    }
    for scan, counts in zip(specification.scans, simulated.counts, strict=True):
        files[scan.file] = _scan_table(scan, counts.tolist())
    return {name: text.encode("utf-8") for name, text in files.items()}


def write_run(simulated: SimulatedRun, folder: str | Path, *, replace: bool = False) -> None:
    """Write a simulated run, whole or not at all.

    Parameters
    ----------
    simulated : SimulatedRun
        The run.
    folder : str or Path
        Made if it is not there.
    replace : bool
        Whether files of the same names may be replaced; scan tables of an earlier simulated
        run that are not made again are then removed.

    Raises
    ------
    InputError
        If files of these names are there already and `replace` is false, or the folder cannot
        be written.
    """
    target = Path(folder)
    files = run_files(simulated)
    present = [name for name in files if (target / name).exists()]
    if present and not replace:
        raise InputError(
            f"{quoted(target.name)}: it already holds {quoted(present[0])}; name another folder, "
            "or add --force to replace it."
        )
    write_outputs(target, files, retired=_earlier_tables(target) if replace else ())


def truth_content(simulated: SimulatedRun) -> dict[str, Any]:
    """Give the truth as TOML content; its ``[truth]`` table can stand in a specification."""
    table = simulated.specification.truth
    truth = simulated.truth
    shared = {
        name: getattr(truth, name)
        for name in (
            "voltage_gain",
            "voltage_offset_kV",
            "ripple",
            "cathode_work_function_eV",
            "near_limit_excess",
            "near_limit_energy_keV",
            "spacing_pm",
            "temperature_C",
            "expansion_per_K",
            "refraction",
            "zero_deg",
            "resolution_deg",
            "dead_time_us",
        )
    }
    stated = table.model_dump(exclude_none=True, exclude={"draw", "sweep", *shared})
    box = truth.triangular_fraction != truth.triangular_fraction
    stated["kernel"] = "box" if box else {"triangular_fraction": truth.triangular_fraction}
    stated["voltage_repeatability_kV"] = list(truth.displacements_kV)
    stated["line_strengths_deg"] = dict(simulated.specification.line_strengths_deg)
    if table.sweep:
        stated["sweep"] = {
            name: sweep.model_dump(exclude_none=True) for name, sweep in table.sweep.items()
        }
    return {
        "made": SIMULATED_MARK,
        "seed": simulated.seed,
        "truth": {**shared, **stated},
        "limit": [
            {
                "scan": limit.scan,
                "peak_voltage_kV": limit.peak_voltage_kV,
                "energy_keV": limit.energy_keV,
                "wavelength_pm": limit.wavelength_pm,
                "reading_deg": limit.reading_deg,
            }
            for limit in simulated.limits
        ],
        "file": [scan.file for scan in simulated.specification.scans],
    }


def _scan_table(scan: PlannedScan, counts: list[int]) -> str:
    angle = "two_theta_deg" if scan.two_theta else "glancing_angle_deg"
    lines = [f"{angle},{'count_rate_per_s' if scan.as_rate else 'counts'}"]
    factor = 2.0 if scan.two_theta else 1.0
    for reading, count in zip(scan.reading_deg.tolist(), counts, strict=True):
        shown = repr(count / scan.dwell_s) if scan.as_rate else str(count)
        lines.append(f"{round(factor * reading, 6):.10g},{shown}")
    return "\n".join(lines) + "\n"


def _earlier_tables(folder: Path) -> tuple[str, ...]:
    """Names of the scan tables of a simulated run that stands in a folder."""
    path = folder / TRUTH_NAME
    if not path.is_file():
        return ()
    try:
        content = parse_sheet(read_bytes(path, TRUTH_NAME, MAX_SHEET_BYTES), TRUTH_NAME)
    except InputError:
        return ()
    names = content.get("file")
    if content.get("made") != SIMULATED_MARK or not isinstance(names, list):
        return ()
    return tuple(name for name in names if isinstance(name, str) and _is_inner(name))


def _is_inner(name: str) -> bool:
    parts = Path(name).parts
    return bool(parts) and not Path(name).is_absolute() and ".." not in parts
