"""A claim beside the re-analysis: difference, E_n, and what its uncertainty is worth."""

from __future__ import annotations

import math
from dataclasses import dataclass

from hdetermine.classcheck.alignment import VOLTAGE_MATCH_kV
from hdetermine.classcheck.claim import Claim
from hdetermine.classcheck.evidence import Evidence
from hdetermine.physics.reference import PLANCK_CONSTANT_J_S

SMALL_RATIO, LARGE_RATIO = 1.0 / 3.0, 5.0
"""Claimed over honest uncertainty: outside, it deserves a line of its own."""


@dataclass(frozen=True, slots=True)
class CutoffLine:
    """One voltage: what the data say and what is claimed; nan where there is nothing.

    Angles are true glancing angles, degrees; wavelengths in pm.
    """

    tube_voltage_kV: float
    angle_deg: float = math.nan
    wavelength_pm: float = math.nan
    standard_uncertainty_pm: float = math.nan
    claimed_angle_deg: float = math.nan
    claimed_wavelength_pm: float = math.nan

    @property
    def relative_difference(self) -> float:
        """Claim over data minus one; of the wavelength, or else of the angle."""
        if math.isfinite(self.claimed_wavelength_pm):
            return self.claimed_wavelength_pm / self.wavelength_pm - 1.0
        return self.claimed_angle_deg / self.angle_deg - 1.0


@dataclass(frozen=True, slots=True)
class PlanckComparison:
    """The claimed h against the re-analysis and the SI value; nan where something is missing.

    Attributes
    ----------
    claimed_J_s, claimed_u_J_s : float
        Claim and its standard uncertainty.
    relative_difference : float
        Claim over re-analysis, minus one.
    deviation_in_u : float
        The same in combined standard uncertainties of both.
    relative_deviation : float
        Claim over SI value, minus one.
    E_n : float
        (claim - SI value)/U with U = 2 u (ISO 13528:2022, 9.7; the SI value is exact; clause
        number from memory).
    uncertainty_ratio : float
        Claimed relative standard uncertainty over that of the re-analysis.
    """

    claimed_J_s: float
    claimed_u_J_s: float
    relative_difference: float
    deviation_in_u: float
    relative_deviation: float
    E_n: float
    uncertainty_ratio: float

    @property
    def uncertainty_sentence(self) -> str:
        """What the claimed uncertainty is worth; empty if it is all right."""
        ratio = self.uncertainty_ratio
        if self.claimed_u_J_s == 0.0:
            return "The stated uncertainty is zero, which no measurement has."
        if not math.isfinite(ratio):
            return ""
        if ratio < SMALL_RATIO:
            return (
                f"The stated uncertainty is {1.0 / ratio:.2g} times smaller than these data "
                "allow: spacing, zero, voltage scale and the shape of the limit belong in it, "
                "not only the scatter about the line."
            )
        if ratio > LARGE_RATIO:
            return f"The stated uncertainty is {ratio:.2g} times larger than these data ask for."
        return ""


def compare_planck(claim: Claim, planck_J_s: float, planck_u_J_s: float) -> PlanckComparison:
    """Compare a claimed h.

    Parameters
    ----------
    claim : Claim
        With a value of h.
    planck_J_s, planck_u_J_s : float
        Re-analysis and its standard uncertainty; nan if there is none.

    Returns
    -------
    PlanckComparison
    """
    value, u = claim.value_J_s, claim.standard_uncertainty_J_s
    difference = value - planck_J_s
    combined = math.hypot(planck_u_J_s, u if math.isfinite(u) else 0.0)
    deviation = value - PLANCK_CONSTANT_J_S
    own = planck_u_J_s / planck_J_s
    return PlanckComparison(
        claimed_J_s=value,
        claimed_u_J_s=u,
        relative_difference=difference / planck_J_s,
        deviation_in_u=difference / combined,
        relative_deviation=deviation / PLANCK_CONSTANT_J_S,
        E_n=deviation / (2.0 * u) if u > 0.0 else math.nan,
        uncertainty_ratio=claim.relative_u / own,
    )


def compare_cutoffs(claim: Claim | None, evidence: Evidence | None) -> tuple[CutoffLine, ...]:
    """Set claimed cutoffs beside those of the data, by rising voltage."""
    lines: dict[float, CutoffLine] = {}
    if evidence is not None:
        relative_zero = _relative_zero_u(evidence)
        for i, voltage in enumerate(evidence.displayed_kV.tolist()):
            wavelength = float(evidence.wavelength_pm[i])
            u = math.hypot(float(evidence.own_u[i]), relative_zero[i]) * wavelength
            lines[voltage] = CutoffLine(voltage, float(evidence.angle_deg[i]), wavelength, u)
    for cutoff in () if claim is None else claim.cutoffs:
        near = [kV for kV in lines if abs(kV - cutoff.tube_voltage_kV) <= VOLTAGE_MATCH_kV]
        voltage = near[0] if near else cutoff.tube_voltage_kV
        line = lines.get(voltage, CutoffLine(voltage))
        angle, length = cutoff.glancing_angle_deg, cutoff.wavelength_pm
        lines[voltage] = CutoffLine(
            voltage,
            line.angle_deg,
            line.wavelength_pm,
            line.standard_uncertainty_pm,
            math.nan if angle is None else angle.value,
            math.nan if length is None else length.value,
        )
    return tuple(lines[voltage] for voltage in sorted(lines))


def _relative_zero_u(evidence: Evidence) -> list[float]:
    return [
        math.radians(evidence.zero_u_deg) / math.tan(math.radians(angle))
        for angle in evidence.angle_deg.tolist()
    ]
