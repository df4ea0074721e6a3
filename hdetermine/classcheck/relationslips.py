"""Slips in Bragg's law and in the relation between cutoffs and voltages."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hdetermine.classcheck.arithmetic import Variant, line_through_origin
from hdetermine.classcheck.evidence import Evidence
from hdetermine.classcheck.slip import Slip, Wording
from hdetermine.physics.constants import SPEED_OF_LIGHT_M_PER_S
from hdetermine.physics.crystals import KINDS

FloatArray = NDArray[np.float64]

LEAST_RELATIVE_OFFSET = 0.002
LEAST_SPACING_DIFFERENCE = 0.005
"""Spacings closer than this are the same crystal in another table."""
BENCH_CRYSTALS = ("LiF", "NaCl", "KCl", "KBr")

WORDINGS: dict[str, Wording] = {
    "double_angle": Wording(
        "2θ used as θ",
        "The counter angle 2θ in place of the glancing angle θ gives this number.",
        "Bragg's law takes the glancing angle, half of the angle through which the beam is "
        "deflected.",
    ),
    "half_angle": Wording(
        "θ halved as if it were 2θ",
        "Half of the glancing angle θ in place of θ gives this number.",
        "The readings already are glancing angles; nothing is to be halved.",
    ),
    "degrees_as_radians": Wording(
        "degrees taken as radians",
        "The sine of the angle in degrees, taken as if it were in radians, gives this number.",
        "Check the angle mode of the calculator; the sine of most programs expects radians.",
    ),
    "factor_two": Wording(
        "factor 2 missing in Bragg's law, or n = 2 put for the first order",
        "λ = d sin θ in place of λ = 2 d sin θ gives this number; so does n = 2 for a limit "
        "read in first order.",
        "Bragg's law is n λ = 2 d sin θ with the spacing d of the planes, and n = 1 here.",
    ),
    "lattice_parameter": Wording(
        "lattice parameter used for the spacing",
        "The edge of the unit cell in place of the spacing of the planes gives this number.",
        "The spacing is the lattice parameter over the root of the sum of the squared indices: for "
        "the 200 planes half of it.",
    ),
    "other_crystal": Wording(
        "spacing of another crystal",
        "The spacing of another crystal gives this number.",
        "Compare the spacing used with the crystal that was on the spectrometer.",
    ),
    "shifted_voltages": Wording(
        "voltages shifted by one row",
        "Each cutoff paired with the voltage of the neighbouring row gives this number.",
        "Compare, row by row, the voltage in the table with the file or the header of its scan.",
    ),
    "wavelength_against_voltage": Wording(
        "λ fitted against U instead of 1/U",
        "The slope of a straight line through λ against U gives this number.",
        "λ is inversely proportional to U: the straight line is λ against 1/U.",
    ),
    "inverted_slope": Wording(
        "slope inverted",
        "The reciprocal of the slope gives this number.",
        "Check by its unit whether the slope is hc/e or e/(hc), h/e or e/h.",
    ),
    "forced_origin": Wording(
        "line forced through the origin with an offset present",
        "The displayed voltages without the supply's offset, and a line through the origin, give "
        "this number.",
        "With an offset present the line needs its intercept, or the offset belongs in U.",
    ),
}


def relation_slips(evidence: Evidence) -> list[Slip]:
    """Make the slips of Bragg's law and of the relation for one group's data."""
    slips = [
        Slip("double_angle", 2.0, (Variant(called=lambda angle: 2.0 * angle),)),
        Slip("half_angle", 1.0, (Variant(called=lambda angle: 0.5 * angle),)),
        Slip("degrees_as_radians", 1.0, (Variant(sine_of=np.degrees),)),
        Slip("factor_two", 2.0, (Variant(wavelength_factor=0.5),)),
        Slip("inverted_slope", 1.0, _inverted()),
    ]
    if evidence.lattice_parameter_pm is not None:
        ratio = evidence.lattice_parameter_pm / evidence.spacing_pm
        slips.append(Slip("lattice_parameter", 2.0, (Variant(wavelength_factor=ratio),)))
    # Two entries: the crystals of teaching laboratories are mistaken for each other far more
    # often than for the others.
    for weight, bench in ((1.5, True), (0.3, False)):
        crystals = _crystals(evidence, bench)
        if crystals:
            slips.append(Slip("other_crystal", weight, crystals))
    if evidence.size >= 3:
        slips.append(Slip("shifted_voltages", 1.5, _shifts(evidence)))
        slips.append(Slip("wavelength_against_voltage", 1.0, _against_voltage()))
    offset = evidence.displayed_kV - evidence.supplied_kV
    if np.max(np.abs(offset / evidence.supplied_kV)) > LEAST_RELATIVE_OFFSET:
        forced = Variant(voltage_kV=evidence.displayed_kV, combine=line_through_origin)
        slips.append(Slip("forced_origin", 1.0, (forced,)))
    return slips


def _crystals(evidence: Evidence, bench: bool) -> tuple[Variant, ...]:
    variants = []
    for kind in KINDS:
        if (kind.material in BENCH_CRYSTALS) != bench:
            continue
        for reflection, spacing in kind.spacings_pm.items():
            ratio = spacing / evidence.spacing_pm
            if abs(ratio - 1.0) > LEAST_SPACING_DIFFERENCE:
                note = f"{kind.material} ({reflection}), d = {spacing:.1f} pm"
                variants.append(Variant(note, wavelength_factor=ratio))
    return tuple(variants)


def _shifts(evidence: Evidence) -> tuple[Variant, ...]:
    """Shifted in the table (cutoffs move) or in the fit alone (voltages move), both ways."""
    rows = np.arange(evidence.size)
    variants = []
    for step, words in ((1, "next higher"), (-1, "next lower")):
        for cyclic in (False, True):
            order = rows - step
            inside = (order >= 0) & (order < evidence.size)
            wrapped = order % evidence.size
            note = f"each cutoff stands at the {words} voltage"
            if cyclic:
                note += ", the last one at the other end"
            variants.append(
                Variant(note, order=wrapped if cyclic else np.where(inside, wrapped, -1))
            )
            # The cutoff of row i is used with the voltage of row i + step.
            source = (rows + step) % evidence.size
            valid = (rows + step >= 0) & (rows + step < evidence.size)
            voltage = evidence.supplied_kV[source]
            variants.append(
                Variant(note, voltage_kV=voltage if cyclic else np.where(valid, voltage, np.nan))
            )
    return tuple(variants)


def _against_voltage() -> tuple[Variant, ...]:
    def slope(wavelength: FloatArray, voltage: FloatArray) -> FloatArray:
        x = voltage - np.mean(voltage)
        return np.asarray(wavelength @ x / (x @ x))

    return (
        # a slope of 1 pm/kV = 1e-15 m/V taken for one of 1e-15 V m, or for 1 pm kV = 1e-9 V m
        Variant("slope in m/V put for V m", combine=slope, planck_factor=1e-6),
        Variant("slope in pm/kV put for pm kV", combine=slope),
    )


def _inverted() -> tuple[Variant, ...]:
    """Reciprocals of hc/e and of h/e, in SI units and in pm kV; h would be (e/c) times hc/e."""
    return (
        # 1/(1 pm kV) = 1e9 /(V m), which stands for 1e18 pm kV
        Variant("e/(hc) put for hc/e", invert=True, planck_factor=1e18),
        Variant("e/(hc) in 1/(pm kV) put for hc/e in pm kV", invert=True),
        # e times (e/h) = e c/(hc/e): c squared more than e/c times the reciprocal
        Variant("e/h put for h/e", invert=True, planck_factor=1e18 * SPEED_OF_LIGHT_M_PER_S**2),
    )
