"""Spectra that nobody here wrote: tubes of the general-purpose library spekpy.

G. Poludniowski, A. Omar, R. Bujila and P. Andreo, "SpekPy v2.0: a software toolkit for modeling
x-ray tube spectra", Med. Phys. 48, 3630 (2021). Its continuum and lines go through the simulated
spectrometer in place of the published laws of `hdetermine.planning.spectrum`.

spekpy's limit is the tube voltage it is given, so it is given the energy e U + phi of the truth.
One spectrum takes it about a second; they are kept on a grid of energies, and between two of
them the continuum is taken at the same distance from the limit.
"""

from __future__ import annotations

import math
import os
import tempfile
from collections.abc import Iterable
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

import numpy as np

from hdetermine.physics.crystals import find_kind, find_planes
from hdetermine.physics.lines import line_groups
from hdetermine.planning.simulation import simulate_run
from hdetermine.planning.specification import PlannedScan
from hdetermine.planning.spectrum import Absorber, HC_PER_E_pm_kV, SharpLine

from .record import RunRecord, study_run
from .settings import BASE, COPPER, Setting
from .study import worker_pool

GRID_keV = 0.1
BIN_keV = {"casim": 0.02, "kqp": 0.05}
SHARED_keV = 0.03
NEAR_keV = 0.06
LOWEST_LINE_keV = 5.0
REFERENCE_keV = 30.0


@dataclass(frozen=True)
class TubeTable:
    """One spectrum of the library.

    Attributes
    ----------
    energy_keV : float
        Limit E0.
    missing_keV : ndarray
        E0 - E in the middle of each bin, rising from the limit.
    ratio : ndarray
        Photons per keV over Kramers' (E0 - E)/E.
    line_keV, line_photons : ndarray
        Characteristic lines.
    """

    energy_keV: float
    missing_keV: np.ndarray
    ratio: np.ndarray
    line_keV: np.ndarray
    line_photons: np.ndarray


def compute(target: str, physics: str, angle_deg: float, energy_keV: float) -> TubeTable:
    """Ask the library for one spectrum; no filter (absorption is laid on later)."""
    import spekpy

    width = BIN_keV[physics]
    tube = spekpy.Spek(kvp=energy_keV, th=angle_deg, targ=target, physics=physics, dk=width)
    energy, photons = tube.get_spectrum(flu=True, diff=True, char=False)
    _, line_density = tube.get_spectrum(flu=True, diff=True, brem=False, char=True)
    missing = energy_keV - energy
    seen = np.flatnonzero(missing > 1e-9)[::-1]
    ratio = photons[seen] * energy[seen] / missing[seen]
    lit = np.flatnonzero((line_density > 0.0) & (energy > LOWEST_LINE_keV))
    at, emitted = placed_lines(target, energy[lit], line_density[lit] * width)
    return TubeTable(energy_keV, missing[seen], ratio, at, emitted)


