"""Students of an invented practical: they read spectra, calculate, round, and slip.

Every slip is made where people make it, in the arithmetic from the counts to the number, with
code of its own: nothing here knows the catalogue that is tested with it. All data are simulated.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from hdetermine.planning.simulation import SimulatedRun, simulate_run
from hdetermine.records.run import Run

E_CHARGE = 1.602176634e-19
LIGHT = 299792458.0
BOOK_SPACING_PM = {"LiF": 201.4, "NaCl": 282.0, "KCl": 314.7, "KBr": 329.5}
BOOK_LATTICE_PM = {"LiF": 402.8, "NaCl": 564.0}
KALPHA_PM = {"Cu": 154.1, "Mo": 71.0}
KBETA_PM = {"Cu": 139.2, "Mo": 63.2}


@dataclass(frozen=True)
class Bench:
    """One run of the practical with its truth."""

    run: Run
    simulated: SimulatedRun
    anode: str
    crystal: str
    offset_kV: float
    long_scans: bool

    @property
    def voltage(self) -> np.ndarray:
        return np.array([scan.tube_voltage_kV for scan in self.run.scans])


def make_bench(
    seed: int,
    *,
    anode: str = "Cu",
    crystal: str = "LiF",
    zero_deg: float | None = None,
    offset_kV: float = 0.0,
    voltages: tuple[float, ...] | None = None,
    dwell_s: float = 8.0,
    long_scans: bool = False,
) -> Bench:
    """Simulate a run; the scan of the highest voltage, or every one, covers the lines."""
    if voltages is None:
        # Molybdenum's lines need 20 kV and stand inside the edge just above.
        voltages = (20.0, 23.0, 26.0, 29.0, 32.0, 35.0) if anode == "Cu" else (
            24.0, 26.0, 28.0, 30.5, 33.0, 35.0)  # fmt: skip
    rng = np.random.default_rng([seed, 77])
    if zero_deg is None:
        zero_deg = float(rng.choice([-1.0, 1.0]) * rng.uniform(0.02, 0.6))
    spacing = BOOK_SPACING_PM[crystal]
    edge = {kV: math.degrees(math.asin(1239.84 / kV / 2 / spacing)) for kV in voltages}
    names = {kV: f"scan_{kV:g}kV" for kV in voltages}
    sweep = {
        names[kV]: {
            "from_deg": round(max(0.62 * angle, angle - 2.5) + zero_deg, 1),
            "to_deg": round(1.75 * angle + zero_deg, 1),
        }
        for kV, angle in edge.items()
    }
    top = max(voltages)
    line = math.degrees(math.asin(KALPHA_PM[anode] / 2 / spacing))
    for kV in voltages if long_scans else (top,):
        sweep[names[kV]]["to_deg"] = round(max(line + 2.0, 2.3 * edge[kV]) + zero_deg, 1)
    sheet: dict[str, Any] = {
        "schema": 1,
        "run": {"title": "Simulated practical"},
        "tube": {
            "anode": anode,
            "voltage": {
                "gain": {"value": 1.0, "u": 0.003},
                "offset_kV": {"value": offset_kV, "half_width": 0.05},
                "repeatability_kV": {"value": 0.0, "u": 0.02},
                "ripple": {"value": 0.0, "half_width": 0.002},
            },
        },
        "crystal": {
            "material": crystal,
            "reflection": "200",
            "temperature_C": {"value": 22.0, "u": 2.0},
        },
        "goniometer": {"zero_deg": {"value": 0.0, "u": 0.4}, "step_deg": 0.1},
        "counter": {"dead_time_us": {"value": 90.0, "u": 10.0}},
        "scan": [
            {"file": f"{names[kV]}.csv", "tube_voltage_kV": kV, "dwell_s": dwell_s}
            for kV in voltages
        ],
    }
    truth = {
        "draw": True,
        "zero_deg": zero_deg,
        "resolution_deg": float(rng.uniform(0.3, 0.42)),
        "continuum_per_s": 300.0,
        "background_per_s": float(rng.uniform(0.4, 1.5)),
        "step_deg": 0.1,
        "sweep": sweep,
    }
    run, simulated = simulate_run(sheet, truth, seed)
    return Bench(run, simulated, anode, crystal, offset_kV, long_scans)


# --- a student at work ------------------------------------------------------------------------


@dataclass
class Work:
    """A notebook page: filled in from the top."""

    bench: Bench
    rng: np.random.Generator
    reading: np.ndarray
    angle: np.ndarray
    wavelength: np.ndarray
    voltage: np.ndarray
    kept: np.ndarray
    slope_pm_kV: float
    h: float
    unit: str = "J s"
    standard: float | None = None
    expanded: float | None = None
    shows: str = "h"
    notes: dict[str, Any] = field(default_factory=dict)


def careful_reading(bench: Bench, rng: np.random.Generator, single: float, common: float) -> (
    np.ndarray
):  # fmt: skip
    """Read the limits as somebody who knows about the smearing: true but for scatter."""
    true = np.array([limit.reading_deg for limit in bench.simulated.limits])
    zero = bench.simulated.truth.zero_deg
    factor = 1.0 + rng.normal(0.0, common) + rng.normal(0.0, single, true.size)
    return zero + (true - zero) * factor


def known_zero(bench: Bench, rng: np.random.Generator) -> float:
    """Take the zero from the lines, as well as one can with 0.1 degree steps."""
    return bench.simulated.truth.zero_deg + rng.normal(0.0, 0.01)


def slope_of(
    rng: np.random.Generator, wavelength: np.ndarray, voltage: np.ndarray, ways: int = 4
) -> float:
    """Combine the voltages in one of the ways that are taught."""
    straight = wavelength.size > 2 and np.ptp(wavelength) > 0.01 * wavelength.mean()
    way = rng.integers(ways) if straight else rng.integers(2)
    if way == 0:
        return float(np.average(wavelength * voltage))
    if way == 1:
        return float(np.linalg.lstsq((1.0 / voltage)[:, None], wavelength, rcond=None)[0][0])
    if way == 2:
        return float(np.polyfit(1.0 / voltage, wavelength, 1)[0])
    return float(np.polyfit(1.0 / wavelength, voltage, 1)[0])


Hook = Callable[[Work], None]


def do_work(
    bench: Bench,
    rng: np.random.Generator,
    hooks: dict[str, Hook] | None = None,
    *,
    single: float = 0.005,
    common: float = 0.003,
    shows: str = "h",
) -> Work:
    """Go from the counts to the number; `hooks` are called after the step they are named for."""
    hooks = hooks or {}
    nothing = np.full(bench.voltage.size, np.nan)
    work = Work(
        bench, rng, careful_reading(bench, rng, single, common), nothing, nothing,
        bench.voltage.copy(), np.ones(bench.voltage.size, dtype=bool), math.nan, math.nan,
        shows=shows,
    )  # fmt: skip
    if bench.offset_kV:
        work.voltage = work.voltage + bench.offset_kV
    _call(hooks, "reading", work)
    work.angle = work.reading - known_zero(bench, rng)
    _call(hooks, "angle", work)
    # Angles are written down and used as written.
    work.notes.setdefault("places", int(rng.choice([1, 2, 2])))
    work.angle = np.round(work.angle, work.notes["places"])
    spacing = work.notes.get("spacing", BOOK_SPACING_PM[bench.crystal])
    sine_of = work.notes.get("sine_of", np.radians(work.angle))
    work.wavelength = np.abs(2.0 * spacing * np.sin(sine_of))
    _call(hooks, "wavelength", work)
    kept = work.kept
    work.slope_pm_kV = slope_of(
        rng, work.wavelength[kept], work.voltage[kept], work.notes.get("ways", 4)
    )
    _call(hooks, "slope", work)
    work.h = E_CHARGE / LIGHT * work.slope_pm_kV * 1e-9
    if rng.random() < 0.3:
        work.h, work.unit = work.h / E_CHARGE, "eV s"
    relative = work.notes.get("relative_u", rng.choice([0.003, 0.006, 0.01, 0.02]))
    _call(hooks, "h", work)
    if work.standard is None and work.expanded is None:
        if rng.random() < 0.5:
            work.standard = abs(work.h) * relative
        else:
            work.expanded = abs(work.h) * relative * 2.0
    return work


def _call(hooks: dict[str, Hook], step: str, work: Work) -> None:
    if step in hooks:
        hooks[step](work)


def three_places(number: float) -> str:
    """Write a wavelength as people do, with three significant digits."""
    return f"{number:.1f}" if 10.0 <= number < 100.0 else f"{number:.3g}"


def claim_text(work: Work) -> str:
    """Write the claim sheet."""
    lines = [
        "schema = 1",
        "[h]",
        f"value = {work.h:.{work.notes.get('value_digits', 3)}e}",
        f'unit = "{work.unit}"',
    ]
    digits = work.notes.get("digits", 1)
    if work.standard is not None:
        lines.append(f"u = {work.standard:.{digits}e}")
    if work.expanded is not None:
        lines += [f"expanded = {work.expanded:.{digits}e}", f"k = {work.notes.get('k', 2)}"]
    if work.shows != "h":
        shown_voltage = work.bench.voltage
        for row in np.flatnonzero(work.kept):
            lines += ["[[cutoff]]", f"tube_voltage_kV = {shown_voltage[row]:g}"]
            if work.shows in ("angle", "both"):
                lines.append(f"glancing_angle_deg = {work.angle[row]:.{work.notes['places']}f}")
            if work.shows in ("wavelength", "both"):
                lines.append(f"wavelength_pm = {three_places(work.wavelength[row])}")
    return "\n".join(lines) + "\n"
