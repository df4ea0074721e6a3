"""The budget as sorted bars, and the three routes side by side."""

from __future__ import annotations

from matplotlib.patches import Patch

from hdetermine.records.results import Determination
from hdetermine.report.figure_style import BLUE, GREEN, INK, MUTED, ORANGE, PURPLE, SHADE, canvas
from hdetermine.report.figure_svg import Picture, picture
from hdetermine.report.spoken import ROUTE_WORDS, sources

LEAST_SHARE = 0.001
MOST_BARS = 12
LETTER = 0.016
"""Width of a letter of a label, of the width of the axes."""
_ROUTE_MARKS = {"linear": ("o", BLUE), "monte_carlo": ("s", ORANGE), "posterior": ("D", GREEN)}


def budget_picture(d: Determination) -> Picture:
    """Draw the shares of the variance, largest on top."""
    every = sources(d.budget)
    large = [one for one in every if abs(one.variance_share) >= LEAST_SHARE]
    shown = sorted(large, key=lambda one: -abs(one.variance_share))[:MOST_BARS]
    shown.sort(key=lambda one: -one.variance_share)
    rest = sum(one.variance_share for one in every) - sum(one.variance_share for one in shown)
    figure = canvas(56.0 + 31.0 * len(shown), left=10.0, right=10.0, bottom=48.0, top=6.0)
    axes = figure.subplots()
    longest = max((abs(one.variance_share) for one in shown), default=1.0)
    lowest = min((one.variance_share for one in shown), default=0.0)
    for i, one in enumerate(shown):
        share = 100.0 * one.variance_share
        colour, hatch = (BLUE, "") if one.common else (ORANGE, "////")
        axes.barh(i, share, 0.42, facecolor=colour if one.common else "none", edgecolor=colour,
                  hatch=hatch, linewidth=1.0)  # fmt: skip
        name = one.words if one.common or one.count == 1 else f"{one.words}, {one.count} scans"
        axes.annotate(name, (0.0, i - 0.27), (3.0, 0.0), textcoords="offset points", ha="left",
                      va="bottom", fontsize=9.5)  # fmt: skip
        axes.text(max(share, 0.0) + 1.2 * longest, i, f"{share:.1f} %".replace("-", "−"),
                  ha="left", va="center", fontsize=9.5)  # fmt: skip
    axes.axvline(0.0, color=MUTED, linewidth=0.8)
    axes.set_ylim(len(shown) - 0.6, -0.85)
    axes.set_xlim(100.0 * min(lowest * 1.1, 0.0) - 0.5, 118.0 * longest)
    axes.set_yticks([])
    axes.spines["left"].set_visible(False)
    axes.grid(axis="y", visible=False)
    axes.set_xlabel("share of the variance of h / %")
    handles = [
        Patch(facecolor=BLUE, edgecolor=BLUE, label="common to all voltages"),
        Patch(facecolor="none", edgecolor=ORANGE, hatch="////",
              label="independent, scan by scan"),
    ]  # fmt: skip
    figure.legend(handles=handles, loc="lower left", ncols=2, bbox_to_anchor=(0.02, 0.005))
    listed = "; ".join(f"{one.words} {100.0 * one.variance_share:.1f} percent" for one in shown)
    alt = f"Bars of the shares of the variance of h, largest first: {listed}."
    if len(shown) < len(every):
        alt += f" All other sources together: {100.0 * rest:.1f} percent."
    caption = (
        "Shares of the variance by source, contributions of one kind from all scans summed up. "
        "Full bars: common to all voltages, which more voltages do not reduce; hatched: "
        "independent from scan to scan. A negative share comes from a correlation that makes "
        "two inputs cancel in part."
    )
    return picture(figure, "budget", alt, caption)


def routes_picture(d: Determination) -> Picture:
    """Draw h by each route with its 95 % interval, beside the SI value."""
    routes = [d.routes[name] for name in ROUTE_WORDS if name in d.routes]
    scale = 1e34
    figure = canvas(66.0 + 44.0 * len(routes), left=10.0, right=14.0, bottom=44.0, top=22.0)
    axes = figure.subplots()
    low, high = routes[0].interval_95_J_s
    axes.axvspan(low * scale, high * scale, facecolor=SHADE, linewidth=0)
    axes.axvline(d.comparison.reference_J_s * scale, color=PURPLE, linewidth=1.3,
                 linestyle=(0, (1.2, 1.2)))  # fmt: skip
    labels: list[tuple[int, float, float, str]] = []
    for i, route in enumerate(routes):
        marker, colour = _ROUTE_MARKS[route.name]
        first, last = (end * scale for end in route.interval_95_J_s)
        axes.plot([first, last], [i, i], color=colour, linewidth=1.6,
                  linestyle="-" if route.usable else (0, (2, 2)))  # fmt: skip
        axes.plot([first, last], [i, i], "|", color=colour, markersize=9.0, markeredgewidth=1.6)
        axes.plot([route.value_J_s * scale], [i], marker, color=colour, markersize=7.0,
                  markerfacecolor=colour if route.usable else "none")  # fmt: skip
        words = ROUTE_WORDS[route.name]
        if route.name == d.h.route:
            words += " (reported)"
        elif not route.usable:
            words += " (not usable)"
        labels.append((i, first, last, words))
    for i, first, last, words in labels:
        # At the other end where the line of the SI value would run through it.
        reach = len(words) * LETTER * (axes.get_xlim()[1] - axes.get_xlim()[0])
        crossed = first < d.comparison.reference_J_s * scale < first + reach
        axes.text(last if crossed else first, i - 0.2, words, ha="right" if crossed else "left",
                  va="bottom", fontsize=9.5)  # fmt: skip
    axes.set_ylim(len(routes) - 0.5, -0.75)
    axes.set_yticks([])
    axes.spines["left"].set_visible(False)
    axes.grid(axis="y", visible=False)
    axes.set_xlabel("h / 10⁻³⁴ J s")
    axes.text(d.comparison.reference_J_s * scale, 1.01, "SI value", ha="center", va="bottom",
              fontsize=9.5, color=INK, transform=axes.get_xaxis_transform())  # fmt: skip
    parts = [
        f"{ROUTE_WORDS[route.name]} {route.value_J_s * scale:.4f}, from "
        f"{route.interval_95_J_s[0] * scale:.4f} to {route.interval_95_J_s[1] * scale:.4f}"
        + ("" if route.usable else ", not usable")
        for route in routes
    ]
    alt = (
        "h by each route with its 95 percent interval, in units of ten to the minus 34 joule "
        f"seconds: {'; '.join(parts)}. The SI value, "
        f"{d.comparison.reference_J_s * scale:.5f}, is marked."
    )
    caption = (
        "h by each route with its 95 % interval; dotted: the SI value, which is exact; shaded: "
        "the interval of the linear route. A route drawn hollow and broken is not usable."
    )
    return picture(figure, "routes", alt, caption)
