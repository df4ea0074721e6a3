"""Steps far below the resolution are summed; nothing else changes."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from hdetermine.inference.gathering import FINEST_DEG, gathered_scan
from hdetermine.records.scan import Scan


def scan(step_deg: float, points: int) -> Scan:
    reading = 3.0 + step_deg * np.arange(points)
    counts = np.random.default_rng(5).poisson(4.0, points).astype(np.int64)
    return Scan("a", 30.0, reading, counts, np.full(points, 0.5))


@pytest.mark.parametrize("step_deg", [0.05, 0.1, 0.2, 0.015])
def test_ordinary_steps_stay(step_deg):
    dense = scan(step_deg, 40)
    assert gathered_scan(dense) is dense


@pytest.mark.parametrize(("step_deg", "points"), [(0.001, 20_000), (0.003, 997), (0.0005, 31)])
def test_fine_steps_are_summed_without_loss(step_deg, points):
    dense = scan(step_deg, points)
    few = gathered_scan(dense)
    assert few.reading_deg.size <= points * step_deg / FINEST_DEG + 2
    assert few.counts.sum() == dense.counts.sum()
    assert few.dwell_s.sum() == pytest.approx(dense.dwell_s.sum())
    assert np.average(few.reading_deg, weights=few.dwell_s) == pytest.approx(
        dense.reading_deg.mean()
    )
    assert np.all(np.diff(few.reading_deg) > 0.0)


def test_a_change_of_step_inside_the_scan_keeps_the_coarse_part():
    fine, coarse = scan(0.002, 900), scan(0.1, 30)
    both = replace(
        fine,
        reading_deg=np.concatenate([fine.reading_deg, 5.0 + 0.1 * np.arange(30)]),
        counts=np.concatenate([fine.counts, coarse.counts]),
        dwell_s=np.concatenate([fine.dwell_s, coarse.dwell_s]),
    )
    few = gathered_scan(both)
    assert np.array_equal(few.counts[-30:], coarse.counts)
    assert np.all(few.dwell_s[:80] > 4.0)
