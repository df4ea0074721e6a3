"""Figures: what is drawn, that it stands alone, and that grey print and dark pages can read it."""

from __future__ import annotations

import re
import xml.etree.ElementTree as ET
from dataclasses import replace

import matplotlib
import numpy as np
import pytest
from report_fixture import example

from hdetermine.report.figure_budget import routes_picture
from hdetermine.report.figure_lines import lines_picture
from hdetermine.report.figure_posterior import posterior_pictures
from hdetermine.report.figure_relation import relation_picture
from hdetermine.report.figure_scan import (
    close_view_deg,
    cutoff_band_deg,
    deviance_residuals,
    scan_pictures,
)
from hdetermine.report.figure_style import DARK, LIGHT, STYLE, power_of_ten
from hdetermine.report.figures import draw_figures

DARK_PAGE = "#12161b"


@pytest.fixture(scope="module")
def d():
    return example()


@pytest.fixture(scope="module")
def figures(d):
    return draw_figures(d)


@pytest.fixture(scope="module")
def pictures(figures):
    single = (figures.relation, figures.budget, figures.routes, figures.lines)
    return [*single, *figures.posterior, *(one for scan in figures.scans for one in scan)]


def luminance(colour: str) -> float:
    """Relative luminance (WCAG 2.2, definition)."""
    parts = [int(colour[i : i + 2], 16) / 255.0 for i in (1, 3, 5)]
    linear = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in parts]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def contrast(one: str, two: str) -> float:
    """Contrast ratio (WCAG 2.2, definition)."""
    high, low = sorted((luminance(one), luminance(two)), reverse=True)
    return (high + 0.05) / (low + 0.05)


# --- SVG --------------------------------------------------------------------------------------


def test_every_picture_stands_alone(pictures):
    keys = [one.key for one in pictures]
    assert len(set(keys)) == len(keys)
    ids = []
    for one in pictures:
        root = ET.fromstring(one.svg)
        own = [element.get("id") for element in root.iter() if element.get("id")]
        ids += own
        for element in root.iter():
            assert element.tag.split("}")[1] in {
                "svg", "g", "defs", "path", "use", "text", "tspan", "clipPath", "rect", "pattern"
            }  # fmt: skip
            assert "style" not in element.attrib
            for name, value in element.attrib.items():
                for target in re.findall(r"url\(#([^)]+)\)", value):
                    assert target in own
                if name == "href":
                    assert value.startswith("#")
                    assert value[1:] in own
    assert len(set(ids)) == len(ids)


def test_colours_are_those_of_the_style_sheet_and_have_a_class(pictures):
    names = {colour: name for name, colour in LIGHT.items()}
    for one in pictures:
        for element in ET.fromstring(one.svg).iter():
            for kind in ("fill", "stroke"):
                colour = element.get(kind)
                if colour is None or colour == "none" or colour.startswith("url(#"):
                    continue
                assert colour in names, (one.key, colour)
                assert f"{kind[0]}-{names[colour]}" in element.get("class", "").split()


def test_text_is_text_and_nothing_else_is_named(pictures):
    for one in pictures:
        assert "<text" in one.svg
        assert "matplotlib" not in one.svg
        assert "Date" not in one.svg


def test_same_determination_same_bytes(d, figures):
    again = draw_figures(d)
    assert again == figures


def test_small_enough(pictures):
    """Nine scans and all else: far below the 3 MB that a page may have."""
    assert sum(len(one.svg) for one in pictures) < 1_000_000


def test_text_of_a_run_is_no_formula_in_a_figure():
    d = example()
    lines = tuple(replace(line, label=r"$\frac{1}{2}$ <b>") for line in d.angle_scale.lines)
    hostile = replace(d, angle_scale=replace(d.angle_scale, lines=lines))
    svg = draw_figures(hostile).lines.svg
    assert r"$\frac{1}{2}$ &lt;b&gt;" in svg


# --- legibility -------------------------------------------------------------------------------


