"""The search for characteristic lines through all scans, and the choice of those to use."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np

from hdetermine.errors import InputError
from hdetermine.inference.features import Feature, absorption_angles_deg, covered, features
from hdetermine.inference.linefit import SIGNIFICANT, FittedLine, fit_lines, search_zero
from hdetermine.inference.spacing import crystal_spacing_pm
from hdetermine.records.apparatus import Apparatus
from hdetermine.records.results import LineMeasure
from hdetermine.records.run import Run
from hdetermine.records.scan import Scan

REFERENCE_TOLERANCE = 3.0  # in standard uncertainties, between reference and edge scans
FARTHEST_DEG = 0.35  # between the first look at a line and its fit
WIDEST_DEG = 1.2
STRANGE_WIDTH = 0.5  # of the logarithm of two widths
DOUBLED_SCORE = 40.0  # match of the lines at twice their angle that betrays 2 theta ...
DOUBLED_RATIO = 3.0  # ... and its ratio to that at their angle
EXCITED = 1.01  # an energy so little above the threshold excites nothing that can be seen


def energy_eV(apparatus: Apparatus, tube_voltage_kV: float) -> float:
    """Energy at the limit for a displayed voltage, eV, inputs at their estimates."""
    tube = apparatus.tube
    supplied = tube.gain.value * tube_voltage_kV + tube.offset_kV.value
    return supplied * (1.0 + tube.ripple.value) * 1e3 + tube.cathode_work_function_eV.value


def scan_features(run: Run, scan: Scan) -> tuple[Feature, ...]:
    """Features that the voltage of a scan excites."""
    crystal = run.apparatus.crystal
    return features(
        run.apparatus.tube.anode,
        energy_eV(run.apparatus, scan.tube_voltage_kV) / EXCITED,
        crystal_spacing_pm(crystal),
        crystal.refraction.value,
    )


def absorption_edges(run: Run) -> tuple[float, ...]:
    """True angles of the absorption edges of crystal and filter, degrees."""
    crystal = run.apparatus.crystal
    return absorption_angles_deg(
        (*crystal.elements, run.apparatus.tube.filter),
        crystal_spacing_pm(crystal),
        crystal.refraction.value,
    )


def anode_edges(run: Run) -> tuple[float, ...]:
    """True angle of the anode's own K absorption edge, degrees; none out of reach."""
    crystal = run.apparatus.crystal
    return absorption_angles_deg(
        (run.apparatus.tube.anode,), crystal_spacing_pm(crystal), crystal.refraction.value
    )


def find_lines(run: Run) -> tuple[FittedLine, ...]:
    """Fit every line that any scan of the run covers.

    Raises
    ------
    InputError
        If the lines stand at twice their angle: the column holds 2 theta.
    """
    prior = run.apparatus.goniometer.zero_deg
    counter = run.apparatus.counter
    reach = 4.0 * prior.standard_uncertainty + 0.3
    matches = {}
    for scan in run.scans:
        every = scan_features(run, scan)
        match = search_zero(scan, every, prior.value, reach)
        _refuse_doubled_angle(scan, every, prior.value, reach)
        if match is not None and match[1] > SIGNIFICANT:
            matches[scan.name] = match
    found: list[FittedLine] = []
    for scan in run.scans:
        if scan.name not in matches:
            continue
        zero, _ = matches[scan.name]
        fitted = fit_lines(
            scan,
            scan_features(run, scan),
            zero,
            counter.dead_time_us.value,
            counter.dead_time_model,
            absorption_edges(run),
        )
        found.extend(line for line in fitted if _sound(line, scan, zero))
    return tuple(found)


def _sound(line: FittedLine, scan: Scan, zero_deg: float) -> bool:
    """Whether a fitted line is one: significant, where it was seen, and whole inside the scan."""
    centre = line.feature.angle_deg + line.shift_deg
    inside = min(centre - scan.reading_deg[0], scan.reading_deg[-1] - centre)
    return (
        line.significance > SIGNIFICANT
        and abs(line.shift_deg - zero_deg) < min(line.fwhm_deg, FARTHEST_DEG)
        and scan.step_deg < 1.5 * line.fwhm_deg < 1.5 * WIDEST_DEG
        and inside > line.fwhm_deg
    )


