"""The spacing at its temperature, and how the lines tie it to the zero offset."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from hdetermine.physics.bragg import spacing_at
from hdetermine.records.apparatus import Crystal
from hdetermine.records.quantity import Quantity

FloatArray = NDArray[np.float64]


def crystal_spacing_pm(crystal: Crystal) -> float:
    """Spacing at the temperature of the run, pm."""
    return spacing_at(
        crystal.spacing_pm.value,
        crystal.temperature_C.value,
        crystal.reference_temperature_C,
        crystal.expansion_per_K.value,
    )


def spacing_u(crystal: Crystal) -> FloatArray:
    """Give the standard uncertainties of (spacing, temperature, expansion coefficient)."""
    return np.array(
        [
            crystal.spacing_pm.standard_uncertainty,
            crystal.temperature_C.standard_uncertainty,
            crystal.expansion_per_K.standard_uncertainty,
        ]
    )


def spacing_gradient(crystal: Crystal) -> FloatArray:
    """Relative spacing by (spacing, temperature, expansion coefficient)."""
    warmth = crystal.temperature_C.value - crystal.reference_temperature_C
    return np.array([1.0 / crystal.spacing_pm.value, crystal.expansion_per_K.value, warmth])


def free_fit(
    design: FloatArray, shift: FloatArray, weight: FloatArray
) -> tuple[float, float] | None:
    """Fit zero and spacing without the stated value of the spacing.

    Parameters
    ----------
    design : ndarray, shape (n, 2)
        Derivatives of the lines' shifts by zero and relative spacing.
    shift, weight : ndarray, shape (n,)
        Shifts, degrees, and their inverse variances.

    Returns
    -------
    (float, float) or None
        Relative departure of the spacing and its standard uncertainty, widened by the scatter of
        the lines about the fit; None where the lines do not tell it.
    """
    information = design.T @ (weight[:, np.newaxis] * design)
    if np.linalg.cond(information) > 1e12:
        return None
    covariance = np.linalg.inv(information)
    best = covariance @ (design.T @ (weight * shift))
    freedom = shift.size - 2
    chi2 = float(weight @ (shift - design @ best) ** 2)
    inflation = max(chi2 / freedom, 1.0) if freedom > 0 else 1.0
    u = float(np.sqrt(covariance[1, 1] * inflation))
    return (float(best[1]), u) if u < 0.01 else None


def joint_inputs(
    crystal: Crystal, zero: Quantity, gradient: FloatArray, covariance: FloatArray, rho: float
) -> tuple[tuple[Quantity, ...], FloatArray]:
    """Zero, spacing, temperature and expansion with their correlation."""
    parts = (crystal.spacing_pm, crystal.temperature_C, crystal.expansion_per_K)
    prior = np.diag(spacing_u(crystal) ** 2)
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
