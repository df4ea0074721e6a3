"""What a group's own data say, in the form in which slips need it."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from hdetermine.classcheck.readings import shortcut_readings
from hdetermine.inference.measurement import DEAD_TIME
from hdetermine.physics.bragg import glancing_angle_deg
from hdetermine.physics.crystals import find_kind
from hdetermine.physics.lines import line_groups
from hdetermine.records.apparatus import Crystal
from hdetermine.records.results import Cutoff, Determination

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Evidence:
    """One group's re-analysed data, one entry a usable voltage, by rising voltage.

    Repeated scans of one voltage are averaged.

    Attributes
    ----------
    displayed_kV : ndarray, shape (n,)
        Voltages as displayed.
    supplied_kV : ndarray, shape (n,)
        Voltages with the stated gain and offset applied.
    angle_deg : ndarray, shape (n,)
        True glancing angles of the cutoffs.
    own_u : ndarray, shape (n,)
        Relative standard uncertainty of each wavelength that is its own.
    zero_deg, zero_u_deg : float
        Zero offset of the goniometer (reading minus true angle).
    spacing_pm : float
        Spacing at the temperature of the run, refraction included.
    lattice_parameter_pm : float or None
        Edge of the cubic cell, if the crystal is cubic.
    material : str
        The crystal.
    planck_J_s, planck_u_J_s : float
        Re-analysis.
    shifts_deg : mapping of str to ndarray, shape (n,)
        What a neglect moves in the cutoff angles.
    shortcuts_deg : mapping of str to tuple of ndarray, shape (n,)
        True-scale angles that a shortcut reads off the same counts, in several variants;
        nan where it finds nothing.
    last_deg : ndarray, shape (n,)
        Largest true angle of each scan.
    """

    displayed_kV: FloatArray
    supplied_kV: FloatArray
    angle_deg: FloatArray
    own_u: FloatArray
    zero_deg: float
    zero_u_deg: float
    spacing_pm: float
    lattice_parameter_pm: float | None
    material: str
    planck_J_s: float
    planck_u_J_s: float
    shifts_deg: Mapping[str, FloatArray] = field(default_factory=dict)
    shortcuts_deg: Mapping[str, tuple[FloatArray, ...]] = field(default_factory=dict)
    last_deg: FloatArray = field(default_factory=lambda: np.empty(0))

    @property
    def size(self) -> int:
        """Number of voltages."""
        return int(self.displayed_kV.size)

    @property
    def wavelength_pm(self) -> FloatArray:
        """Cutoff wavelengths of the re-analysis, pm."""
        return 2.0 * self.spacing_pm * np.sin(np.radians(self.angle_deg))


def gather_evidence(determination: Determination) -> Evidence:
    """Take from a determination what slips are tested against.

    Parameters
    ----------
    determination : Determination
        The re-analysis of one group, with at least one used cutoff.

    Returns
    -------
    Evidence
    """
    apparatus = determination.run.apparatus
    scans = {scan.name: scan for scan in determination.run.scans}
    cutoffs = sorted(determination.used, key=lambda cutoff: cutoff.tube_voltage_kV)
    scale = determination.angle_scale
    zero = scale.zero.value
    spacing = effective_spacing_pm(apparatus.crystal)
    dead_time = apparatus.counter.dead_time_us.value
    groups = line_groups(apparatus.tube.anode)
    lengths = np.array([group.wavelength_pm for group in groups])
    angles = np.concatenate([glancing_angle_deg(lengths, spacing, 0.0, n) for n in (1, 2)])
    lines = (angles[np.isfinite(angles)] + zero).tolist()

    columns: dict[str, list[float]] = {}
    for cutoff in cutoffs:
        scan = scans[cutoff.scan]
        _add(columns, "voltage", cutoff.tube_voltage_kV)
        _add(columns, "angle", cutoff.glancing_angle_deg)
        _add(columns, "own_u", _own_relative_u(cutoff))
        _add(columns, "last", float(scan.reading_deg[-1]) - zero)
        response = cutoff.responses_deg.get(DEAD_TIME, 0.0)
        _add(columns, "dead_time", -dead_time * response)
        rate = scan.counts / scan.dwell_s
        readings = shortcut_readings(
            scan.reading_deg, rate, scan.dwell_s, cutoff.reading_deg, scale.resolution.value, lines
        )
        for name, reading in readings.items():
            _add(columns, name, reading - zero)
    for index, group in enumerate(groups):
        angle = float(glancing_angle_deg(group.wavelength_pm, spacing))
        columns[f"line/{index}"] = [
            angle
            if cutoff.tube_voltage_kV * 1e3 > group.excitation_eV
            and angle < float(scans[cutoff.scan].reading_deg[-1]) - zero
            else math.nan
            for cutoff in cutoffs
        ]
    return _by_voltage(columns, determination)


def _add(columns: dict[str, list[float]], name: str, value: float) -> None:
    columns.setdefault(name, []).append(value)


def _own_relative_u(cutoff: Cutoff) -> float:
    own_deg = math.hypot(cutoff.counting_u_deg, cutoff.window_u_deg)
    return math.radians(own_deg) / math.tan(math.radians(cutoff.glancing_angle_deg))


def _by_voltage(columns: Mapping[str, list[float]], determination: Determination) -> Evidence:
    apparatus = determination.run.apparatus
    scale = determination.angle_scale
    spacing = effective_spacing_pm(apparatus.crystal)
    voltages = np.array(columns["voltage"])
    distinct = np.unique(voltages)
    mean = {
        name: np.array([np.mean(np.array(column)[voltages == kV]) for kV in distinct])
        for name, column in columns.items()
    }
    repeats = np.array([np.count_nonzero(voltages == kV) for kV in distinct])
    shortcuts: dict[str, list[FloatArray]] = {}
    for name, column in mean.items():
        kind, found, _ = name.partition("/")
        if found and np.any(np.isfinite(column)):
            shortcuts.setdefault(kind, []).append(_completed(kind, column, mean["angle"]))
    return Evidence(
        displayed_kV=distinct,
        supplied_kV=apparatus.tube.gain.value * distinct + apparatus.tube.offset_kV.value,
        angle_deg=mean["angle"],
        own_u=mean["own_u"] / np.sqrt(repeats),
        zero_deg=scale.zero.value,
        zero_u_deg=scale.zero.standard_uncertainty,
        spacing_pm=spacing,
        lattice_parameter_pm=lattice_parameter_pm(apparatus.crystal, spacing),
        material=apparatus.crystal.material,
        planck_J_s=determination.h.value_J_s,
        planck_u_J_s=determination.h.standard_uncertainty_J_s,
        shifts_deg={"dead_time": mean["dead_time"]},
        shortcuts_deg={name: tuple(variants) for name, variants in shortcuts.items()},
        last_deg=mean["last"],
    )


def _completed(kind: str, column: FloatArray, angle_deg: FloatArray) -> FloatArray:
    """Fill what a shortcut did not find from its usual ratio to the limit; a line has none."""
    seen = np.isfinite(column)
    if kind == "line" or 2 * np.count_nonzero(seen) < seen.size:
        return column
    ratio = float(np.median(column[seen] / angle_deg[seen]))
    return np.where(seen, column, ratio * angle_deg)


def effective_spacing_pm(crystal: Crystal) -> float:
    """Spacing at the temperature of the run with refraction, pm: lambda = 2 d sin(theta)."""
    warmth = crystal.temperature_C.value - crystal.reference_temperature_C
    warm = crystal.spacing_pm.value * (1.0 + crystal.expansion_per_K.value * warmth)
    return warm * (1.0 - crystal.refraction.value)


def lattice_parameter_pm(crystal: Crystal, spacing_pm: float) -> float | None:
    """Edge of the cubic cell, pm; None if the crystal is not known to be cubic."""
    kind = find_kind(crystal.material)
    indices = [int(character) for character in crystal.reflection if character.isdigit()]
    if kind is None or kind.cubic_parameter_pm is None or len(indices) != 3:
        return None
    return spacing_pm * math.sqrt(sum(index**2 for index in indices))
