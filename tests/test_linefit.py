"""Lines in one scan: what is expected, where it is found, how wide it is."""

import numpy as np
import pytest
from simulated import TRUTH, simulated, voltages

from hdetermine.inference.linefit import fit_lines, search_zero
from hdetermine.inference.linesearch import absorption_edges, scan_features

LINES_TRUTH = {**TRUTH, "from_deg": 18.0, "to_deg": 54.0, "second_order": 0.1}
W_STRENGTHS = {"L3-M4,5": 1.0, "L2-M4": 0.6, "L3-N5": 0.2, "L2-N4": 0.15, "L1-M3": 0.1}


def run_of(anode, crystal, truth, seed, dwell=5.0):
    return simulated(voltages(35, dwell_s=dwell), truth, seed, anode, crystal)


def fitted(run, guess):
    counter = run.apparatus.counter
    (scan,) = run.scans
    return fit_lines(
        scan,
        scan_features(run, scan),
        guess,
        counter.dead_time_us.value,
        counter.dead_time_model,
        absorption_edges(run),
    )


CASES = {
    # anode, crystal, truth, lines that must be found, tolerance of the width
    "Gaussian": ("Cu", "LiF", {"kernel": "gaussian"}, ("Cu K-M2,3", "Cu K-L2,3"), 0.07),
    "triangular": ("Cu", "LiF", {"kernel": "triangular"}, ("Cu K-M2,3", "Cu K-L2,3"), 0.06),
    "narrow": ("Cu", "LiF", {"resolution_deg": 0.15}, ("Cu K-M2,3", "Cu K-L2,3"), 0.06),
    "broad": ("Cu", "LiF", {"resolution_deg": 0.6}, ("Cu K-L2,3",), 0.06),
    "second order": ("Cu", "LiF", {}, ("Cu K-M2,3 (n = 2)", "Cu K-L2,3 (n = 2)"), 0.12),
    "tungsten": ("W", "LiF", {"from_deg": 14.0, "line_strengths_deg": W_STRENGTHS},
                 ("W L2-M4", "W L3-M4,5"), 0.08),
    "close pair": ("Mo", "NaCl", {"from_deg": 5.0, "to_deg": 9.5}, ("Mo K-L2,3",), 0.08),
    "dead time": ("Cu", "LiF", {"dead_time_us": 90.0, "continuum_per_s": 2500.0},
                  ("Cu K-M2,3", "Cu K-L2,3"), 0.05),
    "far zero": ("Cu", "LiF", {"zero_deg": -0.9}, ("Cu K-M2,3", "Cu K-L2,3"), 0.05),
}  # fmt: skip


@pytest.mark.parametrize("case", CASES)
def test_lines_are_found_within_their_uncertainty(case):
    anode, crystal, more, expected, tolerance = CASES[case]
    pulls = []
    for seed in (1, 2, 3):
        run, simulation = run_of(anode, crystal, {**LINES_TRUTH, **more}, seed)
        truth = simulation.truth
        found = {line.feature.label: line for line in fitted(run, truth.zero_deg + 0.04)}
        for label in expected:
            line = found[label]
            pulls.append((line.shift_deg - truth.zero_deg) / line.shift_u_deg)
            assert abs(line.fwhm_deg / truth.resolution_deg - 1.0) < tolerance, label
            assert line.significance > 8.0
            assert line.scan == "u35"
    assert np.all(np.abs(pulls) < 4.5)
    assert abs(np.mean(pulls)) < 1.8


@pytest.mark.parametrize(
    ("kernel", "low", "high"), [("gaussian", 0.0, 0.15), ("triangular", 0.75, 1.0)]
)
def test_the_form_of_the_kernel_is_told(kernel, low, high):
    run, simulation = run_of("Cu", "LiF", {**LINES_TRUTH, "kernel": kernel}, 4)
    found = {line.feature.label: line for line in fitted(run, simulation.truth.zero_deg)}
    strongest = found["Cu K-L2,3"]
    assert low <= strongest.triangular_fraction <= high
    assert strongest.triangular_fraction_u < 0.2


@pytest.mark.parametrize("depth", [0.5, 1.5])
def test_the_edge_of_a_filter_does_not_widen_the_lines(depth):
    """Zirconium before molybdenum: its absorption edge stands between the K-M and K-L lines."""
    pulls = []
    for seed in (1, 2, 3):
        run, simulation = simulated(
            voltages(35, dwell_s=10.0),
            {**TRUTH, "from_deg": 5.0, "filter_depth": depth},
            seed,
            tube={"filter": "Zr"},
        )
        truth = simulation.truth
        line = next(one for one in fitted(run, truth.zero_deg) if "K-L2,3" in one.feature.label)
        pulls.append(
            (
                (line.shift_deg - truth.zero_deg) / line.shift_u_deg,
                (line.fwhm_deg - truth.resolution_deg) / line.fwhm_u_deg,
            )
        )
    assert np.all(np.abs(pulls) < 4.0)
    assert np.all(np.abs(np.mean(pulls, axis=0)) < 2.0)


@pytest.mark.parametrize("seed", [9, 10, 11])
def test_a_line_hardly_seen_does_not_join_its_strong_neighbours(seed):
    """The weak second order of K-M may be fitted broad; the first orders stay apart."""
    run, _ = simulated(
        voltages(35, dwell_s=5.0),
        {**TRUTH, "from_deg": 4.0, "to_deg": 17.0, "resolution_deg": 0.14, "step_deg": 0.05},
        seed,
    )
    assert {"Mo K-M2,3", "Mo K-L2,3"} <= {line.feature.label for line in fitted(run, 0.07)}


def test_a_weak_line_knows_less_than_a_strong_one():
    run, simulation = run_of("Cu", "LiF", LINES_TRUTH, 5)
    found = {line.feature.label: line for line in fitted(run, simulation.truth.zero_deg)}
    strong, weak = found["Cu K-L2,3"], found["Cu K-M2,3 (n = 2)"]
    assert strong.shift_u_deg < 0.5 * weak.shift_u_deg
    assert strong.significance > 2.0 * weak.significance
    # Form of the kernel: a weak line tells hardly more than its prior, 0.29.
    assert weak.triangular_fraction_u > strong.triangular_fraction_u


@pytest.mark.parametrize("zero", [-0.6, 0.0, 0.45])
def test_search_zero(zero):
    run, _ = run_of("Cu", "LiF", {**LINES_TRUTH, "zero_deg": zero}, 2)
    (scan,) = run.scans
    found = search_zero(scan, scan_features(run, scan), 0.0, 0.7)
    assert found is not None
    assert found[0] == pytest.approx(zero, abs=0.1)
    assert found[1] > 20.0


def test_search_zero_without_lines():
    bare = {**LINES_TRUTH, "line_strengths_deg": {"K-L2,3": 0.0, "K-M2,3": 0.0}}
    run, _ = run_of("Cu", "LiF", bare, 2)
    (scan,) = run.scans
    found = search_zero(scan, scan_features(run, scan), 0.0, 0.7)
    assert found is None or found[1] < 8.0
    assert search_zero(scan, (), 0.0, 0.7) is None
