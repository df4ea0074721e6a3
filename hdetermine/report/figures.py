"""All figures of a report, in their order."""

from __future__ import annotations

from dataclasses import dataclass

import matplotlib

from hdetermine.records.results import Determination
from hdetermine.report.figure_budget import budget_picture, routes_picture
from hdetermine.report.figure_lines import lines_picture
from hdetermine.report.figure_posterior import posterior_pictures
from hdetermine.report.figure_relation import relation_picture
from hdetermine.report.figure_scan import scan_pictures
from hdetermine.report.figure_style import STYLE
from hdetermine.report.figure_svg import Picture


@dataclass(frozen=True, slots=True)
class Figures:
    """Every picture of one determination.

    Attributes
    ----------
    relation : Picture or None
        None if fewer than two voltages differ.
    budget, routes : Picture
        Always there.
    lines : Picture or None
        None without characteristic lines.
    posterior : tuple of Picture
        Empty if no posterior was sampled.
    scans : tuple of tuple of Picture
        One entry a scan, in the order of the run; empty in a brief report.
    """

    relation: Picture | None
    budget: Picture
    routes: Picture
    lines: Picture | None
    posterior: tuple[Picture, ...]
    scans: tuple[tuple[Picture, ...], ...]


def draw_figures(d: Determination, *, brief: bool = False) -> Figures:
    """Draw every figure of a report.

    Parameters
    ----------
    d : Determination
        What the analysis found.
    brief : bool
        Leave out what a one-page report does not show.

    Returns
    -------
    Figures
        The same bytes for the same determination.
    """
    cutoffs = {cutoff.scan: cutoff for cutoff in d.cutoffs}
    with matplotlib.rc_context(STYLE):
        return Figures(
            relation_picture(d),
            budget_picture(d),
            routes_picture(d),
            None if brief else lines_picture(d.angle_scale),
            () if brief else posterior_pictures(d),
            ()
            if brief
            else tuple(
                scan_pictures(scan, cutoffs[scan.name], number, d.angle_scale.lines)
                for number, scan in enumerate(d.run.scans, start=1)
                if scan.name in cutoffs
            ),
        )
