"""A claim without data: do its cutoffs give its h, and what would produce its numbers?"""

from __future__ import annotations

import math

import numpy as np

from hdetermine.classcheck.alignment import align
from hdetermine.classcheck.claim import Claim
from hdetermine.classcheck.evidence import Evidence, effective_spacing_pm, lattice_parameter_pm
from hdetermine.classcheck.explanation import Explanation, explain
from hdetermine.physics.bragg import glancing_angle_deg
from hdetermine.physics.constants import PLANCK_PER_SLOPE
from hdetermine.physics.reference import PLANCK_CONSTANT_J_S
from hdetermine.records.apparatus import Crystal

ASSUMED_SPACING_PM = 1000.0
"""Where no crystal is known, wavelengths alone are compared and the spacing drops out."""
FORESEEN_U = 0.01
NEED_THE_CRYSTAL = frozenset(
    ("double_angle", "half_angle", "degrees_as_radians", "other_crystal", "lattice_parameter")
)
USUAL_VOLTAGES_kV = (20.0, 25.0, 30.0, 35.0)


def check_alone(claim: Claim, crystal: Crystal | None) -> Explanation:
    """Check a claim against itself, and then against what any such run has to give.

    Parameters
    ----------
    claim : Claim
        The claim.
    crystal : Crystal or None
        The crystal of the class, if a shared run sheet tells it.

    Returns
    -------
    Explanation
        Agrees if the claimed cutoffs give the claimed h. Slips between cutoffs and h come first;
        where there is none, slips that explain the numbers against the limits foreseen by the
        SI value.
    """
    own = _evidence_of(claim, crystal)
    if own is None or claim.h is None:
        return Explanation(False, False, False)
    skipped = frozenset() if crystal is not None else NEED_THE_CRYSTAL
    inner = explain(align(claim, own), claim.unit, against_itself=True, skipped=skipped)
    if not inner.comparable or inner.slips:
        return inner
    voltages = own.displayed_kV
    outer = explain(align(claim, _foreseen(voltages, crystal)), claim.unit, skipped=skipped)
    return Explanation(True, inner.agrees, inner.ordinary, outer.slips)


def planck_of_cutoffs_J_s(claim: Claim, crystal: Crystal | None) -> float:
    """Work out h from the claim's own cutoffs, J s; nan if they do not tell."""
    own = _evidence_of(claim, crystal)
    return math.nan if own is None else own.planck_J_s


def explain_number_alone(claim: Claim, crystal: Crystal | None) -> Explanation:
    """Explain a claim of h without cutoffs, and without data, against the SI value."""
    evidence = _foreseen(np.array(USUAL_VOLTAGES_kV), crystal)
    skipped = frozenset() if crystal is not None else NEED_THE_CRYSTAL
    found = explain(align(claim, evidence), claim.unit, skipped=skipped)
    return Explanation(False, False, found.ordinary, found.slips)


def _evidence_of(claim: Claim, crystal: Crystal | None) -> Evidence | None:
    """Take the claim's cutoffs as if they had been measured."""
    spacing = ASSUMED_SPACING_PM if crystal is None else effective_spacing_pm(crystal)
    voltages, angles, own_u = [], [], []
    for cutoff in claim.cutoffs:
        angle, length = cutoff.glancing_angle_deg, cutoff.wavelength_pm
        if angle is not None and crystal is not None:
            degrees, u = angle.value, angle.rounding_u / angle.value
        elif length is not None:
            degrees = float(glancing_angle_deg(length.value, spacing))
            u = length.rounding_u / length.value
        else:
            continue
        if math.isfinite(degrees) and degrees < 90.0:
            voltages.append(cutoff.tube_voltage_kV)
            angles.append(degrees)
            own_u.append(u)
    if not voltages:
        return None
    return _evidence(np.array(voltages), np.array(angles), np.array(own_u), spacing, crystal)


def _foreseen(voltages: np.ndarray[tuple[int], np.dtype[np.float64]], crystal: Crystal | None) -> (
    Evidence
):  # fmt: skip
    """Limits that the SI value foresees for the displayed voltages."""
    spacing = ASSUMED_SPACING_PM if crystal is None else effective_spacing_pm(crystal)
    wavelength = PLANCK_CONSTANT_J_S / PLANCK_PER_SLOPE / voltages
    angles = glancing_angle_deg(wavelength, spacing)
    return _evidence(voltages, angles, np.full(voltages.size, FORESEEN_U), spacing, crystal)


def _evidence(
    voltages: np.ndarray[tuple[int], np.dtype[np.float64]],
    angles: np.ndarray[tuple[int, ...], np.dtype[np.float64]],
    own_u: np.ndarray[tuple[int], np.dtype[np.float64]],
    spacing: float,
    crystal: Crystal | None,
) -> Evidence:
    product = 2.0 * spacing * np.sin(np.radians(angles)) * voltages
    planck = float(np.mean(product)) * PLANCK_PER_SLOPE
    return Evidence(
        displayed_kV=voltages,
        supplied_kV=voltages,
        angle_deg=angles,
        own_u=own_u,
        zero_deg=0.0,
        zero_u_deg=0.0,
        spacing_pm=spacing,
        lattice_parameter_pm=None if crystal is None else lattice_parameter_pm(crystal, spacing),
        material="" if crystal is None else crystal.material,
        planck_J_s=planck,
        planck_u_J_s=FORESEEN_U * planck,
        last_deg=np.full(voltages.size, 90.0),
    )
