"""Cutoffs of whole runs: against simulated truth, and what they carry to the report."""

import math
from dataclasses import replace

import numpy as np
import pytest
from simulated import TRUTH, five_voltages, simulated, voltages

from hdetermine.inference import measurement as names
from hdetermine.inference.anglescale import angle_scale
from hdetermine.inference.cutoffs import find_cutoffs
from hdetermine.inference.shared import SMOOTH_NAMES


@pytest.fixture(scope="module")
def found():
    run, truth = five_voltages()
    scale = angle_scale(run)
    return run, truth, scale, find_cutoffs(run, scale)


def own_u(cutoff):
    return math.hypot(cutoff.counting_u_deg, cutoff.window_u_deg, cutoff.background_u_deg)


def test_truth_is_found(found):
    _, truth, _, (_, _, cutoffs) = found
    pulls = []
    for cutoff, limit in zip(cutoffs, truth.limits, strict=True):
        assert cutoff.used
        assert cutoff.scan == limit.scan
        # Shape, smooth factor and width bring less than the counts of a scan here.
        pulls.append((cutoff.reading_deg - limit.reading_deg) / own_u(cutoff))
        assert cutoff.wavelength_pm == pytest.approx(limit.wavelength_pm, rel=0.01)
    assert np.all(np.abs(pulls) < 4.0)
    assert abs(np.mean(pulls)) < 2.0


def test_uncertainties_are_of_the_right_size(found):
    for cutoff in found[3][2]:
        assert 0.001 < cutoff.counting_u_deg < 0.03
        assert cutoff.window_u_deg < 0.02
        assert cutoff.lower_u_deg == pytest.approx(cutoff.counting_u_deg, rel=0.4)
        assert cutoff.upper_u_deg == pytest.approx(cutoff.counting_u_deg, rel=0.4)
        assert math.isnan(cutoff.standard_uncertainty_pm)  # the relation will tell it


def test_the_family_is_shown(found):
    for cutoff in found[3][2]:
        weights = [fit.weight for fit in cutoff.windows]
        assert sum(weights) == pytest.approx(1.0)
        assert weights == sorted(weights, reverse=True)
        mean = sum(fit.weight * fit.reading_deg for fit in cutoff.windows)
        assert cutoff.reading_deg == pytest.approx(mean)
        assert cutoff.fixed_window is None
        first = cutoff.windows[0]
        assert cutoff.deviance == first.deviance
        assert cutoff.degrees_of_freedom == first.degrees_of_freedom


def test_responses_name_every_input_that_the_fits_assumed(found):
    expected = {
        names.ZERO, names.RESOLUTION, names.KERNEL, names.EXCESS, names.EXCESS_ENERGY,
        names.DEAD_TIME, *SMOOTH_NAMES,
    }  # fmt: skip
    for cutoff in found[3][2]:
        assert set(cutoff.responses_deg) == expected
        assert all(math.isfinite(value) for value in cutoff.responses_deg.values())
        # A larger excess near the limit lets the fit see the rise later.
        assert cutoff.responses_deg[names.EXCESS] > 0.0


def test_curve_is_the_heaviest_fit(found):
    run, _, _, (_, _, cutoffs) = found
    for scan, cutoff in zip(run.scans, cutoffs, strict=True):
        curve, first = cutoff.curve, cutoff.windows[0]
        inside = curve.reading_deg[curve.in_window]
        assert inside[0] == first.from_deg
        assert inside[-1] == first.to_deg
        expected = curve.expected_counts[curve.in_window]
        counts = curve.counts[curve.in_window]
        terms = 2.0 * (expected - counts + counts * np.log(np.maximum(counts, 1e-300) / expected))
        assert np.sum(terms) == pytest.approx(cutoff.deviance, rel=1e-6)
        assert np.all(curve.background_counts[curve.in_window] <= expected + 1e-9)
        # The far tails of a modelled line reach below the edge too.
        below = curve.in_window & (curve.reading_deg < cutoff.reading_deg - 0.5)
        np.testing.assert_allclose(
            curve.background_counts[below], curve.expected_counts[below], rtol=0.01
        )
        assert np.all(np.isnan(curve.expected_counts[~curve.in_window]))
        place = np.isin(scan.reading_deg, curve.reading_deg)
        np.testing.assert_array_equal(curve.counts, scan.counts[place])


