"""A family of fits around one edge: its members, their weights, their average."""

import math
from dataclasses import replace

import numpy as np
import pytest
from edge_specimens import EDGE_DEG, LINE, OTHER_LINE, counted, given, parameters, window

from hdetermine.inference.edgefamily import (
    LEAST_ABOVE,
    LEAST_BELOW,
    Obstacle,
    average,
    best_start,
    first_parameters,
    fit_family,
    windows,
)
from hdetermine.inference.edgemodel import EdgeFit
from hdetermine.inference.scoring import Maximum
from hdetermine.records.scan import Scan


def fit_of(reading, u, deviance, *, background_terms=2, points=33, lines=()):
    """A fit made by hand: its reading, uncertainty and deviance."""
    sketch = window(background_terms, lines, high=3.6 + 0.1 * (points - 1))
    assert sketch.counts.size == points
    p = parameters(background_terms, len(lines), edge=reading)
    information = np.eye(p.size)
    information[0, 0] = u**-2
    best = Maximum(p, information, np.ones(points), np.zeros((points, p.size)), deviance, 0.0, True)
    return EdgeFit(sketch, given(), best)


def test_weights_of_the_information_criterion():
    """exp(-A/2), A = deviance + 2 parameters + 2 points left out.

    W. I. Jay and E. T. Neil, Phys. Rev. D 103, 114502 (2021), eq. 48 (number from memory).
    """
    fits = (
        fit_of(5.20, 0.010, 30.0),  # 6 parameters, nothing left out: A = 42
        fit_of(5.24, 0.012, 28.0, background_terms=3),  # 7 parameters: A = 42
        fit_of(5.18, 0.015, 22.0, points=30),  # three points less: A = 40
        fit_of(5.21, 0.011, 27.0, lines=(LINE,)),  # 8 parameters: A = 43
    )
    family = average(fits)
    expected = np.exp(-0.5 * (np.array([40.0, 42.0, 42.0, 43.0]) - 40.0))
    np.testing.assert_allclose(family.weights, expected / expected.sum())
    assert [fit.reading_deg for fit in family.fits] == [5.18, 5.20, 5.24, 5.21]
    assert family.heaviest.reading_deg == 5.18


def test_mean_and_the_parts_of_the_spread():
    """Hand-worked: equal weights, two windows and two backgrounds."""
    fits = (
        fit_of(5.20, 0.010, 20.0),
        fit_of(5.22, 0.010, 20.0),
        fit_of(5.26, 0.020, 18.0, background_terms=3),
        fit_of(5.28, 0.020, 18.0, background_terms=3),
    )
    family = average(fits)
    np.testing.assert_allclose(family.weights, 0.25)
    assert family.reading_deg == pytest.approx(5.24)
    # Within the backgrounds the windows differ by +-0.01, between them by +-0.03.
    assert family.window_u_deg == pytest.approx(0.01)
    assert family.background_u_deg == pytest.approx(0.03)
    assert family.counting_u_deg == pytest.approx(math.sqrt((1e-4 + 4e-4) / 2))


@pytest.mark.parametrize("seed", range(5))
def test_spread_parts_add_up_to_the_variance_of_the_members(seed):
    rng = np.random.default_rng(seed)
    fits = tuple(
        fit_of(
            5.2 + 0.03 * rng.standard_normal(),
            rng.uniform(0.005, 0.02),
            rng.uniform(20.0, 26.0),
            background_terms=int(rng.integers(2, 4)),
            points=int(rng.integers(30, 34)),
        )
        for _ in range(9)
    )
    family = average(fits)
    readings = np.array([fit.reading_deg for fit in family.fits])
    assert family.weights.sum() == pytest.approx(1.0)
    assert np.all(np.diff(family.weights) <= 0.0)
    assert family.reading_deg == pytest.approx(float(family.weights @ readings))
    total = float(family.weights @ (readings - family.reading_deg) ** 2)
    assert family.window_u_deg**2 + family.background_u_deg**2 == pytest.approx(total)


def test_hopeless_members_are_dropped_and_a_single_one_has_no_spread():
    family = average((fit_of(5.2, 0.01, 20.0), fit_of(6.5, 0.01, 70.0)))
    assert len(family.fits) == 1
    assert family.reading_deg == 5.2
    assert family.window_u_deg == family.background_u_deg == 0.0
    assert family.counting_u_deg == pytest.approx(0.01)


def scan_of(low=2.0, high=9.0, step=0.1, rate=3000.0, seed=3, leave_out=()):
    sketch = window(low=low, high=high, step=step)
    full = counted(sketch, parameters(rate=rate), given(), seed)
    return Scan("s", 30.0, full.reading_deg, full.counts.astype(np.int64), full.dwell_s.copy())


def members(scan, obstacles=(), edge=EDGE_DEG, points=None, around=None):
    points = np.ones(scan.reading_deg.size, dtype=bool) if points is None else points
    return tuple(windows(scan, points, edge, around or given(), obstacles))


