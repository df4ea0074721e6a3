"""Screening the data of one group: what sound counts would hardly ever show."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from hdetermine.classcheck.countscatter import (
    TOO_ROUGH,
    TOO_SMOOTH,
    Scatter,
    common_divisor,
    last_digit_probability,
    measure_scatter,
    steep_features,
)
from hdetermine.classcheck.evidence import effective_spacing_pm
from hdetermine.classcheck.screens import Family, Look, Remark
from hdetermine.physics.bragg import glancing_angle_deg
from hdetermine.physics.lines import K_EDGE_pm, line_groups
from hdetermine.records.results import Cutoff, Determination
from hdetermine.records.run import Run
from hdetermine.records.scan import Scan

FloatArray = NDArray[np.float64]

SATURATED_FRACTION = 0.3
"""Recorded rate times dead time above which the correction itself is doubtful."""
LEAST_POINTS_BELOW = 5
GAP_STEPS = 1.5
LEAST_VOLTAGE_DEVIATION = 0.015
LEAST_VOLTAGES = 4
LINE_WIDTHS, LINE_ZERO_U = 2.5, 3.0
ORDERS = (1, 2, 3)


def scan_label(scan: Scan | Cutoff, number: int) -> str:
    """How a scan is called: by number and voltage, for its file may bear a person's name."""
    return f"scan {number} ({scan.tube_voltage_kV:g} kV)"


def screen_counts(run: Run, zero_deg: float, zero_u_deg: float, fwhm_deg: float) -> list[Look]:
    """Look at the scatter of the counts, scan by scan and all together, and at last digits.

    Nothing is said of scatter where lines and absorption edges are foreseen, nor where the
    spectrum has a feature that nobody foresees.

    Parameters
    ----------
    run : Run
        The group's run.
    zero_deg, zero_u_deg : float
        Zero of the goniometer and its standard uncertainty.
    fwhm_deg : float
        Resolution.

    Returns
    -------
    list of Look
    """
    dead_time_s = run.apparatus.counter.dead_time_us.value * 1e-6
    foreseen = _foreseen_features(run) + zero_deg
    margin = LINE_WIDTHS * fwhm_deg + LINE_ZERO_U * zero_u_deg
    total = Scatter()
    looks = []
    for number, scan in enumerate(run.scans, 1):
        distance = np.abs(scan.reading_deg[:, np.newaxis] - foreseen)
        usable = np.all(distance > margin, axis=1) & ~_dropouts(scan)
        usable &= ~steep_features(scan.counts)
        scatter = measure_scatter(
            scan.counts, scan.dwell_s, dead_time_s, usable, scan.rate_rounding or 0.0
        )
        looks += _scatter_looks("scan scatter", scan_label(scan, number), scatter)
        total += scatter
    looks += _scatter_looks("scatter", "all scans", total)
    whole = [scan.counts for scan in run.scans if common_divisor(scan.counts) == 1]
    if whole:
        statistic, probability, number = last_digit_probability(whole)
        if probability < 1.0:
            sentence = (
                f"The last digits of {number} counts are not equally frequent, as they are when "
                "counts come from a counter."
            )
            looks.append(
                Look("digits", "all scans", statistic, "chi squared of ten digits, 9 degrees of "
                     "freedom", probability, True, sentence)
            )  # fmt: skip
    return looks


def _foreseen_features(run: Run) -> FloatArray:
    """True angles of the anode's lines, and of absorption edges, in the first three orders."""
    apparatus = run.apparatus
    wavelengths = [group.wavelength_pm for group in line_groups(apparatus.tube.anode)]
    elements = (*apparatus.crystal.elements, apparatus.tube.filter, apparatus.tube.anode)
    wavelengths += [K_EDGE_pm[element] for element in elements if element in K_EDGE_pm]
    spacing = effective_spacing_pm(apparatus.crystal)
    angles = [glancing_angle_deg(np.array(wavelengths), spacing, 0.0, n) for n in ORDERS]
    found = np.concatenate(angles) if wavelengths else np.empty(0)
    return found[np.isfinite(found)]


def _scatter_looks(family: Family, where: str, scatter: Scatter) -> list[Look]:
    too_smooth, too_rough = scatter.probabilities()
    if too_smooth == too_rough == 1.0:
        return []
    figure = "scatter over Poisson's"
    low_ratio = scatter.low / scatter.differences
    return [
        Look(
            family, where, scatter.ratio, figure, too_smooth, low_ratio < TOO_SMOOTH,
            "The counts scatter less than counted events can: smoothed or averaged counts, or "
            "counts divided by the counting time, look like this.",
        ),
        Look(
            family, where, scatter.ratio, figure, too_rough, scatter.ratio > TOO_ROUGH,
            "The counts scatter more than counted events do: an unstable supply or counter, or "
            "counts multiplied by a number, look like this.",
        ),
    ]  # fmt: skip


def _dropouts(scan: Scan) -> NDArray[np.bool_]:
    """Isolated zeros between counts that make a zero impossible."""
    counts = scan.counts
    found = np.zeros(counts.size, dtype=bool)
    if counts.size > 2:
        lower = np.minimum(counts[:-2], counts[2:])
        found[1:-1] = (counts[1:-1] == 0) & (lower > 20)
    return found