def test_progress_comes_once_a_scan(found):
    run, _, scale, _ = found
    seen = []
    find_cutoffs(run, scale, lambda *step: seen.append(step))
    assert seen == [("edges", i + 1, 5) for i in range(5)]


def spoil(run, change, kV=30.0):
    return replace(
        run,
        scans=tuple(
            replace(scan, counts=np.asarray(change(scan), dtype=np.int64))
            if scan.tube_voltage_kV == kV
            else scan
            for scan in run.scans
        ),
    )


@pytest.mark.parametrize(
    "change",
    [
        lambda s: s.counts * (s.reading_deg < 5.0),
        lambda s: np.where(s.reading_deg > 4.8, s.counts // 4, s.counts),
        lambda s: s.counts[::-1],
    ],
    ids=["tripped", "current fell", "reversed"],
)
def test_one_bad_scan_does_not_drag_the_others_along(found, change):
    """The smooth factor is shared: a scan that no smooth factor describes must not set it."""
    run, _, scale, (_, _, cutoffs) = found
    _, _, others = find_cutoffs(spoil(run, change), scale)
    for before, after in zip(cutoffs, others, strict=True):
        if before.tube_voltage_kV != 30.0:
            assert after.used
            # A voice less in the shared numbers moves little.
            assert abs(after.reading_deg - before.reading_deg) < 0.5 * own_u(before)
    bad = others[2]
    assert not bad.used or abs(bad.reading_deg - cutoffs[2].reading_deg) < 4.0 * own_u(bad)


def test_a_dropout_is_left_out_and_said(found):
    run, _, scale, (_, _, cutoffs) = found
    holed = spoil(run, lambda s: np.where(np.abs(s.reading_deg - 4.6) < 0.01, 0, s.counts))
    _, _, others = find_cutoffs(holed, scale)
    assert "dropped out, not used: the point at 4.6°" in others[2].remarks
    assert others[2].reading_deg == pytest.approx(
        cutoffs[2].reading_deg, abs=2.0 * own_u(others[2])
    )
    assert not any("dropped out" in remark for remark in others[1].remarks)


def test_scatter_beyond_poisson_widens_the_uncertainty_and_is_said(found):
    """Counts that scatter twice as much as Poisson counts would, by an unsteady current."""
    run, _, scale, (_, _, cutoffs) = found
    rng = np.random.default_rng(4)
    wild = spoil(
        run,
        lambda s: np.maximum(
            np.round(s.counts + rng.normal(0.0, 1.7 * np.sqrt(s.counts + 1.0))), 0
        ),
    )
    _, _, others = find_cutoffs(wild, scale)
    assert others[2].used
    assert any("scatter more than Poisson" in remark for remark in others[2].remarks)
    assert others[2].counting_u_deg > 1.4 * cutoffs[2].counting_u_deg


@pytest.mark.parametrize(
    ("ends", "given"),
    [((3.4, 5.4), "both"), ((None, 5.4), "upper"), ((3.4, None), "lower")],
    ids=["both", "upper", "lower"],
)
def test_a_window_fixed_by_the_user(found, ends, given):
    run, _, scale, (_, _, cutoffs) = found
    scans = tuple(
        replace(scan, fit_from_deg=ends[0], fit_to_deg=ends[1])
        if scan.tube_voltage_kV == 30.0
        else scan
        for scan in run.scans
    )
    _, _, fixed = find_cutoffs(replace(run, scans=scans), scale)
    window = fixed[2].fixed_window
    assert window is not None
    if ends[0] is not None:
        assert window.from_deg == pytest.approx(ends[0], abs=0.051)
    if ends[1] is not None:
        assert window.to_deg == pytest.approx(ends[1], abs=0.051)
    # Its reading is the one that counts, and it agrees with the family.
    assert fixed[2].reading_deg == window.reading_deg
    assert fixed[2].reading_deg == pytest.approx(
        cutoffs[2].reading_deg, abs=4.0 * own_u(cutoffs[2])
    )
    assert fixed[2].window_u_deg == 0.0
    assert cutoffs[2].fixed_window is None


def test_width_from_the_edges_without_lines():
    run, truth = simulated(
        voltages(24, 28, 33, 38), {**TRUTH, "to_deg": 5.8, "resolution_deg": 0.4}, seed=2
    )
    scale = angle_scale(run)
    assert math.isinf(scale.resolution.standard_uncertainty)
    after, shared, cutoffs = find_cutoffs(run, scale)
    assert after.resolution_from == "edges"
    assert shared.width_free
    width = after.resolution
    assert abs(width.value - truth.truth.resolution_deg) < 4.0 * width.standard_uncertainty
    assert width.standard_uncertainty < 0.1
    assert after.edge_pull is None
    zero = scale.zero.value - truth.truth.zero_deg  # nothing tells the zero here
    assert zero == pytest.approx(-0.07)
    assert sum(cutoff.used for cutoff in cutoffs) >= 3


def test_width_of_the_run_sheet_and_of_the_edges():
    run, _ = simulated(
        voltages(24, 28, 33, 38),
        {**TRUTH, "to_deg": 5.8, "resolution_deg": 0.3},
        seed=2,
        goniometer={"resolution_deg": {"value": 0.3, "u": 0.01}},
    )
    after, shared, _ = find_cutoffs(run, angle_scale(run))
    assert after.resolution_from == "run sheet and edges"
    assert shared.width_free
    assert after.resolution.standard_uncertainty < 0.01


def test_edges_and_lines_agree_on_the_width(found):
    scale = found[3][0]
    assert scale.resolution_from == "lines"
    assert abs(scale.edge_pull) < 3.0
    assert scale.edge_resolution_deg == pytest.approx(0.25, abs=0.06)
    assert 0.0 < scale.edge_resolution_u_deg < 0.3


@pytest.mark.parametrize("seed", [3, 6])
def test_a_width_that_brings_no_gain_is_not_boundless(seed):
    """Few counts: the deviance hardly falls with a width of their own, and that says little."""
    run, _ = simulated(
        voltages(24, 29, 35, dwell_s=1.0), {**TRUTH, "resolution_deg": 0.3}, seed=seed
    )
    scale, _, _ = find_cutoffs(run, angle_scale(run))
    assert 0.02 < scale.edge_resolution_u_deg < 0.1
    assert abs(scale.edge_pull) < 1.0


def test_edges_smeared_unlike_the_lines_are_fitted_with_their_own_width(found):
    """A supply whose voltage ripples smears the edges and leaves the lines alone."""
    run, _, scale, _ = found
    narrow = replace(
        scale, resolution=replace(scale.resolution, value=0.12, standard_uncertainty=0.003)
    )
    after, shared, _ = find_cutoffs(run, narrow)
    assert after.edge_pull > 3.0
    assert shared.width_free
    assert after.resolution_from == "edges, against the lines"
    assert after.resolution.value == pytest.approx(0.25, abs=0.06)
    assert any("the edges are smeared over" in remark for remark in after.remarks)


def test_no_usable_scan_at_all(found):
    run, _, scale, _ = found
    empty = replace(run, scans=tuple(replace(scan, counts=0 * scan.counts) for scan in run.scans))
    _, shared, cutoffs = find_cutoffs(empty, scale)
    assert shared is None
    assert [cutoff.used for cutoff in cutoffs] == [False] * 5
    assert all(cutoff.reason for cutoff in cutoffs)