def test_windows_stand_around_the_edge():
    scan = scan_of()
    family = members(scan)
    assert len(family) >= 8
    assert {w.background_terms for w in family} == {2, 3}
    starts = {w.reading_deg[0] for w in family}
    ends = {w.reading_deg[-1] for w in family}
    assert len(starts) == 2
    assert len(ends) == 4
    seen = set()
    for w in family:
        key = (w.reading_deg[0], w.reading_deg[-1], w.background_terms, len(w.lines))
        assert key not in seen
        seen.add(key)
        assert np.sum(w.reading_deg < EDGE_DEG - 0.125) >= LEAST_BELOW
        assert np.sum(w.reading_deg > EDGE_DEG + 0.125) >= LEAST_ABOVE
        assert w.counts.size >= w.parameters + 2
        # The upper end is at most 45 % in wavelength beyond the cutoff.
        sines = [math.sin(math.radians(a - 0.08)) for a in (w.reading_deg[-1], EDGE_DEG)]
        assert sines[0] / sines[1] <= 1.4501
        place = np.isin(scan.reading_deg, w.reading_deg)
        np.testing.assert_array_equal(w.counts, scan.counts[place])


def test_points_that_dropped_out_are_in_no_window():
    scan = scan_of()
    points = np.ones(scan.reading_deg.size, dtype=bool)
    points[np.argmin(np.abs(scan.reading_deg - 5.5))] = False
    for w in members(scan, points=points):
        assert not np.any(np.isclose(w.reading_deg, 5.5))
        assert np.any(np.isclose(w.reading_deg, 5.4))


@pytest.mark.parametrize(
    ("obstacles", "lines"),
    [
        ((Obstacle(6.2, 6.9, LINE),), {0, 1}),
        ((Obstacle(6.2, 6.9, None),), {0}),  # an absorption edge is never modelled
        ((Obstacle(5.9, 6.3, OTHER_LINE), Obstacle(6.2, 6.9, LINE)), {0, 2}),
        ((Obstacle(5.9, 6.3, OTHER_LINE), Obstacle(6.8, 7.2, LINE)), {0, 1}),
        ((Obstacle(5.9, 6.3, OTHER_LINE), Obstacle(6.1, 6.5, None)), {0}),
    ],
    ids=["line", "absorption", "two lines as one", "two lines apart", "line on absorption"],
)
def test_obstacles_end_the_windows_or_are_modelled(obstacles, lines):
    family = members(scan_of(), obstacles)
    assert {len(w.lines) for w in family} == lines
    for w in family:
        if not w.lines:
            assert w.reading_deg[-1] <= obstacles[0].from_deg + 1e-9
        else:
            modelled = obstacles[: len(w.lines)]
            assert w.lines == tuple(obstacle.template for obstacle in modelled)
            assert w.reading_deg[-1] > modelled[-1].to_deg
            rest = obstacles[len(w.lines) :]
            assert all(w.reading_deg[-1] <= obstacle.from_deg + 1e-9 for obstacle in rest)


@pytest.mark.parametrize(
    ("low", "high"), [(5.1, 9.0), (2.0, 5.4), (5.0, 5.5)], ids=["late", "early end", "short"]
)
def test_no_window_without_points_on_both_sides(low, high):
    assert members(scan_of(low, high)) == ()


@pytest.mark.parametrize("offset", [-0.25, -0.1, 0.0, 0.15, 0.3])
def test_a_first_guess_that_is_off_does_not_matter(offset):
    around, true = given(), parameters(rate=3000.0)
    full = counted(window(), true, around, seed=6)
    reference = best_start(full, EDGE_DEG, around)
    found = best_start(full, EDGE_DEG + offset, around)
    assert found.maximum.converged
    assert found.reading_deg == pytest.approx(
        reference.reading_deg, abs=0.1 * reference.reading_u_deg
    )
    assert abs(found.reading_deg - EDGE_DEG) < 4.0 * found.reading_u_deg


def test_first_parameters_are_of_the_right_kind():
    around = given()
    full = counted(window(3, (LINE,)), parameters(3, 1), around, seed=1)
    start = first_parameters(full, EDGE_DEG, around)
    assert start.size == full.parameters
    assert start[0] == EDGE_DEG
    assert np.all(np.isfinite(start))
    assert start[1] == pytest.approx(math.log(6000.0), abs=1.5)
    assert start[4] == pytest.approx(math.log(1.5), abs=0.8)
    empty = replace(full, counts=np.zeros(full.counts.size))
    assert np.all(np.isfinite(first_parameters(empty, EDGE_DEG, around)))


def test_family_of_a_real_scan():
    around = given()
    scan = scan_of()
    every = members(scan)
    start = best_start(every[0], EDGE_DEG, around)
    family = fit_family(every, start, around)
    assert family is not None
    u = math.hypot(family.counting_u_deg, family.window_u_deg, family.background_u_deg)
    assert abs(family.reading_deg - EDGE_DEG) < 4.0 * u
    assert family.counting_u_deg < 0.03
    assert all(fit.maximum.converged for fit in family.fits)
    # No direct fit of a member lies elsewhere.
    for fit in family.fits[:3]:
        again = best_start(fit.window, EDGE_DEG, around)
        assert again.reading_deg == pytest.approx(fit.reading_deg, abs=0.1 * fit.reading_u_deg)


def test_no_family_if_no_member_settles():
    around = given()
    empty = counted(window(), parameters(rate=1e-9), around)
    start = best_start(empty, EDGE_DEG, around)
    outside = replace(empty, reading_deg=empty.reading_deg + 20.0)
    assert fit_family((), start, around) is None
    assert fit_family((outside,), start, around) is None
