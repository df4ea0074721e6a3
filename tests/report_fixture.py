"""A determination made by hand: plausible numbers, small, seeded, for the tests of the report.

Nothing here was measured or fitted; the figures only have to be of the right kind.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np

from hdetermine.budget.planck import group_of
from hdetermine.inference import measurement as names
from hdetermine.records.apparatus import (
    Apparatus,
    Continuum,
    Counter,
    Crystal,
    Goniometer,
    Tube,
)
from hdetermine.records.quantity import Quantity
from hdetermine.records.results import (
    AngleScale,
    Budget,
    BudgetRow,
    Check,
    Comparison,
    Cutoff,
    Determination,
    FittedCurve,
    Improvement,
    Influence,
    LineMeasure,
    MeasurementModel,
    PlanckValue,
    Provenance,
    ReadBackwards,
    Relation,
    Route,
    WindowFit,
)
from hdetermine.records.run import InputFile, Run, SheetEntry
from hdetermine.records.scan import Scan

SI = 6.62607015e-34
HC_PM_KV = 1239.841984
SPACING_PM = 282.01


def quantity(name: str, symbol: str, value: float, u: float, unit: str, **more) -> Quantity:
    return Quantity(name, symbol, value, u, unit, **more)


def apparatus() -> Apparatus:
    return Apparatus(
        Tube(
            "Mo",
            quantity(names.GAIN, "g", 1.0, 0.004, "1", source="supply calibration"),
            quantity(names.OFFSET, "o", 0.0, 0.029, "kV", distribution="rectangular"),
            quantity("tube.voltage.repeatability_kV", "r", 0.0, 0.02, "kV"),
            quantity(names.RIPPLE, "s", 0.0, 0.0012, "1", distribution="rectangular"),
            quantity(names.WORK_FUNCTION, "φ", 4.5, 0.17, "eV", distribution="rectangular"),
        ),
        Crystal(
            "NaCl",
            "200",
            quantity(names.SPACING, "d", SPACING_PM, 0.02, "pm"),
            quantity(names.TEMPERATURE, "T", 22.0, 2.0, "°C"),
            26.0,
            quantity(names.EXPANSION, "α", 39.8e-6, 0.5e-6, "1/K", is_default=True),
            quantity(names.REFRACTION, "δ", 1.0e-4, 0.2e-4, "1", is_default=True),
            ("Na", "Cl"),
        ),
        Goniometer(
            quantity(names.ZERO, "z", 0.0, 0.1, "deg"),
            None,
            quantity(names.KERNEL, "κ", 0.5, 0.29, "1", distribution="rectangular"),
            0.1,
        ),
        Counter(quantity(names.DEAD_TIME, "τ", 90.0, 10.0, "us"), "nonparalysable"),
        Continuum(
            quantity(names.EXCESS, "a", 0.85, 0.2, "1", distribution="rectangular"),
            quantity(names.EXCESS_ENERGY, "ε", 0.4, 0.087, "keV", distribution="rectangular"),
        ),
    )


def scan_and_cutoff(voltage: float, rng: np.random.Generator) -> tuple[Scan, Cutoff]:
    name = f"scan_{voltage:.0f}kV"
    zero = 0.11
    limit = HC_PM_KV / voltage
    edge = math.degrees(math.asin(limit / (2.0 * SPACING_PM))) + zero
    reading = np.round(np.arange(2.5, 9.01, 0.1), 3)
    wavelength = 2.0 * SPACING_PM * np.sin(np.radians(reading - zero))
    background = 6.0 + 30.0 * np.exp(-(reading - 2.0) / 0.8)
    rise = np.maximum(wavelength - limit, 0.0) / wavelength**2 * 4.0e4 * voltage / 20.0
    peaks = 900.0 * np.exp(-0.5 * ((reading - 6.437 - zero) / 0.12) ** 2)
    peaks += 2400.0 * np.exp(-0.5 * ((reading - 7.23 - zero) / 0.12) ** 2)
    smooth = np.convolve(np.pad(rise, 2, mode="edge"), [0.1, 0.25, 0.3, 0.25, 0.1], "valid")
    expected = background + smooth + (peaks if voltage > 20.0 else 0.0)
    counts = rng.poisson(expected)
    inside = (reading > edge - 1.2) & (reading < edge + 1.0) & (reading < 6.1)
    scan = Scan(name, voltage, reading, counts, np.full(reading.size, 10.0), 1.0, f"{name}.csv")
    fit = WindowFit(
        float(reading[inside][0]),
        float(reading[inside][-1]),
        2,
        1,
        0,
        edge,
        0.009,
        19.6,
        int(inside.sum()) - 4,
        0.7,
    )
    found = edge + 0.006 * rng.standard_normal()
    angle = found - zero
    cutoff = Cutoff(
        name,
        voltage,
        True,
        reading_deg=found,
        counting_u_deg=0.009,
        lower_u_deg=0.010,
        upper_u_deg=0.008,
        window_u_deg=0.004,
        glancing_angle_deg=angle,
        wavelength_pm=2.0 * SPACING_PM * math.sin(math.radians(angle)),
        standard_uncertainty_pm=0.13,
        shape="Kramers with near-limit excess",
        deviance=19.6,
        degrees_of_freedom=fit.degrees_of_freedom,
        windows=(fit, replace(fit, from_deg=fit.from_deg - 0.3, weight=0.3)),
        curve=FittedCurve(
            reading, counts.astype(float), expected, background, scan.dwell_s, inside
        ),
    )
    return scan, cutoff


def budget(cutoffs: tuple[Cutoff, ...], kit: Apparatus, h: float) -> Budget:
    shares = {
        names.GAIN: 0.45,
        names.OFFSET: 0.03,
        names.RIPPLE: 0.04,
        names.WORK_FUNCTION: 0.0001,
        names.SPACING: -0.01,
        names.TEMPERATURE: 0.0002,
        names.EXPANSION: 0.0,
        names.REFRACTION: 0.0,
        names.ZERO: 0.23,
        names.KERNEL: 0.02,
        names.DEAD_TIME: 0.001,
        names.EXCESS: 0.15,
        names.EXCESS_ENERGY: 0.05,
    }
    combined = 2.71e-36
    inputs = {one.name: one for one in kit.quantities()}
    rows = []
    for name, share in shares.items():
        one = inputs[name]
        part = combined * math.sqrt(abs(share)) * (-1.0 if share < 0.1 else 1.0)
        rows.append(
            BudgetRow(
                name,
                one.symbol,
                one.value,
                one.unit,
                one.standard_uncertainty,
                one.evaluation,
                one.distribution,
                one.degrees_of_freedom,
                part / one.standard_uncertainty,
                part,
                share,
                True,
                (names.SPACING,) if name == names.ZERO else (),
                one.source,
                one.is_default,
                group_of(name),
            )
        )
    left = (1.0 - sum(shares.values())) / len(cutoffs)
    for cutoff in cutoffs:
        for make, symbol, u, unit, part in (
            (names.counting_name, "θ", 0.009, "deg", 0.7),
            (names.window_name, "w", 0.004, "deg", 0.2),
            (names.background_name, "b", 0.001, "deg", 0.0),
            (names.voltage_name, "r", 0.02, "kV", 0.1),
        ):
            one = combined * math.sqrt(left * part)
            rows.append(
                BudgetRow(
                    make(cutoff.scan),
                    symbol,
                    0.0,
                    unit,
                    u,
                    "A" if part == 0.7 else "B",
                    "normal",
                    math.inf,
                    one / u,
                    one,
                    left * part,
                    False,
                    group=group_of(make(cutoff.scan)),
                )
            )
    return Budget(
        "h", "J s", h, combined, 412.0, 0.95, 1.966, 1.966 * combined, tuple(rows),
        correlation(rows), combined * 1.0003,
    )  # fmt: skip


def correlation(rows: list[BudgetRow]) -> np.ndarray:
    """Zero and spacing are correlated, as the line fit leaves them."""
    matrix = np.eye(len(rows))
    place = [[row.quantity for row in rows].index(name) for name in (names.ZERO, names.SPACING)]
    matrix[place[0], place[1]] = matrix[place[1], place[0]] = 0.31
    return matrix


def routes(h: float, u: float, posterior: str) -> dict[str, Route]:
    found = {
        "linear": Route(
            "linear", h, u, (h - 1.966 * u, h + 1.966 * u),
            diagnostics={"effective_degrees_of_freedom": 412.0, "coverage_factor": 1.966},
        ),
        "monte_carlo": Route(
            "monte_carlo", h * 1.00003, u * 1.01, (h - 1.99 * u, h + 1.97 * u),
            diagnostics={"draws": 300000, "stable": True, "validated": True},
        ),
    }  # fmt: skip
    if posterior != "absent":
        done = posterior == "converged"
        found["posterior"] = Route(
            "posterior", h * 0.9998, u * 0.99, (h - 1.95 * u, h + 1.98 * u), done,
            "" if done else "the chain has not converged: split R-hat 1.31 exceeds 1.05",
            {"walkers": 64, "steps": 800, "acceptance_fraction": 0.57, "converged": done,
             "autocorrelation_steps": {"h": 3.02, names.GAIN: 2.99},
             "effective_sample_size": {"h": 25798.0 if done else 41.0, names.GAIN: 26284.0},
             "split_rhat": {"h": 1.0047 if done else 1.31, names.GAIN: 1.004},
             "limits": {"steps_per_autocorrelation_time": 50.0, "split_rhat": 1.05},
             "priors": [
                 {"quantity": "h", "unit": "J s", "distribution": "flat", "sampled": True},
                 {"quantity": names.GAIN, "unit": "1", "distribution": "normal", "value": 1.0,
                  "standard_uncertainty": 0.004, "sampled": True, "posterior_value": 1.0001,
                  "posterior_standard_uncertainty": 0.0039},
                 {"quantity": "scan.x.window_deg", "unit": "deg", "sampled": False}],
             "integrated_out": "Inputs of single scans are integrated out.",
             "prior_sensitivity": {
                 "all_doubled": {"value_J_s": h, "standard_uncertainty_J_s": u,
                                 "expanded_uncertainty_J_s": 3.9 * u},
                 "each_doubled_linear": [{"quantity": names.GAIN, "value_J_s": h,
                                          "expanded_uncertainty_J_s": 2.9 * u}]}},
        )  # fmt: skip
    return found


def relation(cutoffs: tuple[Cutoff, ...]) -> Relation:
    n = len(cutoffs)
    voltage = np.array([cutoff.tube_voltage_kV + 0.0045 for cutoff in cutoffs])
    wavelength = np.array([cutoff.wavelength_pm for cutoff in cutoffs])
    h = wavelength * voltage / HC_PM_KV * SI
    return Relation(
        tuple(cutoff.scan for cutoff in cutoffs),
        voltage,
        wavelength,
        np.full((n, n), 0.09**2) + np.eye(n) * 0.09**2,
        np.eye(n) * 0.02**2,
        np.full(n, 1.0 / n),
        float(np.mean(wavelength * voltage)),
        5.1,
        1239.1 if n >= 3 else math.nan,
        0.03 if n >= 3 else math.nan,
        np.array([[9.0, -0.2], [-0.2, 0.01]]),
        0.998 if n >= 3 else math.nan,
        0.006 if n >= 3 else math.nan,
        7.9 if n > 1 else 0.0,
        n - 1,
        math.sqrt(7.9 / (n - 1)) if n > 1 else math.nan,
        influence=tuple(
            Influence(cutoff.scan, cutoff.tube_voltage_kV, float(np.mean(h)) * (1 + 1e-4 * i),
                      0.05 * (i - 3), 1.0 / n)
            for i, cutoff in enumerate(cutoffs)
        )
        if n > 1
        else (),
    )  # fmt: skip


def angle_scale(scans: tuple[Scan, ...], kit: Apparatus, lines: bool) -> AngleScale:
    zero = replace(kit.goniometer.zero_deg, value=0.112, standard_uncertainty=0.011)
    if not lines:
        zero = kit.goniometer.zero_deg
    found = tuple(
        LineMeasure(scan.name, label, 1, wavelength, 2e-5, reading, 0.01,
                    reading - 0.004 * (i - 1), i != 2, "" if i != 2 else "blended with the edge")
        for scan in scans[-2:]
        for i, (label, wavelength, reading) in enumerate(
            (("Mo K-L2,3", 71.0747, 7.342), ("Mo K-M2,3", 63.25, 6.553),
             ("Mo K-N2,3", 62.1, 6.43)))
    )  # fmt: skip
    width = quantity(names.RESOLUTION, "w", 0.28, 0.02, "deg", evaluation="A")
    return AngleScale(
        zero, width, kit.goniometer.kernel_triangular_fraction, (zero, kit.crystal.spacing_pm),
        np.array([[1.0, 0.31], [0.31, 1.0]]), found if lines else (),
        "lines" if lines else "prior", "lines" if lines else "edges",
        281.7 if lines else None, 0.6 if lines else None,
    )  # fmt: skip


def example(
    voltages: tuple[float, ...] = (20.0, 22.5, 25.0, 27.5, 30.0, 32.5, 35.0, 37.5, 40.0),
    *,
    posterior: str = "converged",
    lines: bool = True,
    refused: bool = True,
    title: str = "Bench 3, molybdenum tube",
    operator: str = "Group 7",
    truth: bool = True,
) -> Determination:
    """A whole determination; the last voltages' scan may be one that was refused."""
    rng = np.random.default_rng(5)
    kit = apparatus()
    pairs = [scan_and_cutoff(voltage, rng) for voltage in voltages]
    scans = tuple(scan for scan, _ in pairs)
    used = tuple(cutoff for _, cutoff in pairs)
    cutoffs = used
    if refused:
        scan, _ = scan_and_cutoff(18.0, rng)
        bare = FittedCurve(scan.reading_deg, scan.counts.astype(float),
                           np.full(scan.counts.size, np.nan), np.full(scan.counts.size, np.nan),
                           scan.dwell_s, np.zeros(scan.counts.size, dtype=bool))  # fmt: skip
        scans = (scan, *scans)
        cutoffs = (
            Cutoff(scan.name, 18.0, False, "a characteristic line stands inside the edge",
                   curve=bare, remarks=("rates do not give whole counts",)),
            *used,
        )  # fmt: skip
    line = relation(used)
    h = float(np.mean(line.wavelengths_pm * line.voltages_kV)) / HC_PM_KV * SI
    table = budget(used, kit, h)
    u = table.combined_standard_uncertainty
    expanded = table.expanded_uncertainty
    taken = routes(h, u, posterior)
    samples = None
    if posterior != "absent":
        samples = np.column_stack(
            [h + u * rng.standard_normal(2000), 1.0 + 0.004 * rng.standard_normal(2000)]
        )
    model = MeasurementModel(
        line.scans, np.array(voltages), np.array([cutoff.reading_deg for cutoff in used]),
        tuple(kit.quantities()), np.eye(len(tuple(kit.quantities()))),
        np.zeros((len(used), len(tuple(kit.quantities())))), line.weights,
        np.full((len(used), 2), 0.009), 26.0,
    )  # fmt: skip
    return Determination(
        Run(title, "2026-03-12", operator, "X-ray bench", kit, scans,
            tuple(InputFile(scan.file, f"{i:064x}") for i, scan in enumerate(scans)),
            (SheetEntry("run.title", title, False),
             SheetEntry("tube.voltage.gain", "1.0 with u = 0.004", False),
             SheetEntry("crystal.expansion_per_K", "3.98e-05 with u = 5e-07", True)),
            ("one dropout to zero was found",), {"h_J_s": SI} if truth else {}),
        PlanckValue(h, u, 0.95, 1.966, expanded, 412.0, "linear",
                    "Monte Carlo confirms the linear route within its tolerance."),
        Comparison(SI, h / SI - 1.0, (h - SI) / expanded,
                   "The result agrees with the SI value within its expanded uncertainty."),
        ReadBackwards(0.9987, 0.0041, 281.6, 1.2),
        taken,
        angle_scale(scans, kit, lines),
        cutoffs,
        line,
        model,
        table,
        (Improvement(names.GAIN, "g", expanded * 0.81, expanded * 0.74),
         Improvement(names.ZERO, "z", expanded * 0.91, expanded * 0.88)),
        expanded * 0.93,
        (Check("intercept", True, 0.4, 2.0, "The line passes through the origin."),
         Check("exponent", False, -2.6, 2.0, "Wavelength falls with another power of voltage."),
         Check("repeats", None, None, None, "No voltage was measured twice.")),
        Provenance("0.1.0", {"numpy": "2.4.6", "scipy": "1.17.1", "emcee": "3.1.6"}, 1,
                   {"posterior": posterior != "absent", "coverage_probability": 0.95}),
        samples,
        ("h", names.GAIN) if samples is not None else (),
    )  # fmt: skip
