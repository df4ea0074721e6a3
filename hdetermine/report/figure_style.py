"""The one style sheet of all figures: colours, markers, sizes.

Colours are told apart by people with colour-vision deficiencies (after Okabe and Ito's
palette, darkened until each stands out 4.5 : 1 from white), and nothing is said by colour
alone: every series has a marker, a line style or a hatch of its own, so that a grey print reads
the same. `DARK` gives each colour's partner for a dark page.
"""

from __future__ import annotations

from typing import Any

from cycler import cycler
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, LogLocator, MaxNLocator, NullLocator

INK = "#1f2328"
MUTED = "#57606a"
GRID = "#d8dee4"
BLUE = "#0059a3"
ORANGE = "#ab4400"
GREEN = "#006b47"
PURPLE = "#84347a"
SHADE = "#e3edf7"
BAND = "#fae4d6"

LIGHT: dict[str, str] = {
    "ink": INK,
    "muted": MUTED,
    "grid": GRID,
    "blue": BLUE,
    "orange": ORANGE,
    "green": GREEN,
    "purple": PURPLE,
    "shade": SHADE,
    "band": BAND,
}
DARK: dict[str, str] = {
    "ink": "#e6edf3",
    "muted": "#a3afbb",
    "grid": "#363e47",
    "blue": "#79b8f5",
    "orange": "#f0a55c",
    "green": "#5fcf9f",
    "purple": "#dba0d3",
    "shade": "#202c3a",
    "band": "#4a3420",
}

WIDTH = 420.0
"""Width of a figure, points; two stand side by side on a wide page, one on a narrow one."""

# Any: the key types of matplotlib's settings differ from one of its versions to the next.
STYLE: Any = {
    "text.parse_math": False,
    "svg.fonttype": "none",
    "svg.hashsalt": "hdetermine",
    "font.family": ["DejaVu Sans"],
    "font.size": 10.0,
    "axes.titlesize": 10.0,
    "axes.titlelocation": "left",
    "axes.labelsize": 10.0,
    "axes.edgecolor": MUTED,
    "axes.labelcolor": INK,
    "axes.facecolor": "none",
    "axes.linewidth": 0.8,
    "axes.grid": True,
    "axes.axisbelow": True,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.unicode_minus": True,
    "axes.formatter.useoffset": False,
    "figure.facecolor": "none",
    "grid.color": GRID,
    "grid.linewidth": 0.6,
    "xtick.color": MUTED,
    "ytick.color": MUTED,
    "xtick.labelcolor": INK,
    "ytick.labelcolor": INK,
    "text.color": INK,
    "legend.frameon": False,
    "legend.fontsize": 9.5,
    "legend.handlelength": 2.4,
    "legend.columnspacing": 1.4,
    "legend.borderpad": 0.0,
    "legend.borderaxespad": 0.0,
    "lines.linewidth": 1.5,
    "hatch.linewidth": 0.7,
    "axes.prop_cycle": cycler(color=[INK]),
    "patch.facecolor": INK,
    "path.simplify": True,
}


def canvas(height: float, *, left: float = 62.0, right: float = 16.0, top: float = 20.0,
           bottom: float = 42.0, width: float = WIDTH) -> Figure:  # fmt: skip
    """Return an empty figure with fixed margins, all lengths in points."""
    figure = Figure(figsize=(width / 72.0, height / 72.0), dpi=72)
    figure.subplots_adjust(
        left=left / width,
        right=1.0 - right / width,
        top=1.0 - top / height,
        bottom=bottom / height,
    )
    return figure


def few_ticks(axes: Axes, *, x: int = 6, y: int = 5) -> None:
    """Put at most so many ticks on both axes, at round numbers."""
    axes.xaxis.set_major_locator(MaxNLocator(x, steps=[1, 2, 2.5, 5, 10]))
    axes.yaxis.set_major_locator(MaxNLocator(y, steps=[1, 2, 2.5, 5, 10]))


def log_counts(axes: Axes, largest: float, headroom: float = 2.0) -> None:
    """Make the ordinate logarithmic in counts, from below one to above the largest."""
    axes.set_yscale("log")
    axes.set_ylim(0.5, max(20.0, headroom * largest))
    axes.yaxis.set_major_locator(LogLocator(10.0, numticks=8))
    axes.yaxis.set_minor_locator(NullLocator())
    axes.yaxis.set_major_formatter(FuncFormatter(power_of_ten))


def power_of_ten(value: float, _position: int = 0) -> str:
    """Write a power of ten as people do: 1, 10, 100, 1000, 10⁴."""
    if value < 1e4:
        return f"{value:.0f}"
    exponent = f"{value:e}".split("e")[1].lstrip("+0")
    return "10" + exponent.translate(str.maketrans("0123456789", "⁰¹²³⁴⁵⁶⁷⁸⁹"))


def below(figure: Figure, axes: Axes, columns: int) -> None:
    """Put the legend of one axes into a row at the foot of the figure."""
    handles, labels = axes.get_legend_handles_labels()
    figure.legend(handles, labels, loc="lower left", ncols=columns, bbox_to_anchor=(0.02, 0.005),
                  markerscale=1.6)  # fmt: skip