def screen_scans(run: Run, cutoffs: Sequence[Cutoff]) -> list[Remark]:
    """Find what is a matter of fact, not of chance.

    Parameters
    ----------
    run : Run
        The group's run.
    cutoffs : sequence of Cutoff
        One a scan with an edge.

    Returns
    -------
    list of Remark
    """
    by_scan = {cutoff.scan: cutoff for cutoff in cutoffs}
    dead_time_s = run.apparatus.counter.dead_time_us.value * 1e-6
    remarks = []
    for number, scan in enumerate(run.scans, 1):
        where = scan_label(scan, number)
        remarks += _angle_gaps(scan, where)
        remarks += _divided(scan, where)
        if np.any(_dropouts(scan)):
            remarks.append(
                Remark(where, "isolated zero", "A zero stands between high counts: the counter or "
                       "the transfer dropped out there.", is_alarm=False)
            )  # fmt: skip
        fraction = float(np.max(scan.counts / scan.dwell_s)) * dead_time_s
        if fraction > SATURATED_FRACTION:
            remarks.append(
                Remark(where, "counter near saturation", "The counter was busy for more than "
                       f"{SATURATED_FRACTION:.0%} of the time at its highest rate; the dead-time "
                       "correction is then doubtful.", fraction, "recorded rate times dead time",
                       f"{SATURATED_FRACTION:g}")
            )  # fmt: skip
        cutoff = by_scan.get(scan.name)
        if cutoff is not None:
            remarks += _edge_remarks(scan, cutoff, where)
    return remarks


def _angle_gaps(scan: Scan, where: str) -> list[Remark]:
    steps = np.diff(scan.reading_deg)
    gaps = int(np.count_nonzero(steps > GAP_STEPS * scan.step_deg)) if steps.size else 0
    if not gaps or gaps > 0.2 * steps.size:
        return []
    sentence = f"The angles have {gaps} gap{'s' if gaps > 1 else ''} wider than the usual step."
    return [Remark(where, "missing angles", sentence, float(gaps), "gaps", "none")]


def _divided(scan: Scan, where: str) -> list[Remark]:
    divisor = common_divisor(scan.counts)
    if divisor == 1:
        return []
    if scan.rate_rounding is not None:
        sentence = f"Every count is a multiple of {divisor}: the rates were rounded when saved."
        return [Remark(where, "rounded rates", sentence, float(divisor), is_alarm=False)]
    sentence = (
        f"Every count is a multiple of {divisor}: counts that were scaled, or rates times the "
        "counting time, look like this."
    )
    return [Remark(where, "counts are multiples", sentence, float(divisor), "divisor", "1")]


def _edge_remarks(scan: Scan, cutoff: Cutoff, where: str) -> list[Remark]:
    if not cutoff.used:
        return [Remark(where, "no cutoff", cutoff.reason, is_alarm=False)]
    below = int(np.count_nonzero(scan.reading_deg < cutoff.reading_deg))
    if below >= LEAST_POINTS_BELOW:
        return []
    sentence = "The scan starts so close to the limit that its background is not measured."
    return [
        Remark(where, "too few points below the edge", sentence, float(below), "points",
               str(LEAST_POINTS_BELOW))
    ]  # fmt: skip


def screen_voltages(determination: Determination) -> list[Look]:
    """Look whether each cutoff belongs to the voltage that stands beside it.

    The value of h from each voltage is compared with the weighted mean of the others; what all
    share (spacing, zero, gain) drops out.
    """
    used = determination.used
    if len(used) < LEAST_VOLTAGES:
        return []
    repeatability = determination.run.apparatus.tube.repeatability_kV.standard_uncertainty
    voltage = np.array([cutoff.tube_voltage_kV for cutoff in used])
    wavelength = np.array([cutoff.wavelength_pm for cutoff in used])
    angle = np.radians([cutoff.glancing_angle_deg for cutoff in used])
    own_deg = np.array([math.hypot(c.counting_u_deg, c.window_u_deg) for c in used])
    own = np.hypot(np.radians(own_deg) / np.tan(angle), repeatability / voltage)
    value = np.log(wavelength * voltage)
    weight = own**-2.0
    names = [scan.name for scan in determination.run.scans]
    looks = []
    for i, cutoff in enumerate(used):
        rest = np.delete(weight, i)
        mean = float(np.sum(rest * np.delete(value, i)) / np.sum(rest))
        deviation = float(value[i]) - mean
        sigma = math.sqrt(float(own[i]) ** 2 + 1.0 / float(np.sum(rest)))
        fitting = math.exp(mean) / cutoff.wavelength_pm
        looks.append(
            Look("voltage", scan_label(cutoff, names.index(cutoff.scan) + 1), deviation / sigma,
                 "deviation in standard uncertainties", float(2.0 * ndtr(-abs(deviation / sigma))),
                 abs(deviation) > LEAST_VOLTAGE_DEVIATION,
                 f"The cutoff of this scan fits a voltage of {fitting:.1f} kV better than the "
                 f"{cutoff.tube_voltage_kV:g} kV beside it.")
        )  # fmt: skip
    return looks
