"""Slips of reading: another point of the spectrum, or an uncorrected scale."""

from __future__ import annotations

import numpy as np

from hdetermine.classcheck.arithmetic import Variant
from hdetermine.classcheck.evidence import Evidence
from hdetermine.classcheck.slip import Slip, Wording

LEAST_RELATIVE_SHIFT = 0.002
"""A neglect that moves every wavelength by less can not be seen in a claim."""

WORDINGS: dict[str, Wording] = {
    "straight_line_crossing": Wording(
        "straight-line crossing taken as the limit",
        "A straight line through the first rising points, followed down to the axis or to the "
        "background, crosses where this claim puts the limit.",
        "The slits smear the limit, so the rise begins before it: the crossing reads about 2 % "
        "too short, always the same way, unless the smearing is part of the fit.",
    ),
    "first_rising_point": Wording(
        "first rising point taken as the limit",
        "The first point that stands out from the background lies where this claim puts the limit.",
        "The slits smear the limit, so counts rise before it: the first rising point reads "
        "several percent too short.",
    ),
    "maximum": Wording(
        "maximum of the continuum read instead of the limit",
        "The maximum of the continuum lies where this claim puts the limit.",
        "The limit is where the continuum begins, at its short-wavelength end; the maximum lies "
        "at one and a half to two times that wavelength.",
    ),
    "characteristic_line": Wording(
        "characteristic line read instead of the limit",
        "A characteristic line of the anode lies where this claim puts the limit.",
        "A line stays at the same angle at every voltage; the limit moves as 1/U.",
    ),
    "second_order": Wording(
        "second-order limit taken as the first",
        "The limit in second order lies at the angle or wavelength of this claim.",
        "With n = 2 in Bragg's law the same angle gives half the wavelength; the first-order "
        "limit stands at a smaller angle.",
    ),
    "zero_offset": Wording(
        "zero offset of the goniometer not corrected",
        "The angles as read, without (or with the reversed) zero correction, give this number.",
        "The characteristic lines show how far the goniometer's zero is off; subtract that from "
        "every reading. A line with a free intercept shows it too.",
    ),
    "dead_time": Wording(
        "dead time of the counter not corrected",
        "The recorded counts without correction for dead time put the limit here.",
        "At high rates the counter misses events, which flattens the rise.",
    ),
}


def reading_slips(evidence: Evidence) -> list[Slip]:
    """Make the slips of reading for one group's data; those that change nothing are left out."""
    sources = {
        # weight, and how well a person's reading is foretold (half a step, a flat maximum)
        "straight_line_crossing": ("crossing", 5.0, 0.003),
        "first_rising_point": ("first_rise", 3.0, 0.006),
        "maximum": ("maximum", 1.0, 0.07),
        "characteristic_line": ("line", 1.0, 0.003),
    }
    slips = []
    for code, (source, weight, u) in sources.items():
        columns = evidence.shortcuts_deg.get(source, ())
        variants = [Variant(angle_deg=angle, reading_u=u) for angle in columns]
        if variants:
            slips.append(Slip(code, weight, tuple(variants)))
    second = _second_order(evidence)
    if second is not None:
        slips.append(Slip("second_order", 0.5, (second,)))
    zero = np.full(evidence.size, evidence.zero_deg)
    if _matters(evidence, zero):
        slips.append(
            Slip(
                "zero_offset",
                2.0,
                (
                    Variant("the zero was not subtracted", shift_deg=zero),
                    Variant("the zero was added instead of subtracted", shift_deg=2.0 * zero),
                ),
            )
        )
    missed = evidence.shifts_deg.get("dead_time")
    if missed is not None and _matters(evidence, missed):
        slips.append(Slip("dead_time", 0.5, (Variant(shift_deg=missed),)))
    return slips


def _second_order(evidence: Evidence) -> Variant | None:
    """Angles of the limit in second order, where the scans reach them."""
    sine = 2.0 * np.sin(np.radians(evidence.angle_deg))
    with np.errstate(invalid="ignore"):
        angle = np.degrees(np.arcsin(sine))
        angle = np.where(angle < evidence.last_deg, angle, np.nan)
    return Variant(angle_deg=angle) if np.any(np.isfinite(angle)) else None


def _matters(evidence: Evidence, shift_deg: np.ndarray[tuple[int], np.dtype[np.float64]]) -> bool:
    return bool(np.max(np.abs(shift_deg / evidence.angle_deg)) > LEAST_RELATIVE_SHIFT)
