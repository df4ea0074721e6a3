"""Two pictures for every scan: all of it, and its edge from close by."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from matplotlib.axes import Axes
from numpy.typing import NDArray

from hdetermine.physics.counting import garwood_interval
from hdetermine.records.results import Cutoff, FittedCurve, LineMeasure
from hdetermine.records.scan import Scan
from hdetermine.report.figure_style import (
    BAND,
    BLUE,
    INK,
    MUTED,
    ORANGE,
    PURPLE,
    SHADE,
    below,
    canvas,
    few_ticks,
    log_counts,
)
from hdetermine.report.figure_svg import Picture, picture
from hdetermine.report.plaintext import plain

FloatArray = NDArray[np.float64]

STEPS_BELOW = 14
STEPS_ABOVE = 10
"""How far the close view reaches at most on either side of the cutoff, steps of the scan."""

HEIGHT = 300.0
NORMAL_95 = 1.959964
MARKS = (
    "Points: recorded counts with exact 68 % Poisson intervals (Garwood). Solid line: fitted "
    "continuum with background; dashed: background alone. Grey-blue ground: the points that "
    "took part in the fit. Vertical line with its band: cutoff with the 95 % interval from "
    "counting and from the choice of fit."
)


def deviance_residuals(counts: FloatArray, expected: FloatArray) -> FloatArray:
    """Signed square roots of each point's share of the Poisson deviance.

    Parameters
    ----------
    counts, expected : ndarray, shape (n,)
        Recorded and fitted counts.

    Returns
    -------
    ndarray, shape (n,)
        About standard normal where the fit is right.

    References
    ----------
    Baker and Cousins, Nucl. Instrum. Methods 221, 437 (1984).
    """
    fitted = np.maximum(expected, 1e-12)
    ratio = np.where(counts > 0.0, counts, fitted) / fitted
    share = 2.0 * (fitted - counts + counts * np.log(ratio))
    return np.asarray(np.sign(counts - fitted) * np.sqrt(np.maximum(share, 0.0)))


def cutoff_band_deg(cutoff: Cutoff) -> tuple[float, float]:
    """Lower and upper end of the cutoff's 95 % interval, as readings, degrees.

    Counting statistics (each side its own) and the spread between fits, nothing that the
    scans have in common.
    """
    spread = math.hypot(
        *(part for part in (cutoff.window_u_deg, cutoff.background_u_deg) if math.isfinite(part))
    )
    sides = []
    for side in (cutoff.lower_u_deg, cutoff.upper_u_deg):
        own = side if math.isfinite(side) else cutoff.counting_u_deg
        sides.append(NORMAL_95 * math.hypot(own, spread))
    return cutoff.reading_deg - sides[0], cutoff.reading_deg + sides[1]


def scan_pictures(
    scan: Scan, cutoff: Cutoff, number: int, lines: Sequence[LineMeasure] = ()
) -> tuple[Picture, ...]:
    """Draw one scan: the whole of it and, where a cutoff was found, its edge.

    Parameters
    ----------
    scan : Scan
        As read.
    cutoff : Cutoff
        What the edge fit made of it, refusals included.
    number : int
        Place in the run, from 1; it names the figure.
    lines : sequence of LineMeasure
        Lines of the run; those of this scan that serve the angle scale are marked.
    """
    own = [line for line in lines if line.scan == scan.name and line.used]
    whole = _whole(scan, cutoff, number, own)
    if not cutoff.used or cutoff.curve is None:
        return (whole,)
    return whole, _edge(scan, cutoff, cutoff.curve, number)


def _counts(axes: Axes, reading: FloatArray, counts: FloatArray, floor: float = 0.0) -> None:
    # One path for all bars and one for all points keeps the figure small.
    lower, upper = garwood_interval(counts.astype(np.int64))
    gap = np.full(reading.size, np.nan)
    axes.plot(
        np.column_stack([reading, reading, gap]).ravel(),
        np.column_stack([np.maximum(lower, floor), upper, gap]).ravel(),
        color=MUTED, linewidth=0.8, solid_capstyle="butt",
    )  # fmt: skip
    axes.plot(reading, np.maximum(counts, floor), "o", color=INK, markersize=2.6,
              markeredgewidth=0.0, label="counts")  # fmt: skip


def _fit(axes: Axes, curve: FittedCurve, floor: float = 0.0) -> None:
    # The fit is an integral over each step, known at the points only: joined by straight lines.
    fitted = np.isfinite(curve.expected_counts)
    reading = curve.reading_deg[fitted]
    axes.plot(reading, np.maximum(curve.expected_counts[fitted], floor), color=BLUE,
              linewidth=1.6, label="fit")  # fmt: skip
    axes.plot(reading, np.maximum(curve.background_counts[fitted], floor), color=ORANGE,
              linewidth=1.4, linestyle=(0, (5, 2.5)), label="background")  # fmt: skip


def _marks(axes: Axes, cutoff: Cutoff) -> None:
    if cutoff.windows:
        window = cutoff.windows[0]
        axes.axvspan(window.from_deg, window.to_deg, facecolor=SHADE, linewidth=0, zorder=0.1,
                     label="window")  # fmt: skip
    axes.axvspan(*cutoff_band_deg(cutoff), facecolor=BAND, linewidth=0, zorder=0.2)
    axes.axvline(cutoff.reading_deg, color=PURPLE, linewidth=1.3, linestyle=(0, (1.2, 1.2)),
                 label="cutoff")  # fmt: skip


def _line_marks(axes: Axes, lines: Sequence[LineMeasure]) -> None:
    """Mark lines at the top, their names by turns at two heights."""
    first, last = axes.get_xlim()
    for i, line in enumerate(sorted(lines, key=lambda line: line.reading_deg)):
        height = (0.985, 0.915)[i % 2]
        above = axes.get_xaxis_transform()
        axes.plot([line.reading_deg], [height - 0.03], "v", color=INK, markersize=3.5,
                  transform=above, clip_on=False)  # fmt: skip
        name = plain(line.label, 30).partition(" ")[2] or plain(line.label, 30)
        right = line.reading_deg > first + 0.8 * (last - first)
        axes.annotate(name, (line.reading_deg, height - 0.03), (-5.0 if right else 5.0, 0.0),
                      xycoords=above, textcoords="offset points", va="center",
                      ha="right" if right else "left", fontsize=8.5)  # fmt: skip


def _whole(scan: Scan, cutoff: Cutoff, number: int, lines: Sequence[LineMeasure]) -> Picture:
    figure = canvas(HEIGHT, bottom=58.0)
    axes = figure.subplots()
    counts = scan.counts.astype(float)
    if cutoff.used:
        _marks(axes, cutoff)
    _counts(axes, scan.reading_deg, counts, floor=0.6)
    if cutoff.used and cutoff.curve is not None:
        _fit(axes, cutoff.curve, floor=0.6)
    few_ticks(axes)
    log_counts(axes, float(counts.max(initial=1.0)), 6.0 if lines else 2.0)
    axes.set_xlim(float(scan.reading_deg[0]), float(scan.reading_deg[-1]))
    _line_marks(axes, lines)
    axes.set_xlabel("glancing angle as read / °")
    axes.set_ylabel("counts (log)")
    axes.set_title(f"whole scan, {scan.tube_voltage_kV:g} kV")
    below(figure, axes, 5)
    name = plain(scan.name, 60)
    alt = (
        f"Counts against glancing angle of scan {name} at {scan.tube_voltage_kV:g} kilovolts, "
        f"logarithmic ordinate: {scan.reading_deg.size} points from {scan.reading_deg[0]:.2f} to "
        f"{scan.reading_deg[-1]:.2f} degrees, between {counts.min():.0f} and {counts.max():.0f} "
        "counts. "
    )
    alt += (
        f"The fit stands on the points and meets the background at {cutoff.reading_deg:.3f} "
        "degrees, the cutoff."
        if cutoff.used
        else "No cutoff was taken from it."
    )
    if lines:
        alt += (
            " Marked on top: "
            + ", ".join(
                f"{plain(line.label, 30)} at {line.reading_deg:.2f} degrees" for line in lines
            )
            + "."
        )
    return picture(figure, f"scan-{number}-whole", alt, MARKS)


def close_view_deg(scan: Scan, cutoff: Cutoff, curve: FittedCurve) -> tuple[float, float]:
    """First and last reading of the close view of an edge, degrees."""
    step = scan.step_deg or 0.1
    inside = curve.reading_deg[curve.in_window]
    first, last = (inside[0], inside[-1]) if inside.size else curve.reading_deg[[0, -1]]
    low = max(cutoff.reading_deg - STEPS_BELOW * step, float(first) - 2.0 * step)
    high = min(cutoff.reading_deg + STEPS_ABOVE * step, float(last) + 2.0 * step)
    low, high = (
        min(low, cutoff.reading_deg - 2.0 * step),
        max(high, cutoff.reading_deg + 2.0 * step),
    )
    return low - 0.3 * step, high + 0.3 * step


def _edge(scan: Scan, cutoff: Cutoff, curve: FittedCurve, number: int) -> Picture:
    figure = canvas(HEIGHT)
    linear, log, residual = figure.subplots(
        3, 1, sharex=True, gridspec_kw={"height_ratios": (3.7, 2.7, 2.1), "hspace": 0.12}
    )
    low, high = close_view_deg(scan, cutoff, curve)
    near = (curve.reading_deg >= low) & (curve.reading_deg <= high)
    near_curve = FittedCurve(*(getattr(curve, name)[near] for name in FittedCurve.__slots__))
    largest = float(near_curve.counts.max(initial=1.0))
    for axes, floor in ((linear, 0.0), (log, 0.6)):
        _marks(axes, cutoff)
        _counts(axes, near_curve.reading_deg, near_curve.counts, floor)
        _fit(axes, near_curve, floor)
    _marks(residual, cutoff)
    shown = near_curve.in_window & np.isfinite(near_curve.expected_counts)
    part = deviance_residuals(near_curve.counts[shown], near_curve.expected_counts[shown])
    residual.axhline(0.0, color=MUTED, linewidth=0.8)
    residual.vlines(near_curve.reading_deg[shown], 0.0, part, color=MUTED, linewidth=0.8)
    residual.plot(near_curve.reading_deg[shown], part, "o", color=INK, markersize=3.0,
                  markeredgewidth=0.0)  # fmt: skip
    reach = max(3.2, 1.15 * float(np.abs(part).max(initial=0.0)))
    few_ticks(linear)
    linear.set_ylim(0.0, 1.12 * largest + 3.0)
    log_counts(log, largest)
    few_ticks(residual)
    residual.set_yticks([-2.0, 0.0, 2.0])
    residual.set_ylim(-reach, reach)
    residual.set_xlim(low, high)
    linear.set_ylabel("counts")
    log.set_ylabel("counts (log)")
    residual.set_ylabel("resid. / σ")
    residual.set_xlabel("glancing angle as read / °")
    linear.set_title(f"edge, {scan.tube_voltage_kV:g} kV")
    figure.align_ylabels()
    first, last = cutoff_band_deg(cutoff)
    alt = (
        f"The edge of scan {plain(scan.name, 60)} from close by, {low:.2f} to {high:.2f} degrees, "
        f"with linear and with logarithmic counts. The cutoff stands at {cutoff.reading_deg:.3f} "
        f"degrees, its 95 % interval from counting and choice of fit reaches from {first:.3f} to "
        f"{last:.3f} degrees. Below, the residuals of the {part.size} points of the window that "
        f"are in view: the largest is {np.abs(part).max(initial=0.0):.1f} standard deviations."
    )
    return picture(figure, f"scan-{number}-edge", alt, MARKS)
