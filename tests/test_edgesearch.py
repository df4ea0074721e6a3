"""The first look for an edge, on simulated scans and on scans without any."""

import numpy as np
import pytest
from simulated import TRUTH, simulated, voltages

from hdetermine.inference.edgesearch import rising_part, search_edge
from hdetermine.records.scan import Scan

NEAR_DEG = 0.3  # a first look need be no better than the width of the smearing


def clear_of_lines(scan, *, low=6.0, high=7.8):
    """Points away from the K lines of molybdenum in NaCl, which 20 kV do not excite."""
    if scan.tube_voltage_kV <= 20.0:
        return np.ones(scan.reading_deg.size, dtype=bool)
    return (scan.reading_deg < low) | (scan.reading_deg > high)


@pytest.mark.parametrize(
    ("dwell", "more"),
    [
        (10.0, {}),
        (1.0, {}),
        (10.0, {"direct_beam_per_s": 60.0, "direct_beam_width_deg": 0.6}),
        (10.0, {"background_per_s": 40.0, "background_slope_per_deg": -3.0}),
        (10.0, {"resolution_deg": 0.5}),
        (4.0, {"from_deg": 2.0, "to_deg": 12.0, "step_deg": 0.05}),
        (10.0, {"step_deg": 0.2}),
    ],
    ids=["plain", "few counts", "direct beam", "background", "broad", "fine steps", "coarse"],
)
def test_edges_are_seen(dwell, more):
    run, truth = simulated(voltages(20, 25, 30, 35, 40, dwell_s=dwell), {**TRUTH, **more}, seed=5)
    for scan, limit in zip(run.scans, truth.limits, strict=True):
        found = search_edge(scan, clear_of_lines(scan))
        assert found is not None, scan.name
        assert abs(found - limit.reading_deg) < NEAR_DEG, scan.name


def flat(rate, seed=0, points=80, beam=0.0, slope=0.0, dwell=10.0):
    readings = 2.5 + 0.1 * np.arange(points)
    mean = np.maximum(rate + slope * (readings - 2.5), 0.0) + beam * np.exp(-(readings - 2.5) / 0.5)
    counts = np.random.default_rng(seed).poisson(mean * dwell)
    return Scan("flat", 20.0, readings, counts, np.full(points, dwell))


@pytest.mark.parametrize("seed", range(6))
@pytest.mark.parametrize(
    "kind",
    [
        {"rate": 0.0},
        {"rate": 0.6},
        {"rate": 50.0},
        {"rate": 3.0, "beam": 80.0},
        {"rate": 2.0, "slope": 0.2},
        {"rate": 5.0, "slope": -0.5},
    ],
    ids=str,
)
def test_no_edge_is_seen_where_there_is_none(kind, seed):
    scan = flat(seed=seed, **kind)
    assert search_edge(scan, np.ones(scan.counts.size, dtype=bool)) is None


@pytest.mark.parametrize("points", [1, 3, 7])
def test_a_scan_too_short_to_look_at(points):
    scan = flat(5.0, points=points)
    assert search_edge(scan, np.ones(points, dtype=bool)) is None
    assert not rising_part(scan, np.ones(points, dtype=bool)).any()


def test_a_scan_all_lines_is_not_looked_at():
    scan = flat(5.0)
    assert search_edge(scan, np.zeros(scan.counts.size, dtype=bool)) is None


def test_rising_part_ends_where_the_continuum_stops_rising():
    run, truth = simulated(voltages(30), {**TRUTH, "to_deg": 12.0}, seed=2)
    (scan,) = run.scans
    clear = clear_of_lines(scan)
    keep = rising_part(scan, clear)
    edge = truth.limits[0].reading_deg
    assert keep[scan.reading_deg < edge + 0.3].all()
    assert not keep[scan.reading_deg > 1.9 * edge].any()
    assert not keep[~clear].any()


def test_a_line_in_the_way_is_passed_over():
    """The K lines stand right above the edge at 22.5 kV; masked, they mislead nobody."""
    strong = {**TRUTH, "line_strengths_deg": {"K-L2,3": 8.0, "K-M2,3": 3.0}}
    run, truth = simulated(voltages(22.5), strong, seed=3)
    (scan,) = run.scans
    found = search_edge(scan, clear_of_lines(scan, low=5.95, high=7.75))
    assert found == pytest.approx(truth.limits[0].reading_deg, abs=NEAR_DEG)
