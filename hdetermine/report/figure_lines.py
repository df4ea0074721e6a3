"""The angle scale: what the characteristic lines say about it."""

from __future__ import annotations

import math

from hdetermine.records.results import AngleScale, LineMeasure
from hdetermine.report.figure_style import BLUE, INK, MUTED, canvas, few_ticks
from hdetermine.report.figure_svg import Picture, picture
from hdetermine.report.plaintext import plain

NARROWEST_DEG = 1.0
"""Width of the abscissa at least: thousandths of a degree are no scale for it."""
FAR_OFF = 4.0
"""A line this many times farther off than those in use is drawn at the border."""
_MARKERS = ("o", "s", "D", "^", "v", "P", "X", "<", ">")


def lines_picture(scale: AngleScale) -> Picture | None:
    """Draw the residual of every characteristic line against its place.

    Returns
    -------
    Picture or None
        None without lines.
    """
    if not scale.lines:
        return None
    labels = list(dict.fromkeys((line.label, line.order) for line in scale.lines))
    legend = 15.0 * (1 + len(labels) // 2)
    figure = canvas(235.0 + legend, bottom=43.0 + legend)
    axes = figure.subplots()
    axes.axhline(0.0, color=BLUE, linewidth=1.2)
    places = _spread_out(scale.lines)
    low, high = _reach(scale.lines)
    for i, (label, order) in enumerate(labels):
        name = plain(label, 30)
        if order > 1 and "n =" not in name:
            name += f", order {order}"
        for used in (True, False):
            drawn = [
                (place, line)
                for place, line in zip(places, scale.lines, strict=True)
                if (line.label, line.order, line.used) == (label, order, used)
            ]
            if not drawn:
                continue
            axes.errorbar(
                [place for place, _ in drawn],
                [min(max(line.residual_deg, low), high) for _, line in drawn],
                yerr=[line.reading_u_deg if low <= line.residual_deg <= high else 0.0
                      for _, line in drawn],
                fmt=_MARKERS[i % len(_MARKERS)], color=INK, ecolor=MUTED, elinewidth=1.0,
                capsize=2.5, markersize=5.0, markerfacecolor=INK if used else "none",
                label=name if used else f"{name} (not used)",
            )  # fmt: skip
    for place, line in zip(places, scale.lines, strict=True):
        if not low <= line.residual_deg <= high:
            edge = high if line.residual_deg > high else low
            axes.annotate(f"{line.residual_deg:+.2f}°".replace("-", "−"), (place, edge), (6.0, 0.0),
                          textcoords="offset points", ha="left", va="center",
                          fontsize=9.5)  # fmt: skip
    axes.margins(0.08, 0.12)
    first, last = axes.get_xlim()
    missing = max(0.0, NARROWEST_DEG - (last - first)) / 2.0
    axes.set_xlim(first - missing, last + missing)
    few_ticks(axes)
    axes.set_xlabel("glancing angle as read / °")
    axes.set_ylabel("reading − expectation / °")
    handles, names = axes.get_legend_handles_labels()
    figure.legend(handles, names, loc="lower left", ncols=2, bbox_to_anchor=(0.02, 0.005))
    taken = [line for line in scale.lines if line.used]
    worst = max((abs(line.residual_deg) for line in taken), default=0.0)
    alt = (
        f"Residuals of {len(scale.lines)} characteristic lines, {len(taken)} of them used, "
        f"against their reading. The largest residual of a used line is {worst:.4f} degrees."
    )
    caption = (
        "Reading of each characteristic line minus its expectation on the fitted angle scale, "
        "with standard uncertainties; each marker is a line, hollow ones were not used, those far "
        "off stand at the border with their residual. Where several scans saw the same line, its "
        "points are drawn a little apart."
    )
    return picture(figure, "lines", alt, caption)


def _reach(lines: tuple[LineMeasure, ...]) -> tuple[float, float]:
    """Residuals between which all is drawn to scale: a line far off must not flatten the rest."""
    taken = [line for line in lines if line.used] or list(lines)
    reach = max(abs(line.residual_deg) + line.reading_u_deg for line in taken)
    farthest = max(abs(line.residual_deg) for line in lines)
    return (-math.inf, math.inf) if farthest < FAR_OFF * reach else (-2.0 * reach, 2.0 * reach)


def _spread_out(lines: tuple[LineMeasure, ...]) -> list[float]:
    """Abscissa of every line: its reading, moved sideways where others stand there too."""
    readings = [line.reading_deg for line in lines]
    keys = [(line.label, line.order) for line in lines]
    # Where there is one line only, its points have all the room.
    share = 0.6 if len(set(keys)) == 1 else 0.1
    room = share * max(max(readings) - min(readings), NARROWEST_DEG)
    places = []
    for i, line in enumerate(lines):
        number, before = keys.count(keys[i]), keys[:i].count(keys[i])
        places.append(line.reading_deg + room * (before - 0.5 * (number - 1)) / max(number, 4))
    return places
