"""A simulated run: the truth settled, the spectra made, the counts drawn."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hdetermine.errors import InputError
from hdetermine.physics.elements import ATOMIC_NUMBER
from hdetermine.physics.lines import K_EDGE_pm, line_groups
from hdetermine.planning.specification import PlannedScan, Specification, check_specification
from hdetermine.planning.spectrometer import Spectrometer
from hdetermine.planning.spectrum import Absorber, HC_PER_E_pm_kV, Spectrum, TubeSpectrum
from hdetermine.planning.truth import ScanTruth, Truth, settle_truth
from hdetermine.records.run import Run
from hdetermine.records.scan import Scan

FloatArray = NDArray[np.float64]

MAX_EXPECTED_COUNTS = 1e12
ABSORBER_WAVELENGTH_pm = 100.0

SpectrumMaker = Callable[[float, PlannedScan], Spectrum]
"""Makes the spectrum for an energy limit (keV) and a scan."""


@dataclass(frozen=True, slots=True, eq=False)
class SimulatedRun:
    """A run whose truth is known.

    Attributes
    ----------
    specification : Specification
        What was asked for.
    seed : int
        Seed of truth and counts.
    truth : Truth
        True inputs.
    limits : tuple of ScanTruth
        True limit of each scan.
    expected_counts : tuple of ndarray
        Mean of the recorded counts of each scan.
    counts : tuple of ndarray of int
        Recorded counts of each scan.
    """

    specification: Specification
    seed: int
    truth: Truth
    limits: tuple[ScanTruth, ...]
    expected_counts: tuple[FloatArray, ...]
    counts: tuple[NDArray[np.int64], ...]

    def as_run(self) -> Run:
        """Give the run as the analysis sees it, without a detour over files."""
        sheet = self.specification.sheet
        scans = tuple(
            Scan(
                name=planned.name,
                tube_voltage_kV=planned.tube_voltage_kV,
                reading_deg=planned.reading_deg.copy(),
                counts=counts.copy(),
                dwell_s=np.full(counts.size, planned.dwell_s),
                emission_current_mA=planned.emission_current_mA,
                file=planned.file,
                fit_from_deg=planned.part.fit_from_deg,
                fit_to_deg=planned.part.fit_to_deg,
                leave_out=planned.part.leave_out,
                edge=planned.part.edge,
            )
            for planned, counts in zip(self.specification.scans, self.counts, strict=True)
        )
        return Run(
            title=sheet.run.title,
            date=sheet.run.date,
            operator=sheet.run.operator,
            laboratory=sheet.run.laboratory,
            apparatus=self.specification.apparatus,
            scans=scans,
            truth=asdict(self.truth),
        )


def simulate(
    specification: Specification, seed: int, spectra: SpectrumMaker | None = None
) -> SimulatedRun:
    """Simulate a run.

    Parameters
    ----------
    specification : Specification
        Run sheet and truth.
    seed : int
        The only source of randomness; truth and counts have a stream of their own each, so that
        a stated truth leaves the counting alone.
    spectra : callable, optional
        Another source of spectra than the published laws of `spectrum`.

    Returns
    -------
    SimulatedRun

    Raises
    ------
    InputError
        If the truth puts the limit out of the crystal's reach, or the rates out of bounds.
    """
    truth_seed, count_seed = np.random.SeedSequence(seed).spawn(2)
    scans = specification.scans
    truth = settle_truth(
        specification.truth,
        specification.apparatus,
        len(scans),
        np.random.default_rng(truth_seed),
    )
    spectrometer = spectrometer_of(specification, truth)
    limits = tuple(
        _limit(scan, truth, displacement, spectrometer, specification.where)
        for scan, displacement in zip(scans, truth.displacements_kV, strict=True)
    )
    maker = spectra or tube_spectra(specification, truth)
    rng = np.random.default_rng(count_seed)
    means, counts = [], []
    for scan, limit in zip(scans, limits, strict=True):
        spectrum = maker(limit.energy_keV, scan)
        mean = spectrometer.recorded_per_s(spectrum, scan.reading_deg) * scan.dwell_s
        if not float(mean.max()) <= MAX_EXPECTED_COUNTS:
            raise InputError(
                f"{specification.where}: scan {scan.name} would have up to {mean.max():.2g} counts "
                "a point; lower truth.continuum_per_s, the current or the dwell."
            )
        means.append(mean)
        counts.append(rng.poisson(mean))
    return SimulatedRun(specification, seed, truth, limits, tuple(means), tuple(counts))


def simulate_run(
    run_sheet: Mapping[str, Any],
    truth: Mapping[str, Any],
    seed: int,
    spectra: SpectrumMaker | None = None,
) -> tuple[Run, SimulatedRun]:
    """Simulate without files.

    Parameters
    ----------
    run_sheet : mapping
        Content of a run sheet, as TOML content.
    truth : mapping
        Content of its ``[truth]`` table.
    seed : int
        As in `simulate`.
    spectra : callable, optional
        As in `simulate`.

    Returns
    -------
    Run
        What the analysis takes.
    SimulatedRun
        With the truth.
    """
    specification = check_specification({**run_sheet, "truth": truth})
    simulated = simulate(specification, seed, spectra)
    return simulated.as_run(), simulated


def spectrometer_of(specification: Specification, truth: Truth) -> Spectrometer:
    """Set up the true instrument."""
    table = specification.truth
    box = math.isnan(truth.triangular_fraction)
    return Spectrometer(
        spacing_pm=truth.spacing_in_use_pm,
        refraction=truth.refraction,
        zero_deg=truth.zero_deg,
        resolution_deg=truth.resolution_deg,
        triangular_fraction=0.0 if box else truth.triangular_fraction,
        box=box,
        second_order=table.second_order,
        background_per_s=table.background_per_s,
        background_slope_per_deg=table.background_slope_per_deg,
        background_at_deg=table.background_at_deg,
        direct_beam_per_s=table.direct_beam_per_s,
        direct_beam_width_deg=table.direct_beam_width_deg,
        dead_time_us=truth.dead_time_us,
        dead_time_model=specification.apparatus.counter.dead_time_model,
    )


def tube_spectra(specification: Specification, truth: Truth) -> SpectrumMaker:
    """Make spectra by the published laws for one truth."""
    table, tube = specification.truth, specification.apparatus.tube
    emitted = []
    for group in line_groups(tube.anode):
        strengths = [line.strength for line in group.lines]
        area = specification.line_strengths_deg.get(group.name, 0.0) * table.continuum_per_s
        for line in group.lines:
            share = line.strength / sum(strengths)
            emitted.append(
                (line.wavelength_pm, line.width_eV, line.excitation_eV * 1e-3, area * share)
            )
    absorbers = [Absorber(table.absorber_depth, ABSORBER_WAVELENGTH_pm)]
    for element, depth in ((tube.filter, table.filter_depth), (tube.anode, table.anode_depth)):
        if element in K_EDGE_pm:
            absorbers.append(Absorber(depth, K_EDGE_pm[element], is_edge=True))

    def make(energy_keV: float, scan: PlannedScan) -> TubeSpectrum:
        return TubeSpectrum(
            energy_keV=energy_keV,
            current_mA=scan.emission_current_mA,
            atomic_number=ATOMIC_NUMBER[tube.anode],
            scale_per_s=table.continuum_per_s,
            near_limit_excess=0.0 if table.shape == "kulenkampff" else truth.near_limit_excess,
            near_limit_energy_keV=truth.near_limit_energy_keV,
            limit_step_keV=truth.limit_step_keV,
            absorbers=tuple(absorbers),
            counter_depth=table.counter_depth,
            emitted=tuple(emitted),
        )

    return make


def _limit(
    scan: PlannedScan,
    truth: Truth,
    displacement_kV: float,
    spectrometer: Spectrometer,
    where: str,
) -> ScanTruth:
    voltage = truth.voltage_gain * scan.tube_voltage_kV + truth.voltage_offset_kV + displacement_kV
    peak = voltage * (1.0 + truth.ripple)
    energy = peak + truth.cathode_work_function_eV * 1e-3
    if energy <= 0.0:
        raise InputError(
            f"{where}: scan {scan.name} would have a true voltage of {peak:.3g} kV; correct the "
            "truth's gain and offset."
        )
    wavelength = HC_PER_E_pm_kV / energy
    reading = spectrometer.reading_of(wavelength)
    if not math.isfinite(reading):
        raise InputError(
            f"{where}: scan {scan.name} has its limit at {wavelength:.4g} pm, out of the crystal's "
            f"reach of {2 * truth.spacing_in_use_pm:.4g} pm; take a higher voltage."
        )
    return ScanTruth(scan.name, displacement_kV, peak, energy, wavelength, reading)
