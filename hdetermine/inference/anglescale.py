"""The angle scale: zero offset, resolution and spacing from the characteristic lines.

Each fitted line stands at

    reading = ideal angle + zero + (d angle/d ln d) rho,

rho the relative departure of the spacing (at its temperature) from its stated value. With the
spacing as a known input the zero follows from the weighted mean, and its error is correlated
with that of the spacing. Where lines far enough apart fix rho better than its stated
uncertainty, zero and spacing are estimated together.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from hdetermine.errors import InputError
from hdetermine.inference.linefit import (
    Feature,
    FittedLine,
    covered,
    features,
    fit_lines,
    search_zero,
)
from hdetermine.inference.measurement import WAVELENGTH_SCALE
from hdetermine.physics.bragg import spacing_at
from hdetermine.records.apparatus import Apparatus, Crystal
from hdetermine.records.quantity import Quantity
from hdetermine.records.results import AngleScale, LineMeasure
from hdetermine.records.run import Run
from hdetermine.records.scan import Scan

FloatArray = NDArray[np.float64]

SIGNIFICANT = 8.0  # amplitude over its standard uncertainty
LEARNT = 0.9  # lines fix the spacing if they shrink its variance below this fraction
REFERENCE_TOLERANCE = 3.0  # in standard uncertainties, between reference and edge scans
RESOLUTION_FLOOR = 0.01  # relative; the form of the kernel is never known better
BLEND_U = 2e-5  # relative; satellites and doublet ratio against the tabulated peak


def crystal_spacing_pm(crystal: Crystal) -> float:
    """Spacing at the temperature of the run, pm."""
    return spacing_at(
        crystal.spacing_pm.value,
        crystal.temperature_C.value,
        crystal.reference_temperature_C,
        crystal.expansion_per_K.value,
    )


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
        energy_eV(run.apparatus, scan.tube_voltage_kV),
        crystal_spacing_pm(crystal),
        crystal.refraction.value,
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
        _refuse_doubled_angle(scan, every, prior.value, 0.0 if match is None else match[1])
        if match is not None and match[1] > SIGNIFICANT:
            matches[scan.name] = match
    found: list[FittedLine] = []
    for scan in run.scans:
        if scan.name not in matches:
            continue
        zero, _ = matches[scan.name]
        found.extend(
            line
            for line in fit_lines(
                scan,
                scan_features(run, scan),
                zero,
                counter.dead_time_us.value,
                counter.dead_time_model,
            )
            if line.significance > SIGNIFICANT
            and abs(line.shift_deg - zero) < line.fwhm_deg
            and 1.5 * line.fwhm_deg > scan.step_deg
        )
    return tuple(found)


def _refuse_doubled_angle(
    scan: Scan, every: tuple[Feature, ...], zero_deg: float, score: float
) -> None:
    if score > SIGNIFICANT:
        return
    halved = replace(scan, reading_deg=0.5 * scan.reading_deg)
    if len(covered(halved, every, zero_deg, 0.2)) < 2:
        return
    doubled = search_zero(halved, every, zero_deg, 0.4)
    if doubled is not None and doubled[1] > 40.0 and doubled[1] > 8.0 * max(score, 1.0):
        raise InputError(
            f"scan {scan.name} ({scan.file}): the characteristic lines stand at twice their "
            'glancing angle, so the column seems to hold 2 theta: put abscissa = "two_theta" '
            "under this [[scan]] in the run sheet."
        )


def angle_scale(run: Run) -> AngleScale:
    """Zero, resolution and spacing of a run, from its lines or from what was stated.

    Parameters
    ----------
    run : Run
        The run.

    Returns
    -------
    AngleScale
        ``resolution.standard_uncertainty`` is infinite if neither lines nor the run sheet
        tell it; the edges must then find it.
    """
    found = find_lines(run)
    own = {scan.name for scan in run.scans if scan.edge}
    used, reasons, remarks = _select(found, own)
    apparatus = run.apparatus
    crystal = apparatus.crystal
    if not used:
        return _without_lines(apparatus, _measures(found, used, reasons, 0.0, 0.0), remarks)

    shift = np.array([line.shift_deg for line in used])
    variance = np.array([line.shift_u_deg for line in used]) ** 2
    by_spacing = np.array([line.feature.by_spacing for line in used])
    by_wavelength = np.array([line.feature.by_wavelength for line in used])
    gradient = _spacing_gradient(crystal)
    prior_variance = float(np.sum((gradient * _spacing_u(crystal)) ** 2))

    weight = 1.0 / variance
    zero_known = float(np.average(shift, weights=weight))
    chi2 = float(np.sum(weight * (shift - zero_known) ** 2))
    if len(used) > 1:
        inflation = max(chi2 / (len(used) - 1), 1.0)
        if inflation > 1.0 and len(used) > 2:
            remarks = (*remarks, _scatter_remark(inflation))
        weight = weight / inflation
    design = np.stack([np.ones_like(shift), by_spacing], axis=1)
    information = design.T @ (weight[:, np.newaxis] * design)
    free = _free_fit(information, design.T @ (weight * shift))
    information[1, 1] += 1.0 / max(prior_variance, 1e-16)
    posterior = np.linalg.inv(information)
    learnt = posterior[1, 1] < LEARNT * prior_variance
    if learnt:
        zero, rho = posterior @ (design.T @ (weight * shift))
        covariance = posterior
        zero_weights = posterior[0] @ (design * weight[:, np.newaxis]).T
    else:
        zero, rho = zero_known, 0.0
        zero_weights = weight / np.sum(weight)
        slope = float(zero_weights @ by_spacing)
        covariance = np.array(
            [
                [1.0 / np.sum(weight) + slope**2 * prior_variance, -slope * prior_variance],
                [-slope * prior_variance, prior_variance],
            ]
        )
    zero_quantity = replace(
        apparatus.goniometer.zero_deg,
        value=float(zero),
        standard_uncertainty=float(np.sqrt(covariance[0, 0])),
        distribution="normal",
        evaluation="A",
        degrees_of_freedom=math.inf,
        source="characteristic lines",
        is_default=False,
    )
    inputs, correlation = _joint(crystal, zero_quantity, gradient, covariance, float(rho))
    scale = Quantity(
        name=WAVELENGTH_SCALE,
        symbol="s_λ",
        value=1.0,
        standard_uncertainty=_wavelength_u(used, weight),
        unit="1",
        source="NIST SRD 128 (Deslattes et al. 2003)",
    )
    inputs = (*inputs, scale)
    size = len(inputs)
    whole = np.eye(size)
    whole[: size - 1, : size - 1] = correlation
    resolution, kernel = _resolution(apparatus, used)
    return AngleScale(
        zero=zero_quantity,
        resolution=resolution,
        kernel=kernel,
        inputs=inputs,
        correlation=whole,
        lines=_measures(found, used, reasons, float(zero), float(rho)),
        zero_from="lines, spacing fitted too" if learnt else "lines, spacing as stated",
        resolution_from="lines",
        free_spacing_pm=None if free is None else crystal.spacing_pm.value * (1.0 + free[0]),
        free_spacing_u_pm=None if free is None else crystal.spacing_pm.value * free[1],
        zero_by_wavelength_deg=-float(zero_weights @ by_wavelength),
        remarks=remarks,
    )


def _scatter_remark(inflation: float) -> str:
    return (
        f"the zero offsets of the lines scatter {math.sqrt(inflation):.1f} times more than "
        "counting explains; their uncertainty was widened by that factor."
    )


def _select(
    found: tuple[FittedLine, ...], own: set[str]
) -> tuple[tuple[FittedLine, ...], dict[int, str], tuple[str, ...]]:
    """Keep the lines of the edge scans, and those of reference scans that agree with them."""
    reasons: dict[int, str] = {}
    remarks: list[str] = []
    at_home = [line for line in found if line.scan in own]
    basis = at_home or list(found)
    if not basis:
        return (), reasons, ()
    shifts = np.array([line.shift_deg for line in basis])
    weights = np.array([line.shift_u_deg for line in basis]) ** -2.0
    middle = float(np.median(shifts))
    spread = 1.4826 * float(np.median(np.abs(shifts - middle)))
    used = []
    for line in found:
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
    other = {line.scan for line in found if id(line) in reasons and line.scan not in own}
    remarks.extend(
        f"the reference scan {name} has another zero offset than the scans with edges; its "
        "lines were not used for the zero."
        for name in sorted(other)
    )
    return tuple(used), reasons, tuple(remarks)


def _spacing_u(crystal: Crystal) -> FloatArray:
    return np.array(
        [
            crystal.spacing_pm.standard_uncertainty,
            crystal.temperature_C.standard_uncertainty,
            crystal.expansion_per_K.standard_uncertainty,
        ]
    )


def _spacing_gradient(crystal: Crystal) -> FloatArray:
    """Relative spacing by (spacing, temperature, expansion coefficient)."""
    warmth = crystal.temperature_C.value - crystal.reference_temperature_C
    return np.array([1.0 / crystal.spacing_pm.value, crystal.expansion_per_K.value, warmth])


def _free_fit(information: FloatArray, moment: FloatArray) -> tuple[float, float] | None:
    """Relative departure of the spacing and its u with no stated value, or None."""
    if np.linalg.cond(information) > 1e12:
        return None
    covariance = np.linalg.inv(information)
    rho, u = float((covariance @ moment)[1]), float(np.sqrt(covariance[1, 1]))
    return (rho, u) if u < 0.01 else None


def _joint(
    crystal: Crystal, zero: Quantity, gradient: FloatArray, covariance: FloatArray, rho: float
) -> tuple[tuple[Quantity, ...], FloatArray]:
    """Zero, spacing, temperature and expansion with their correlation."""
    parts = (crystal.spacing_pm, crystal.temperature_C, crystal.expansion_per_K)
    prior = np.diag(_spacing_u(crystal) ** 2)
    towards = prior @ gradient
    total = float(gradient @ towards)
    whole = np.zeros((4, 4))
    whole[0, 0] = covariance[0, 0]
    whole[1:, 1:] = prior
    values = np.array([part.value for part in parts])
    if total > 0.0:
        whole[1:, 1:] = prior - np.outer(towards, towards) / total * (1 - covariance[1, 1] / total)
        whole[0, 1:] = whole[1:, 0] = towards / total * covariance[0, 1]
        values = values + towards / total * rho
    u = np.sqrt(np.maximum(np.diag(whole), 0.0))
    correlation = np.eye(4)
    for i in range(4):
        for j in range(4):
            if i != j and u[i] > 0.0 and u[j] > 0.0:
                correlation[i, j] = whole[i, j] / (u[i] * u[j])
    inputs = [zero]
    for part, value, uncertainty in zip(parts, values, u[1:], strict=True):
        changed = uncertainty < 0.95 * part.standard_uncertainty
        inputs.append(
            replace(
                part,
                value=float(value),
                standard_uncertainty=float(uncertainty),
                distribution="normal" if changed else part.distribution,
            )
        )
    return tuple(inputs), correlation


def _wavelength_u(used: tuple[FittedLine, ...], weight: FloatArray) -> float:
    """Relative uncertainty of the reference wavelengths, taken as one common error."""
    relative = [
        line.feature.group.lines[0].wavelength_u_pm / line.feature.group.lines[0].wavelength_pm
        for line in used
    ]
    return math.hypot(float(np.average(relative, weights=weight)), BLEND_U)


def _resolution(
    apparatus: Apparatus, used: tuple[FittedLine, ...]
) -> tuple[Quantity, Quantity]:
    width = np.array([line.fwhm_deg for line in used])
    weight = np.array([line.fwhm_u_deg for line in used]) ** -2.0
    mean = float(np.average(width, weights=weight))
    chi2 = float(np.sum(weight * (width - mean) ** 2))
    inflation = max(chi2 / (len(used) - 1), 1.0) if len(used) > 1 else 1.0
    u = math.hypot(math.sqrt(inflation / float(np.sum(weight))), RESOLUTION_FLOOR * mean)
    resolution = resolution_quantity(mean, u, "characteristic lines")
    form = np.array([line.triangular_fraction for line in used])
    form_weight = np.array([line.triangular_fraction_u for line in used]) ** -2.0
    prior = apparatus.goniometer.kernel_triangular_fraction
    # Every fit carried the prior of the kernel; count it once, not once a line.
    prior_weight = 1.0 / max(prior.standard_uncertainty, 1e-6) ** 2
    surplus = np.maximum(form_weight - prior_weight, 0.0)
    total = float(np.sum(surplus)) + prior_weight
    value = (float(np.sum(surplus * form)) + prior_weight * prior.value) / total
    kernel_u = math.hypot(math.sqrt(1.0 / total), 0.05)
    if kernel_u > LEARNT * prior.standard_uncertainty:
        return resolution, prior
    kernel = replace(
        prior,
        value=min(max(value, 0.0), 1.0),
        standard_uncertainty=kernel_u,
        distribution="normal",
        evaluation="A",
        source="characteristic lines",
        is_default=False,
    )
    return resolution, kernel


def resolution_quantity(value: float, u: float, source: str) -> Quantity:
    """The resolution as an input of the budget."""
    return Quantity(
        name="goniometer.resolution_deg",
        symbol="w",
        value=value,
        standard_uncertainty=u,
        unit="°",
        evaluation="A",
        source=source,
    )


def _without_lines(
    apparatus: Apparatus, lines: tuple[LineMeasure, ...], remarks: tuple[str, ...]
) -> AngleScale:
    crystal, goniometer = apparatus.crystal, apparatus.goniometer
    stated = goniometer.resolution_deg
    resolution = stated or resolution_quantity(0.25, math.inf, "not known")
    inputs = (
        goniometer.zero_deg,
        crystal.spacing_pm,
        crystal.temperature_C,
        crystal.expansion_per_K,
    )
    return AngleScale(
        zero=goniometer.zero_deg,
        resolution=resolution,
        kernel=goniometer.kernel_triangular_fraction,
        inputs=inputs,
        correlation=np.eye(len(inputs)),
        lines=lines,
        zero_from="run sheet",
        resolution_from="run sheet" if stated else "edges",
        remarks=(*remarks, "no characteristic line was found in the scans: the zero offset is "
                 "the one stated in the run sheet."),
    )


def _measures(
    found: tuple[FittedLine, ...],
    used: tuple[FittedLine, ...],
    reasons: dict[int, str],
    zero: float,
    rho: float,
) -> tuple[LineMeasure, ...]:
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
