"""Screening: what was done to counts is seen, and sound counts raise no alarm."""

from __future__ import annotations

import numpy as np
import pytest
from closure.screening_study import alarms_of, copied_stretch, count_alarms, sound_runs
from closure.students import make_bench

from hdetermine.classcheck.countscatter import (
    common_divisor,
    last_digit_probability,
    measure_scatter,
    steep_features,
)
from hdetermine.classcheck.screening import screen_counts, screen_scans
from hdetermine.classcheck.screens import CLASS_CHANCE, FAMILIES, FAMILY_CHANCE, Look, raise_alarms
from hdetermine.classcheck.stretches import find_stretches, make_trace
from hdetermine.records.run import Run
from hdetermine.records.scan import Scan

RNG = np.random.default_rng(8)


def scatter_of(counts, dead_time_s=0.0):
    n = len(counts)
    return measure_scatter(
        np.asarray(counts), np.full(n, 10.0), dead_time_s, np.ones(n, dtype=bool)
    )


def changed(run, change):
    """The run with its counts changed."""
    scans = []
    for scan in run.scans:
        counts = np.asarray(change(scan.counts.copy())).astype(np.int64)
        scans.append(
            Scan(scan.name, scan.tube_voltage_kV, scan.reading_deg.copy(), counts,
                 scan.dwell_s.copy())
        )  # fmt: skip
    return Run(run.title, run.date, run.operator, run.laboratory, run.apparatus, tuple(scans))


@pytest.fixture(scope="module")
def run():
    return make_bench(5, zero_deg=0.2).run


def titles(run, looks=24):
    found = screen_counts(run, 0.2, 0.02, 0.4)
    return {
        (alarm.title, alarm.where)
        for family in FAMILIES
        for alarm in raise_alarms([one for one in found if one.family == family], looks)
    }


def test_poisson_counts_pass_whatever_their_number():
    for mean in (3.0, 30.0, 3000.0):
        low, high = [], []
        for _ in range(300):
            below, above = scatter_of(RNG.poisson(mean, 120)).probabilities()
            low.append(below)
            high.append(above)
        assert min(low) > 1e-5
        assert min(high) > 1e-5
        assert 0.3 < np.mean(np.array(high) < 0.5) < 0.7


def test_sound_run_raises_nothing(run):
    assert titles(run) == set()
    assert [remark for remark in screen_scans(run, ()) if remark.is_alarm] == []


def test_smoothed_divided_and_unstable_counts_are_seen(run):
    def smoothed(counts):
        return np.rint(np.convolve(counts, np.ones(3) / 3.0, mode="same"))

    def divided(counts):
        return np.rint(counts / 10.0)

    def multiplied(counts):
        return counts * 3 + RNG.integers(0, 2, counts.size)

    for change in (smoothed, divided, multiplied):
        assert ("scatter is not Poisson's", "all scans") in titles(changed(run, change)), change


def test_dead_time_makes_counts_more_regular_without_an_alarm():
    # Recorded counts of a busy counter: variance N (1 - m tau)^2 (Knoll, from memory).
    mean, dead_time_s = 6000.0, 4e-4
    live = 1.0 - mean / 10.0 * dead_time_s
    low = [
        scatter_of(np.rint(RNG.normal(mean, np.sqrt(mean) * live, 150)), dead_time_s)
        for _ in range(50)
    ]
    assert min(one.probabilities()[0] for one in low) > 1e-5
    assert np.mean([one.ratio for one in low]) < 0.65


def test_last_digits():
    invented = RNG.choice([100, 105, 110, 125, 130, 150], 300)
    _, probability, number = last_digit_probability([invented])
    assert number == 300
    assert probability < 1e-10
    _, fair, _ = last_digit_probability([RNG.poisson(200.0, 300)])
    assert fair > 1e-3
    assert last_digit_probability([np.array([50, 60])])[1] == 1.0


def test_multiples_and_gaps_and_saturation(run):
    doubled = changed(run, lambda counts: 2 * counts)
    assert {remark.title for remark in screen_scans(doubled, ()) if remark.is_alarm} >= {
        "counts are multiples"
    }
    assert common_divisor(np.array([5, 7, 9])) == 1
    scan = run.scans[0]
    keep = np.delete(np.arange(scan.counts.size), [20, 21])
    holed = Scan("s", 20.0, scan.reading_deg[keep], scan.counts[keep], scan.dwell_s[keep])
    busy = Scan("b", 20.0, scan.reading_deg.copy(), scan.counts * 0 + 60000, scan.dwell_s.copy())
    other = Run("", "", "", "", run.apparatus, (holed, busy))
    assert {remark.title for remark in screen_scans(other, ())} >= {
        "missing angles", "counter near saturation"
    }  # fmt: skip


def test_features_are_peaks_and_steps_not_noise():
    counts = RNG.poisson(100.0, 200)
    counts[90:95] += np.array([200, 500, 800, 500, 200])
    marked = steep_features(counts)
    assert marked[88:97].all()
    assert marked.sum() < 40


def test_bar_divides_the_chance_among_the_looks():
    assert pytest.approx(CLASS_CHANCE) == FAMILY_CHANCE * len(FAMILIES)
    look = Look("digits", "all scans", 30.0, "chi squared", 1e-5, True, "Words.")
    assert len(raise_alarms([look], 100)) == 1
    assert raise_alarms([look], 1000) == []
    assert raise_alarms([Look("digits", "", 1.0, "", 0.0, False, "")], 1) == []
    assert alarms_of([[look]]) == ["digits: 30"]


def traces(*counts):
    return [
        make_trace(group, 1, "scan 1", np.arange(len(one)) * 0.1, np.asarray(one))
        for group, one in enumerate(counts)
    ]


def test_copied_stretches():
    one, other = RNG.poisson(60.0, 80), RNG.poisson(60.0, 80)
    assert find_stretches(traces(one, other), FAMILY_CHANCE) == []
    other[30:45] = one[30:45]
    (found,) = find_stretches(traces(one, other), FAMILY_CHANCE)
    assert (found.first_start, found.second_start) == (30, 30)
    assert found.length >= 15
    assert found.same_angles
    shifted = RNG.poisson(60.0, 80)
    shifted[50:65] = one[10:25]
    (moved,) = find_stretches(traces(one, shifted), FAMILY_CHANCE)
    assert not moved.same_angles


def test_zeros_are_no_copy():
    empty = np.zeros(100, dtype=np.int64)
    few = RNG.poisson(0.05, 100)
    assert find_stretches(traces(empty, few, empty), FAMILY_CHANCE) == []


def test_a_sound_class_raises_nothing_and_a_copy_is_found():
    """The quick part of `closure.screening_study`."""
    rng = np.random.default_rng(2)
    for seed in (1, 2):
        runs = sound_runs(6, seed)
        assert count_alarms(runs) == []
        assert copied_stretch(runs, rng)