@pytest.mark.parametrize("name", ["ink", "muted", "blue", "orange", "green", "purple"])
def test_contrast_in_both_schemes(name):
    """Text needs 4.5 : 1, graphical objects 3 : 1 (WCAG 2.2, 1.4.3 and 1.4.11)."""
    for ground in ("#ffffff", LIGHT["shade"], LIGHT["band"]):
        assert contrast(LIGHT[name], ground) >= 4.5
    for ground in (DARK_PAGE, DARK["shade"], DARK["band"]):
        assert contrast(DARK[name], ground) >= 4.5


def test_both_schemes_have_the_same_names():
    assert LIGHT.keys() == DARK.keys()


def test_series_differ_without_colour(figures):
    """Fit and background, cutoff and grid: another dash each, so that grey print can tell."""
    edge = ET.fromstring(figures.scans[2][1].svg)
    dashes = {
        element.get("stroke"): element.get("stroke-dasharray")
        for element in edge.iter()
        if element.get("stroke") in (LIGHT["blue"], LIGHT["orange"], LIGHT["purple"])
    }
    assert len(set(dashes.values())) == 3


def test_independent_sources_are_hatched(figures):
    assert "<pattern" in figures.budget.svg
    assert "Bars of the shares" in figures.budget.alt


# --- content ----------------------------------------------------------------------------------


def test_alternatives_say_what_is_shown(d, figures):
    assert "9 scans from 20.0 to 40.0 kilovolts" in figures.relation.alt
    assert "voltage gain 45.0 percent" in figures.budget.alt
    assert "linear propagation 6.6229" in figures.routes.alt
    assert "6 characteristic lines, 4 of them used" in figures.lines.alt
    whole, edge = figures.scans[1]
    assert "66 points from 2.50 to 9.00 degrees" in whole.alt
    assert f"{d.used[0].reading_deg:.3f} degrees" in edge.alt
    assert "No cutoff was taken" in figures.scans[0][0].alt


def test_a_refused_scan_shows_its_counts_only(figures):
    assert len(figures.scans[0]) == 1
    assert all(len(drawn) == 2 for drawn in figures.scans[1:])


def test_one_voltage_has_no_relation():
    d = example((30.0,), refused=False)
    with matplotlib.rc_context(STYLE):
        assert relation_picture(d) is None


def test_repeats_of_one_voltage_have_no_relation():
    assert draw_figures(example((30.0, 30.0), refused=False), brief=True).relation is None


def test_two_voltages_have_no_free_line():
    d = example((20.0, 30.0), refused=False)
    assert "free intercept" not in draw_figures(d, brief=True).relation.svg


@pytest.mark.parametrize("state", ["absent", "not converged", "converged"])
def test_posterior(state):
    d = example(posterior=state)
    with matplotlib.rc_context(STYLE):
        assert len(posterior_pictures(d)) == (0 if state == "absent" else 2)


def test_routes_that_are_not_usable_are_drawn_hollow():
    picture = draw_figures(example(posterior="not converged"), brief=True).routes
    assert "posterior (not usable)" in picture.svg
    assert "not usable" in picture.alt


def test_without_lines_there_is_no_figure_of_them():
    assert draw_figures(example(lines=False)).lines is None


def test_lines_that_serve_are_marked_in_their_scan(d, figures):
    marked = {line.scan for line in d.angle_scale.lines if line.used}
    for scan, drawn in zip(d.run.scans, figures.scans, strict=True):
        assert ("K-L2,3" in drawn[0].svg) is (scan.name in marked)
        assert ("Marked on top: Mo K-L2,3 at 7.34" in drawn[0].alt) is (scan.name in marked)
        assert "K-N2,3" not in drawn[0].svg  # found, but not used


def test_a_line_far_off_stands_at_the_border_with_its_residual(d):
    scale = d.angle_scale
    lines = tuple(
        replace(line, expected_deg=line.reading_deg - (0.27 if not line.used else 0.002))
        for line in scale.lines
    )
    with matplotlib.rc_context(STYLE):
        far = lines_picture(replace(scale, lines=lines)).svg
        near = lines_picture(scale).svg
    assert "+0.27°" in far
    assert "°<" not in near.replace("/ °<", "")


