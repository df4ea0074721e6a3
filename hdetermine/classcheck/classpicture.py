"""The class in one picture: every group's h, and its claim, against the SI value."""

from __future__ import annotations

import math

from matplotlib.axes import Axes

from hdetermine.classcheck.classwork import ClassFinding, GroupRow
from hdetermine.physics.reference import PLANCK_CONSTANT_J_S
from hdetermine.report.figure_style import BLUE, INK, MUTED, ORANGE, STYLE, canvas
from hdetermine.report.figure_svg import Picture, picture

ROW_HEIGHT = 17.0
WIDTH = 640.0
LEAST_REACH, LARGEST_REACH = 4.0, 12.0
"""Percent to both sides of the SI value; what lies beyond is marked at the border."""


def class_picture(finding: ClassFinding) -> Picture | None:
    """Draw the class; None if no group has a value.

    Everything is a deviation from the SI value in percent.
    """
    import matplotlib as mpl

    rows = [row for row in finding.rows if _has_value(row)]
    if not rows:
        return None
    reach = _reach(rows)
    longest = max(len(row.label) for row in rows)
    with mpl.rc_context(STYLE):
        height = 70.0 + ROW_HEIGHT * len(rows)
        figure = canvas(height, width=WIDTH, left=24.0 + 6.2 * min(longest, 28), bottom=64.0,
                        top=10.0)  # fmt: skip
        axes = figure.add_subplot()
        axes.axvline(0.0, color=INK, linewidth=1.0)
        for line, row in enumerate(rows):
            _draw_data(axes, row, line - 0.14, reach)
            _draw_claim(axes, row, line + 0.18, reach)
        axes.set_ylim(len(rows) - 0.4, -0.6)
        axes.set_xlim(-reach, reach)
        axes.set_yticks(range(len(rows)))
        # Names are data: no dollar sign in one of them starts a formula.
        axes.set_yticklabels([_short(row.label) for row in rows], parse_math=False)
        axes.grid(axis="y", visible=False)
        axes.set_xlabel("deviation from the SI value of h / %")
        for marker, colour, filled, label in (
            ("o", BLUE, True, "from the group's data, with U"),
            ("D", ORANGE, False, "claimed, with U = 2u"),
        ):
            axes.plot([], [], marker, color=colour, markersize=5.0, label=label,
                      markerfacecolor=colour if filled else "none")  # fmt: skip
        axes.plot([], [], ">", color=ORANGE, markersize=6.0, label="claimed, out of range")
        handles, labels = axes.get_legend_handles_labels()
        figure.legend(handles, labels, loc="lower left", ncols=3, bbox_to_anchor=(0.02, 0.005))
        return picture(figure, "class", _spoken(rows), _CAPTION)


_CAPTION = (
    "Filled circles: h from each group's own data with its expanded uncertainty. Open diamonds: "
    "what the group claims, with twice its stated standard uncertainty. Triangles at the border: "
    "claims that lie further out, with claim over SI value beside them."
)


def _short(label: str) -> str:
    return label if len(label) <= 28 else label[:27] + "…"


def _has_value(row: GroupRow) -> bool:
    found = row.finding
    return found.reanalysis is not None or found.planck is not None


def _reach(rows: list[GroupRow]) -> float:
    """Wide enough for the data and for claims that are not far out."""
    widest = LEAST_REACH
    for row in rows:
        reanalysis, planck = row.finding.reanalysis, row.finding.planck
        if reanalysis is not None:
            u = reanalysis.expanded_uncertainty_J_s / PLANCK_CONSTANT_J_S
            widest = max(widest, 110.0 * (abs(reanalysis.relative_deviation) + u))
        if planck is not None and abs(planck.relative_deviation) < LARGEST_REACH / 110.0:
            widest = max(widest, 110.0 * abs(planck.relative_deviation))
    return min(widest, LARGEST_REACH)


def _draw_data(axes: Axes, row: GroupRow, line: float, reach: float) -> None:
    reanalysis = row.finding.reanalysis
    if reanalysis is None:
        return
    u = 100.0 * reanalysis.expanded_uncertainty_J_s / PLANCK_CONSTANT_J_S
    value = max(-reach, min(reach, 100.0 * reanalysis.relative_deviation))
    axes.errorbar([value], [line], xerr=[u], fmt="o", color=BLUE, markersize=5.0,
                  elinewidth=1.4, ecolor=BLUE)  # fmt: skip


def _draw_claim(axes: Axes, row: GroupRow, line: float, reach: float) -> None:
    planck = row.finding.planck
    if planck is None:
        return
    value = 100.0 * planck.relative_deviation
    if abs(value) > reach:
        side = math.copysign(1.0, value)
        ratio = planck.claimed_J_s / PLANCK_CONSTANT_J_S
        axes.plot([side * 0.985 * reach], [line], ">" if side > 0 else "<", color=ORANGE,
                  markersize=6.0)  # fmt: skip
        axes.text(side * 0.95 * reach, line, _factor(ratio), color=MUTED, fontsize=8.5,
                  ha="right" if side > 0 else "left", va="center", parse_math=False)  # fmt: skip
        return
    u = planck.claimed_u_J_s
    bar = 200.0 * u / PLANCK_CONSTANT_J_S if math.isfinite(u) else 0.0
    axes.errorbar([value], [line], xerr=[bar], fmt="D", color=ORANGE, markersize=4.6,
                  markerfacecolor="none", elinewidth=1.0, ecolor=ORANGE)  # fmt: skip


def _factor(ratio: float) -> str:
    if 0.01 <= abs(ratio) < 100.0:
        return f"× {ratio:.3g}"
    mantissa, exponent = f"{ratio:.1e}".split("e")
    digits = str(int(exponent)).translate(str.maketrans("0123456789-", "⁰¹²³⁴⁵⁶⁷⁸⁹⁻"))
    return f"× {mantissa} · 10{digits}"


def _spoken(rows: list[GroupRow]) -> str:
    data = [row.finding.reanalysis for row in rows if row.finding.reanalysis is not None]
    inside = sum(abs(one.E_n) <= 1.0 for one in data)
    claims = sum(row.finding.planck is not None for row in rows)
    return (
        f"Deviation of h from the SI value for {len(rows)} groups: {inside} of {len(data)} "
        f"re-analyses agree with it within their expanded uncertainty; {claims} groups claim a "
        "value. The table gives every number."
    )
