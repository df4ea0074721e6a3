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

from hdetermine.inference.linefit import KERNEL_CENTRE, KERNEL_U, WIDEST_FORM, FittedLine
from hdetermine.inference.linesearch import find_lines, line_measures, select_lines
from hdetermine.inference.measurement import WAVELENGTH_SCALE
from hdetermine.inference.spacing import free_fit, joint_inputs, spacing_gradient, spacing_u
from hdetermine.records.apparatus import Apparatus
from hdetermine.records.quantity import Quantity
from hdetermine.records.results import AngleScale, LineMeasure
from hdetermine.records.run import Run

FloatArray = NDArray[np.float64]

NOTABLE_SCATTER = 2.0  # chi-square per degree of freedom
LEARNT = 0.9  # lines fix the spacing if they shrink its variance below this fraction
FORM_FLOOR = 0.003  # of the width: no line stands nearer to its place than its form is known
RESOLUTION_FLOOR = 0.01  # relative; the form of the kernel is never known better
FLAT_TOP = 0.15  # of a step: a box may stand anywhere between two steps, and nothing shows it
BLEND_U = 2e-5  # relative; satellites and doublet ratio against the tabulated peak


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
    used, reasons, remarks = select_lines(found, own)
    apparatus = run.apparatus
    crystal = apparatus.crystal
    if not used:
        return _without_lines(apparatus, line_measures(found, used, reasons, 0.0, 0.0), remarks)

    shift = np.array([line.shift_deg for line in used])
    variance = np.array([line.shift_u_deg for line in used]) ** 2
    by_spacing = np.array([line.feature.by_spacing for line in used])
    by_wavelength = np.array([line.feature.by_wavelength for line in used])
    gradient = spacing_gradient(crystal)
    prior_variance = float(np.sum((gradient * spacing_u(crystal)) ** 2))

    design = np.stack([np.ones_like(shift), by_spacing], axis=1)
    free = free_fit(design, shift, 1.0 / variance)
    inflation = _inflation(design, shift, 1.0 / variance, max(prior_variance, 1e-16))
    if inflation > NOTABLE_SCATTER and len(used) > 2:
        remarks = (*remarks, _scatter_remark(inflation))
    weight = 1.0 / (variance * inflation)
    zero_known = float(np.average(shift, weights=weight))
    information = design.T @ (weight[:, np.newaxis] * design)
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
    width = float(np.average([line.fwhm_deg for line in used], weights=weight))
    resolution, kernel = _resolution(apparatus, used)
    boxed = max(kernel.value - 1.0, 0.0)
    covariance[0, 0] += (FORM_FLOOR * width) ** 2
    covariance[0, 0] += (boxed * FLAT_TOP * apparatus.goniometer.step_deg) ** 2
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
    inputs, correlation = joint_inputs(crystal, zero_quantity, gradient, covariance, float(rho))
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
    return AngleScale(
        zero=zero_quantity,
        resolution=resolution,
        kernel=kernel,
        inputs=inputs,
        correlation=whole,
        lines=line_measures(found, used, reasons, float(zero), float(rho)),
        zero_from="lines, spacing fitted too" if learnt else "lines, spacing as stated",
        resolution_from="lines",
        free_spacing_pm=None if free is None else crystal.spacing_pm.value * (1.0 + free[0]),
        free_spacing_u_pm=None if free is None else crystal.spacing_pm.value * free[1],
        zero_by_wavelength_deg=-float(zero_weights @ by_wavelength),
        remarks=remarks,
    )


def _inflation(
    design: FloatArray, shift: FloatArray, weight: FloatArray, prior_variance: float
) -> float:
    """Chi-square per degree of freedom of the lines and the stated spacing; at least one."""
    if shift.size < 2:
        return 1.0
    information = design.T @ (weight[:, np.newaxis] * design)
    information[1, 1] += 1.0 / prior_variance
    best = np.linalg.solve(information, design.T @ (weight * shift))
    chi2 = float(weight @ (shift - design @ best) ** 2) + best[1] ** 2 / prior_variance
    return max(float(chi2) / (shift.size - 1), 1.0)


def _scatter_remark(inflation: float) -> str:
    return (
        f"the zero offsets of the lines scatter {math.sqrt(inflation):.1f} times more than "
        "counting explains; their uncertainty was widened by that factor."
    )


def _wavelength_u(used: tuple[FittedLine, ...], weight: FloatArray) -> float:
    """Relative uncertainty of the reference wavelengths, taken as one common error."""
    relative = [
        line.feature.group.lines[0].wavelength_u_pm / line.feature.group.lines[0].wavelength_pm
        for line in used
    ]
    return math.hypot(float(np.average(relative, weights=weight)), BLEND_U)


def _resolution(apparatus: Apparatus, used: tuple[FittedLine, ...]) -> tuple[Quantity, Quantity]:
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
    # Every fit carried a prior of the kernel: take it out, and count that of the run sheet once.
    carried = (KERNEL_U * np.array([line.misfit for line in used])) ** -2.0
    surplus = np.maximum(form_weight - carried, 0.0)
    told = np.where(surplus > 0.0, form_weight * form - carried * KERNEL_CENTRE, 0.0)
    prior_weight = 1.0 / max(prior.standard_uncertainty, 1e-6) ** 2
    total = float(np.sum(surplus)) + prior_weight
    value = (float(np.sum(told)) + prior_weight * prior.value) / total
    kernel_u = math.hypot(math.sqrt(1.0 / total), 0.05)
    if kernel_u > LEARNT * prior.standard_uncertainty:
        return resolution, prior
    kernel = replace(
        prior,
        value=min(max(value, 0.0), WIDEST_FORM),
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
        remarks=(
            *remarks,
            "no characteristic line was found in the scans: the zero offset is "
            "the one stated in the run sheet.",
        ),
    )