def test_one_line_seen_often_has_an_abscissa_to_read(d):
    """Thousandths of a degree between the scans are no scale for the axis."""
    same = [line for line in d.angle_scale.lines if line.label == "Mo K-L2,3"]
    lines = tuple(
        replace(line, reading_deg=line.reading_deg + 0.004 * i) for i, line in enumerate(same)
    )
    with matplotlib.rc_context(STYLE):
        svg = lines_picture(replace(d.angle_scale, lines=lines)).svg
    ticks = [float(one) for one in re.findall(r">([67]\.\d+)<", svg)]
    assert max(ticks) - min(ticks) >= 0.5


def test_label_of_a_route_gives_way_to_the_si_value(d):
    """It stands at the other end where the line of the SI value would run through it."""
    ends = []
    for reference in (6.5745e-34, 6.7e-34):
        moved = replace(d, comparison=replace(d.comparison, reference_J_s=reference))
        with matplotlib.rc_context(STYLE):
            svg = routes_picture(moved).svg
        ends.append(re.search(r"<text[^>]*>linear propagation", svg)[0])
    assert "end" in ends[0]
    assert "end" not in ends[1]


def test_brief_leaves_out_scans(d):
    figures = draw_figures(d, brief=True)
    assert figures.scans == ()
    assert figures.posterior == ()
    assert figures.lines is None


def test_counts_of_zero_everywhere_can_be_drawn(d):
    scan = replace(d.run.scans[0], counts=np.zeros(66, dtype=np.int64))
    with matplotlib.rc_context(STYLE):
        (picture,) = scan_pictures(scan, d.cutoffs[0], 1)
    assert "between 0 and 0 counts" in picture.alt


def test_a_cutoff_without_a_curve_shows_its_scan(d):
    bare = replace(d.used[0], curve=None, windows=())
    with matplotlib.rc_context(STYLE):
        assert len(scan_pictures(d.run.scans[1], bare, 1)) == 1


# --- numbers in the pictures ------------------------------------------------------------------


def test_deviance_residuals():
    """Shares of the deviance for d = (3, 0, 5, 2), m = (2.5, 0.7, 4, 3).

    Formula of Baker and Cousins, Nucl. Instrum. Methods 221, 437 (1984); the four terms were
    computed for this purpose.
    """
    found = deviance_residuals(np.array([3.0, 0.0, 5.0, 2.0]), np.array([2.5, 0.7, 4.0, 3.0]))
    np.testing.assert_allclose(found**2, [0.09392934, 1.4, 0.23143551, 0.37813957], rtol=1e-7)
    np.testing.assert_array_equal(np.sign(found), [1, -1, 1, -1])


def test_cutoff_band_keeps_both_sides(d):
    cutoff = replace(
        d.used[0], reading_deg=5.0, lower_u_deg=0.03, upper_u_deg=0.01, counting_u_deg=0.02,
        window_u_deg=0.0, background_u_deg=np.nan,
    )  # fmt: skip
    low, high = cutoff_band_deg(cutoff)
    assert 5.0 - low == pytest.approx(1.96 * 0.03, rel=1e-3)
    assert high - 5.0 == pytest.approx(1.96 * 0.01, rel=1e-3)


def test_close_view_holds_cutoff_and_stays_near(d):
    for scan, cutoff in zip(d.run.scans[1:], d.used, strict=True):
        low, high = close_view_deg(scan, cutoff, cutoff.curve)
        assert low < cutoff.reading_deg < high
        assert high - low < 2.6


@pytest.mark.parametrize(
    ("value", "text"), [(1.0, "1"), (1000.0, "1000"), (1e4, "10⁴"), (1e12, "10¹²")]
)
def test_powers_of_ten(value, text):
    assert power_of_ten(value) == text
