"""One run of a study: simulated, analysed, and set beside its truth."""

from __future__ import annotations

import math
import time
from dataclasses import asdict, dataclass, field

import numpy as np
from bench import yardstick

from hdetermine.determination import determine
from hdetermine.errors import InputError
from hdetermine.physics.bragg import wavelength_pm
from hdetermine.physics.reference import PLANCK_CONSTANT_J_S
from hdetermine.planning.simulation import SimulatedRun, SpectrumMaker, simulate_run
from hdetermine.records.results import Determination

from .settings import Setting

Interval = tuple[float, float]


@dataclass
class CutoffRecord:
    """One cutoff against its truth; errors are relative, estimate over truth minus one."""

    voltage_kV: float
    used: bool
    reason: str = ""
    error: float = math.nan
    u: float = math.nan
    reading_error_deg: float = math.nan
    counting_u_deg: float = math.nan
    window_deg: Interval = (math.nan, math.nan)
    yardstick_error: float = math.nan


@dataclass
class RunRecord:
    """One run against its truth; values of h over the true one, minus one."""

    seed: int
    seconds: float = math.nan
    refused: str = ""
    routes: dict[str, tuple[float, float, float, float]] = field(default_factory=dict)
    reported: str = ""
    expanded: float = math.nan
    E_n: float = math.nan
    alone: float = math.nan
    failed_checks: tuple[str, ...] = ()
    unusable_routes: tuple[str, ...] = ()
    birge: float = math.nan
    exponent: float = math.nan
    exponent_u: float = math.nan
    intercept_pm: float = math.nan
    zero_error_deg: float = math.nan
    zero_u_deg: float = math.nan
    resolution_ratio: float = math.nan
    cutoffs: list[CutoffRecord] = field(default_factory=list)
    yardstick: tuple[float, float, float, float] | None = None
    yardstick_alone: float = math.nan
    yardstick_alone_origin: float = math.nan

    def as_dict(self) -> dict[str, object]:
        """Plain content, for JSON."""
        return asdict(self)


def relative(value: float) -> float:
    """h over its true value, minus one."""
    return value / PLANCK_CONSTANT_J_S - 1.0


def study_run(
    setting: Setting, seed: int, spectra: SpectrumMaker | None = None, **options: bool
) -> RunRecord:
    """Simulate and analyse one run."""
    run, simulated = simulate_run(setting.run_sheet(), setting.truth_table(seed), seed, spectra)
    record = RunRecord(seed)
    began = time.perf_counter()
    try:
        found = determine(run, seed=seed, posterior=options.get("posterior", False))
    except InputError as error:
        record.refused = str(error)
        record.cutoffs = [CutoffRecord(scan.tube_voltage_kV, False, "") for scan in run.scans]
    else:
        _judge(record, found, simulated)
    record.seconds = time.perf_counter() - began
    _measure_yardstick(record, simulated)
    return record


def _judge(record: RunRecord, found: Determination, simulated: SimulatedRun) -> None:
    for name, route in found.routes.items():
        low, high = route.interval_95_J_s
        record.routes[name] = (
            relative(route.value_J_s),
            route.standard_uncertainty_J_s / PLANCK_CONSTANT_J_S,
            relative(low),
            relative(high),
        )
        if not route.usable:
            record.unusable_routes += (name,)
    half = found.h.expanded_uncertainty_J_s / PLANCK_CONSTANT_J_S
    value = relative(found.h.value_J_s)
    record.routes["reported"] = (
        value,
        found.h.standard_uncertainty_J_s / PLANCK_CONSTANT_J_S,
        value - half,
        value + half,
    )
    record.reported, record.expanded = found.h.route, half
    record.E_n = found.comparison.E_n
    record.failed_checks = tuple(check.name for check in found.checks if check.passed is False)
    record.birge = found.relation.birge_ratio
    record.exponent, record.exponent_u = found.relation.exponent, found.relation.exponent_u
    record.intercept_pm = found.relation.intercept_pm
    record.zero_error_deg = found.angle_scale.zero.value - simulated.truth.zero_deg
    record.zero_u_deg = found.angle_scale.zero.standard_uncertainty
    record.resolution_ratio = found.angle_scale.resolution.value / simulated.truth.resolution_deg

    limits = {limit.scan: limit for limit in simulated.limits}
    for cutoff in found.cutoffs:
        limit = limits[cutoff.scan]
        entry = CutoffRecord(cutoff.tube_voltage_kV, cutoff.used, cutoff.reason)
        if cutoff.used:
            entry.error = cutoff.wavelength_pm / limit.wavelength_pm - 1.0
            entry.u = cutoff.standard_uncertainty_pm / cutoff.wavelength_pm
            entry.reading_error_deg = cutoff.reading_deg - limit.reading_deg
            entry.counting_u_deg = cutoff.counting_u_deg
            heaviest = cutoff.windows[0]
            entry.window_deg = (heaviest.from_deg, heaviest.to_deg)
        record.cutoffs.append(entry)
    # With the true voltages and the true crystal, what the analysis alone does to h.
    truth = simulated.truth
    readings = {cutoff.scan: cutoff.reading_deg for cutoff in found.cutoffs}
    scans = found.relation.scans
    angles = np.array([readings[scan] for scan in scans]) - found.angle_scale.zero.value
    wavelengths = wavelength_pm(angles, truth.spacing_in_use_pm, truth.refraction)
    true = np.array([limits[scan].wavelength_pm for scan in scans])
    record.alone = float(found.relation.weights @ (wavelengths / true - 1.0))


def _measure_yardstick(record: RunRecord, simulated: SimulatedRun) -> None:
    """The yardstick on the same counts, with the true zero given to it."""
    truth = simulated.truth
    crystal = simulated.specification.apparatus.crystal
    stated, exact, displayed, energies = [], [], [], []
    for entry, scan, counts, limit in zip(
        record.cutoffs,
        simulated.specification.scans,
        simulated.counts,
        simulated.limits,
        strict=True,
    ):
        if not scan.part.edge:
            continue
        reading = yardstick.cutoff_reading(scan.reading_deg, counts)
        angle = reading - truth.zero_deg
        exact.append(float(wavelength_pm(angle, truth.spacing_in_use_pm, truth.refraction)))
        stated.append(float(wavelength_pm(angle, crystal.spacing_pm.value)))
        displayed.append(scan.tube_voltage_kV)
        energies.append(limit.energy_keV)
        entry.yardstick_error = exact[-1] / limit.wavelength_pm - 1.0
    usual = yardstick.planck_value(np.array(stated), np.array(displayed))
    if usual is not None:
        low, high = usual.interval_95_J_s
        record.yardstick = (
            relative(usual.value_J_s),
            usual.standard_error_J_s / PLANCK_CONSTANT_J_S,
            relative(low),
            relative(high),
        )
        alone = yardstick.planck_value(np.array(exact), np.array(energies))
        if alone is not None:
            record.yardstick_alone = relative(alone.value_J_s)
    record.yardstick_alone_origin = relative(
        yardstick.through_origin(np.array(exact), np.array(energies))
    )