def _refuse_doubled_angle(
    scan: Scan, every: tuple[Feature, ...], zero_deg: float, reach_deg: float
) -> None:
    """Refuse a scan over 2 theta.

    Lines of first order over 2 theta stand near those of second order over theta: only the
    first order can tell, where the scan covers it.
    """
    first = tuple(feature for feature in every if feature.order == 1)
    halved = replace(scan, reading_deg=0.5 * scan.reading_deg)
    if len(covered(halved, first, zero_deg, 0.2)) < 2:
        return
    doubled = search_zero(halved, first, zero_deg, 0.4)
    if doubled is None or doubled[1] < DOUBLED_SCORE:
        return
    known = first if covered(scan, first, zero_deg, 0.2) else every
    plain = search_zero(scan, known, zero_deg, reach_deg)
    if plain is None or doubled[1] > DOUBLED_RATIO * plain[1]:
        raise InputError(
            f"scan {scan.name} ({scan.file}): the characteristic lines stand at twice their "
            'glancing angle, so the column seems to hold 2 theta: put abscissa = "two_theta" '
            "under this [[scan]] in the run sheet."
        )


def select_lines(
    found: tuple[FittedLine, ...], own: set[str]
) -> tuple[tuple[FittedLine, ...], dict[int, str], tuple[str, ...]]:
    """Keep the lines of the edge scans, and those of reference scans that agree with them."""
    reasons: dict[int, str] = {}
    remarks: list[str] = []
    if not found:
        return (), reasons, ()
    sharpest = min(found, key=lambda line: line.fwhm_u_deg / line.fwhm_deg)
    for line in found:
        u = math.hypot(line.fwhm_u_deg, sharpest.fwhm_u_deg)
        strange = abs(math.log(line.fwhm_deg / sharpest.fwhm_deg)) > STRANGE_WIDTH
        if strange and abs(line.fwhm_deg - sharpest.fwhm_deg) > 3.0 * u:
            reasons[id(line)] = "its width does not fit that of the other lines"
    candidates = [line for line in found if id(line) not in reasons]
    at_home = [line for line in candidates if line.scan in own]
    basis = at_home or candidates
    shifts = np.array([line.shift_deg for line in basis])
    weights = np.array([line.shift_u_deg for line in basis]) ** -2.0
    middle = float(np.median(shifts))
    spread = 1.4826 * float(np.median(np.abs(shifts - middle)))
    used = []
    for line in candidates:
        if line.scan not in own and at_home:
            mean = float(np.average(shifts, weights=weights))
            u = math.hypot(line.shift_u_deg, float(1.0 / np.sqrt(np.sum(weights))), spread)
            if abs(line.shift_deg - mean) > REFERENCE_TOLERANCE * u:
                reasons[id(line)] = (
                    f"zero differs by {line.shift_deg - mean:+.3f}° from that of the scans "
                    "with edges"
                )
                continue
        elif len(basis) > 3 and abs(line.shift_deg - middle) > 5.0 * max(
            spread, line.shift_u_deg, 0.02
        ):
            reasons[id(line)] = "far from the zero of the other lines"
            continue
        used.append(line)
    other = {line.scan for line in candidates if id(line) in reasons and line.scan not in own}
    remarks.extend(
        f"the reference scan {name} has another zero offset than the scans with edges; its "
        "lines were not used for the zero."
        for name in sorted(other)
    )
    return tuple(used), reasons, tuple(remarks)


def line_measures(
    found: tuple[FittedLine, ...],
    used: tuple[FittedLine, ...],
    reasons: dict[int, str],
    zero: float,
    rho: float,
) -> tuple[LineMeasure, ...]:
    """Put the fitted lines beside what the angle scale expects of them."""
    kept = {id(line) for line in used}
    return tuple(
        LineMeasure(
            scan=line.scan,
            label=line.feature.label,
            order=line.feature.order,
            wavelength_pm=line.feature.group.wavelength_pm,
            wavelength_u_pm=line.feature.group.lines[0].wavelength_u_pm,
            reading_deg=line.feature.angle_deg + line.shift_deg,
            reading_u_deg=line.shift_u_deg,
            expected_deg=line.feature.angle_deg + zero + line.feature.by_spacing * rho,
            used=id(line) in kept,
            reason=reasons.get(id(line), ""),
        )
        for line in found
    )
