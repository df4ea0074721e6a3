"""The inverse relation: cutoffs against inverse voltage, and what is left of them."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from hdetermine.records.results import Determination
from hdetermine.report.figure_style import (
    BLUE,
    INK,
    MUTED,
    ORANGE,
    PURPLE,
    below,
    canvas,
    few_ticks,
)
from hdetermine.report.figure_svg import Picture, picture
from hdetermine.report.rows import own_u_deg


def relation_picture(d: Determination) -> Picture | None:
    """Draw cutoff wavelength against inverse voltage with residuals.

    Returns
    -------
    Picture or None
        None if fewer than two voltages differ: there is no relation to look at.
    """
    relation = d.relation
    if np.unique(relation.voltages_kV).size < 2:
        return None
    inverse = 1.0 / relation.voltages_kV
    fitted = relation.slope_pm_kV * inverse
    whole_u = np.sqrt(np.diag(relation.covariance_pm2))
    own_u = _own_u_pm(d)
    figure = canvas(400.0, bottom=62.0)
    upper, lower = figure.subplots(
        2, 1, sharex=True, gridspec_kw={"height_ratios": (3.0, 1.7), "hspace": 0.1}
    )
    span = np.array([0.0, 1.06 * inverse.max()])
    upper.plot(span, relation.slope_pm_kV * span, color=BLUE, label="through the origin")
    if math.isfinite(relation.intercept_pm):
        upper.plot(span, relation.free_slope_pm_kV * span + relation.intercept_pm, color=ORANGE,
                   linestyle=(0, (5, 2.5)), label="free intercept")  # fmt: skip
    upper.plot(inverse, relation.wavelengths_pm, "o", color=INK, markersize=4.2,
               markerfacecolor="none", label="cutoffs")  # fmt: skip
    upper.set_ylim(0.0, 1.08 * float(relation.wavelengths_pm.max()))
    upper.set_xlim(0.0, float(span[1]))
    few_ticks(upper)
    upper.set_ylabel("cutoff wavelength / pm")
    percent = 100.0 / fitted
    left = (relation.wavelengths_pm - fitted) * percent
    lower.axhline(0.0, color=BLUE, linewidth=1.2)
    lower.errorbar(inverse, left, yerr=whole_u * percent, fmt="none", ecolor=MUTED,
                   elinewidth=0.9, capsize=3.0)  # fmt: skip
    lower.errorbar(inverse, left, yerr=own_u * percent, fmt="o", color=INK, ecolor=PURPLE,
                   elinewidth=2.6, markersize=4.0)  # fmt: skip
    if math.isfinite(relation.intercept_pm):
        reach = np.linspace(0.9 * inverse.min(), span[1], 40)
        free = relation.free_slope_pm_kV * reach + relation.intercept_pm
        through = relation.slope_pm_kV * reach
        lower.plot(reach, 100.0 * (free / through - 1.0), color=ORANGE,
                   linestyle=(0, (5, 2.5)))  # fmt: skip
    few_ticks(lower, y=4)
    lower.set_ylabel("residual / %")
    lower.set_xlabel("inverse peak voltage / kV⁻¹")
    figure.align_ylabels()
    below(figure, upper, 3)
    worst = int(np.argmax(np.abs(left)))
    alt = (
        f"Cutoff wavelength against inverse voltage for {inverse.size} scans from "
        f"{relation.voltages_kV.min():.1f} to {relation.voltages_kV.max():.1f} kilovolts: the "
        f"points lie on a straight line through the origin with slope "
        f"{relation.slope_pm_kV:.1f} picometre kilovolts. Below, the relative residuals; the "
        f"largest is {left[worst]:+.2f} percent at {relation.voltages_kV[worst]:.1f} kilovolts."
    )
    caption = (
        "Upper part: cutoff wavelength against inverse voltage (peak voltage, work function "
        "included) with the line through the origin (solid) and the line with a free intercept "
        "(dashed). Lower part: residuals from the line through the origin; thick bars: standard "
        "uncertainty from counting and choice of fit alone, by which the points scatter; thin "
        "bars with caps: with all that bears on the wavelength, much of which moves all points "
        "together. The voltage is in neither."
    )
    return picture(figure, "relation", alt, caption)


def _own_u_pm(d: Determination) -> NDArray[np.float64]:
    """Standard uncertainty of each cutoff from its own counts and choice of fit, pm."""
    found = {cutoff.scan: cutoff for cutoff in d.used}
    own = []
    for scan in d.relation.scans:
        cutoff = found[scan]
        angle = math.radians(cutoff.glancing_angle_deg)
        own.append(cutoff.wavelength_pm * math.radians(own_u_deg(cutoff)) / math.tan(angle))
    return np.array(own)
