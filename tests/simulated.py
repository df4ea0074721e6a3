"""Simulated runs for the tests of the analysis: the truth is known, the shape code is another."""

from __future__ import annotations

from functools import cache
from typing import Any

from hdetermine.planning.simulation import SimulatedRun, simulate_run
from hdetermine.records.run import Run

CRYSTALS = {
    "NaCl": {"value": 282.01, "u": 0.02},
    "LiF": {"value": 201.35, "u": 0.02},
}


def sheet_of(
    scans: list[dict[str, Any]], anode: str = "Mo", crystal: str = "NaCl", **tables: Any
) -> dict[str, Any]:
    """Content of a run sheet; `tables` are merged into its tables."""
    sheet: dict[str, Any] = {
        "schema": 1,
        "run": {"title": "Simulated"},
        "tube": {
            "anode": anode,
            "voltage": {
                "gain": {"value": 1.0, "u": 0.004},
                "offset_kV": {"value": 0.0, "half_width": 0.05},
                "repeatability_kV": {"value": 0.0, "u": 0.02},
                "ripple": {"value": 0.0, "half_width": 0.002},
            },
        },
        "crystal": {
            "material": crystal,
            "reflection": "200",
            "spacing_pm": CRYSTALS[crystal],
            "temperature_C": {"value": 22.0, "u": 2.0},
        },
        "goniometer": {"zero_deg": {"value": 0.0, "u": 0.1}, "step_deg": 0.1},
        "counter": {"dead_time_us": {"value": 90.0, "u": 10.0}},
        "scan": [{"dwell_s": 10.0, "file": f"{scan['name']}.csv", **scan} for scan in scans],
    }
    for table, content in tables.items():
        sheet[table] = {**sheet.get(table, {}), **content}
    return sheet


def simulated(
    scans: list[dict[str, Any]],
    truth: dict[str, Any],
    seed: int = 1,
    anode: str = "Mo",
    crystal: str = "NaCl",
    **tables: Any,
) -> tuple[Run, SimulatedRun]:
    """Simulate a run from the pieces of a run sheet."""
    return simulate_run(sheet_of(scans, anode, crystal, **tables), truth, seed)


TRUTH = {
    "from_deg": 2.5,
    "to_deg": 9.5,
    "zero_deg": 0.07,
    "resolution_deg": 0.25,
    "kernel": {"triangular_fraction": 0.5},
    "background_per_s": 0.8,
    "background_slope_per_deg": -0.04,
}


def voltages(*values: float, **more: Any) -> list[dict[str, Any]]:
    """One scan a voltage, named after it."""
    return [{"name": f"u{kV:g}", "tube_voltage_kV": float(kV), **more} for kV in values]


@cache
def five_voltages() -> tuple[Run, SimulatedRun]:
    """Mo and NaCl, lines in every scan, the usual counts."""
    return simulated(voltages(22.5, 26, 30, 34, 38), TRUTH, seed=11)