def placed_lines(
    target: str, energy_keV: np.ndarray, photons: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """Put the line photons of the bins where the lines are.

    The library knows its lines only to its bins (and some to 0.01 keV): its photons are kept,
    and go to the measured wavelengths of the line table nearby; lines closer than a bin share
    them by their strengths. What is near no line of the table stays where it is.
    """
    known = sorted(
        (HC_PER_E_pm_kV / line.wavelength_pm, line.strength)
        for group in line_groups(target)
        for line in group.lines
    )
    clusters: list[list[tuple[float, float]]] = []
    for line in known:
        if clusters and line[0] - clusters[-1][-1][0] < SHARED_keV:
            clusters[-1].append(line)
        else:
            clusters.append([line])
    at, emitted = [], []
    for energy, number in zip(energy_keV.tolist(), photons.tolist(), strict=True):
        near = min(
            clusters, key=lambda one: min(abs(e - energy) for e, _ in one), default=[(energy, 1.0)]
        )
        if min(abs(e - energy) for e, _ in near) > NEAR_keV:
            near = [(energy, 1.0)]
        whole = sum(strength for _, strength in near)
        at += [e for e, _ in near]
        emitted += [number * strength / whole for _, strength in near]
    return np.array(at), np.array(emitted)


@dataclass(frozen=True)
class Library:
    """Spectra of one tube on a grid of energies, kept in a folder."""

    folder: Path
    target: str
    physics: str
    angle_deg: float
    loaded: dict[int, TubeTable] = field(default_factory=dict, compare=False, repr=False)

    def path(self, index: int) -> Path:
        return self.folder / f"{self.target}_{self.physics}_{self.angle_deg:g}_{index}.npz"

    def table(self, index: int) -> TubeTable:
        """Spectrum with the limit ``index * GRID_keV``, computed once."""
        if index not in self.loaded:
            path = self.path(index)
            if not path.exists():
                self._store(index)
            with np.load(path) as stored:
                self.loaded[index] = TubeTable(
                    float(stored["energy_keV"]), stored["missing_keV"], stored["ratio"],
                    stored["line_keV"], stored["line_photons"],
                )  # fmt: skip
        return self.loaded[index]

    def _store(self, index: int) -> None:
        self.folder.mkdir(parents=True, exist_ok=True)
        table = compute(self.target, self.physics, self.angle_deg, index * GRID_keV)
        self._save(
            self.path(index), energy_keV=table.energy_keV, missing_keV=table.missing_keV,
            ratio=table.ratio, line_keV=table.line_keV, line_photons=table.line_photons,
        )  # fmt: skip

    def _save(self, path: Path, **arrays: Any) -> None:
        """Write under another name first: other processes may look at the same moment."""
        handle, name = tempfile.mkstemp(dir=self.folder, suffix=".part")
        with os.fdopen(handle, "wb") as stream:
            np.savez(stream, **arrays)
        os.replace(name, path)

    def neighbours(self, energy_keV: float) -> tuple[TubeTable, TubeTable, float]:
        """The grid points below and above, and how far between them the energy is."""
        place = energy_keV / GRID_keV
        below = math.floor(place + 1e-9)
        part = max(place - below, 0.0)
        lower = self.table(below)
        return lower, self.table(below + 1) if part > 0.0 else lower, part

    def fill(self, setting: Setting, runs: int, jobs: int, bar: Any = None) -> None:
        """Compute what the runs of a study will need, over all cores."""
        needed = sorted(i for i in set(self._indices(setting, runs)) if not self.path(i).exists())
        if not needed:
            return
        task = bar.add_task(f"spekpy: {self.target}, {self.physics}", total=len(needed))
        empty = replace(self, loaded={})
        with worker_pool(jobs) as pool:
            for _ in pool.map(empty._store, needed):
                bar.advance(task)

    def _indices(self, setting: Setting, runs: int) -> Iterable[int]:
        for seed in range(1, runs + 1):
            # The truth's energies alone: one point a scan.
            truth = {**setting.truth_table(seed), "step_deg": 1.0}
            _, simulated = simulate_run(setting.run_sheet(), truth, seed)
            for limit in simulated.limits:
                below = math.floor(limit.energy_keV / GRID_keV)
                yield from (below, below + 1)


@dataclass(frozen=True)
class LibrarySpectrum:
    """A spectrum of the library, ready for the spectrometer."""

    library: Library
    energy_keV: float
    scale: float
    absorber: Absorber
    pm_per_deg: float

    @property
    def limit_pm(self) -> float:
        return HC_PER_E_pm_kV / self.energy_keV

    def continuum_per_s(self, wavelength_pm: np.ndarray) -> np.ndarray:
        wavelength = np.asarray(wavelength_pm, dtype=float)
        lower, upper, part = self.library.neighbours(self.energy_keV)
        energy = HC_PER_E_pm_kV / wavelength
        missing = self.energy_keV - energy
        ratio = (1.0 - part) * np.interp(missing, lower.missing_keV, lower.ratio)
        ratio += part * np.interp(missing, upper.missing_keV, upper.ratio)
        per_energy = np.where(missing > 0.0, ratio * missing / energy, 0.0)
        # |dE/d(lambda)| = E/lambda.
        rate = self.scale * per_energy * energy / wavelength
        return np.asarray(rate * np.exp(-self.absorber.optical_depth(wavelength)))

    def lines(self) -> tuple[SharpLine, ...]:
        lower, upper, part = self.library.neighbours(self.energy_keV)
        weighted = [
            (float(energy), weight * float(photons))
            for table, weight in ((lower, 1.0 - part), (upper, part))
            for energy, photons in zip(table.line_keV, table.line_photons, strict=True)
        ]
        found = []
        for energy, photons in weighted:
            if photons <= 0.0 or energy >= self.energy_keV:
                continue
            wavelength = HC_PER_E_pm_kV / energy
            passed = math.exp(-float(self.absorber.optical_depth(np.array([wavelength]))[0]))
            # The continuum counts photons a picometre; a scan spreads pm_per_deg of them over
            # each degree, so that a line of n photons has the area n/pm_per_deg.
            area = self.scale * photons / self.pm_per_deg * passed
            found.append(SharpLine(wavelength, 4e-4 * wavelength, area))
        return tuple(found)


def independent_run(setting: Setting, library: Library, seed: int) -> RunRecord:
    """Simulate one run with the library's spectra, and analyse it."""
    sheet = setting.run_sheet()["crystal"]
    kind = find_kind(sheet["material"])
    assert kind is not None
    planes = find_planes(kind, sheet["reflection"])
    assert planes is not None
    table = setting.truth_table(seed)
    # The same brightness as in the own studies: the stated rate at half the reference energy.
    reference = library.table(round(REFERENCE_keV / GRID_keV))
    half = REFERENCE_keV / 2.0
    density = float(np.interp(half, reference.missing_keV, reference.ratio))
    wavelength = HC_PER_E_pm_kV / half
    scale = table["continuum_per_s"] / (density * half / wavelength)
    absorber = Absorber(table.get("absorber_depth", 0.3), 100.0)
    pm_per_deg = 2.0 * planes.spacing_pm * math.pi / 180.0

    def make(energy_keV: float, _scan: PlannedScan) -> LibrarySpectrum:
        return LibrarySpectrum(library, energy_keV, scale, absorber, pm_per_deg)

    return study_run(setting, seed, make)


@dataclass(frozen=True)
class IndependentTube:
    """A tube of the library and the setting in which it is studied."""

    setting: Setting
    target: str
    physics: str = "casim"
    angle_deg: float = 12.0


def _lithium_fluoride(name: str, anode: str, lines_scan: tuple[float, float]) -> Setting:
    return replace(COPPER, name=name, anode=anode, lines_scan=lines_scan)


INDEPENDENT: tuple[IndependentTube, ...] = (
    IndependentTube(replace(BASE, name="spekpy Mo, NaCl"), "Mo"),
    IndependentTube(replace(BASE, name="spekpy Mo (kqp), NaCl"), "Mo", "kqp"),
    IndependentTube(
        replace(
            BASE,
            name="spekpy Mo at 30 deg, KBr, Gaussian kernel",
            crystal="KBr",
            to_deg=9.0,
            resolution_deg=0.3,
            truth={"kernel": "gaussian"},
        ),
        "Mo",
        angle_deg=30.0,
    ),
    IndependentTube(
        replace(
            BASE,
            name="spekpy Rh, NaCl, box kernel",
            anode="Rh",
            truth={"kernel": "box", "resolution_deg": 0.3},
        ),
        "Rh",
    ),
    IndependentTube(
        replace(
            BASE,
            name="spekpy Ag, NaCl, triangular kernel",
            anode="Ag",
            truth={"kernel": "triangular"},
        ),
        "Ag",
    ),
    IndependentTube(_lithium_fluoride("spekpy Cu, LiF", "Cu", (18.0, 25.0)), "Cu"),
    IndependentTube(_lithium_fluoride("spekpy W, LiF", "W", (14.0, 24.0)), "W"),
)
