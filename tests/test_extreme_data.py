"""Legal data at their extremes: many scans, many points, one voltage, uneven steps and times.

Scans without counts, with a single one, or with the edge at an end are in test_refusals.py.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from simulated import TRUTH, five_voltages, simulated, voltages

from hdetermine.determination import determine


def linear(run):
    return determine(run, posterior=False, monte_carlo=False)


def named(scans):
    """Scans of one voltage need names of their own."""
    return [{**scan, "name": f"s{number}"} for number, scan in enumerate(scans)]


def test_all_scans_at_one_voltage():
    run, _ = simulated(named(voltages(*[30] * 5)), TRUTH, seed=3)
    d = linear(run)
    assert len(d.used) == 5
    assert abs(d.comparison.E_n) < 1.0
    untested = {check.name for check in d.checks if check.passed is None}
    assert untested
    # Five scans of one voltage share the gain: they cannot beat a single one by the root of five.
    alone = linear(replace(run, scans=run.scans[:1]))
    ratio = d.h.standard_uncertainty_J_s / alone.h.standard_uncertainty_J_s
    assert 0.5 < ratio < 1.0


def test_dwell_changes_between_scans():
    scans = [
        {**scan, "dwell_s": dwell}
        for scan, dwell in zip(voltages(24, 28, 32, 36), (40.0, 2.0, 10.0, 90.0), strict=True)
    ]
    run, _ = simulated(scans, TRUTH, seed=3)
    d = linear(run)
    assert [cutoff.used for cutoff in d.cutoffs] == [True] * 4
    assert abs(d.comparison.E_n) < 1.0
    counting = {cutoff.scan: cutoff.counting_u_deg for cutoff in d.cutoffs}
    assert counting["u28"] > 2.0 * counting["u36"]


def test_dwell_and_step_change_inside_a_scan():
    """Above its edge each scan goes on in steps twice as wide, and counts for half the time."""
    run, _ = five_voltages()
    whole = linear(run)
    chance = np.random.default_rng(5)
    scans = []
    for scan, cutoff in zip(run.scans, whole.cutoffs, strict=True):
        beyond = scan.reading_deg > cutoff.reading_deg + 0.3
        keep = ~beyond | (np.arange(scan.counts.size) % 2 == 0)
        halved = np.where(beyond, chance.binomial(scan.counts, 0.5), scan.counts)
        dwell = np.where(beyond, scan.dwell_s / 2.0, scan.dwell_s)
        scans.append(
            replace(
                scan,
                reading_deg=scan.reading_deg[keep],
                counts=halved[keep],
                dwell_s=dwell[keep],
            )
        )
    d = linear(replace(run, scans=tuple(scans)))
    assert abs(d.comparison.E_n) < 1.0
    for before, after in zip(whole.cutoffs, d.cutoffs, strict=True):
        assert after.used
        assert abs(after.reading_deg - before.reading_deg) < 3.0 * after.counting_u_deg


def test_twenty_thousand_points_a_scan():
    fine = {**TRUTH, "to_deg": 22.5, "step_deg": 0.001}
    run, _ = simulated(voltages(26, 32, 38, dwell_s=0.1), fine, seed=3)
    assert all(scan.counts.size >= 20_000 for scan in run.scans)
    d = linear(run)
    assert [cutoff.used for cutoff in d.cutoffs] == [True] * 3
    assert abs(d.comparison.E_n) < 1.0


@pytest.mark.slow
def test_a_hundred_scans():
    scans = named(voltages(*np.linspace(24.0, 38.0, 100)))
    run, _ = simulated(scans, TRUTH, seed=3)
    d = linear(run)
    assert len(d.cutoffs) == 100
    assert len(d.used) > 90
    assert abs(d.comparison.E_n) < 1.0
