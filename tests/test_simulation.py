"""Simulated runs: truth in, counts out."""

import math

import numpy as np
import pytest

from hdetermine.errors import InputError
from hdetermine.planning.simulation import simulate_run
from hdetermine.planning.spectrum import TubeSpectrum

SHEET = {
    "schema": 1,
    "run": {"title": "Simulated"},
    "tube": {"anode": "Mo"},
    "crystal": {"material": "NaCl", "reflection": "200", "temperature_C": 26.0},
    "goniometer": {"step_deg": 0.1},
    "scan": [
        {"file": f"mo{kV}.csv", "tube_voltage_kV": float(kV), "dwell_s": 10.0}
        for kV in (20, 25, 35)
    ],
}
TRUTH = {"from_deg": 2.5, "to_deg": 10.0, "resolution_deg": 0.25, "dead_time_us": 90.0}


def test_limits_follow_the_inverse_relation():
    # hc/lambda = e(gain U + offset)(1 + ripple) + phi; 1239.841984 pm kV is exact in the SI.
    truth = {
        **TRUTH, "voltage_gain": 1.01, "voltage_offset_kV": 0.1, "ripple": 0.002,
        "cathode_work_function_eV": 4.5, "voltage_repeatability_kV": [0.0, 0.05, 0.0],
        "refraction": 0.0, "zero_deg": 0.2, "spacing_pm": 282.0,
    }  # fmt: skip
    _, simulated = simulate_run(SHEET, truth, 1)
    energies = [(1.01 * 20 + 0.1) * 1.002, (1.01 * 25 + 0.15) * 1.002, (1.01 * 35 + 0.1) * 1.002]
    for limit, energy in zip(simulated.limits, energies, strict=True):
        assert limit.peak_voltage_kV == pytest.approx(energy)
        assert limit.energy_keV == pytest.approx(energy + 0.0045)
        assert limit.wavelength_pm == pytest.approx(1239.841984 / (energy + 0.0045))
        angle = math.degrees(math.asin(limit.wavelength_pm / 564.0))
        assert limit.reading_deg == pytest.approx(angle + 0.2, abs=1e-9)


def test_run_is_what_the_analysis_takes():
    run, simulated = simulate_run(SHEET, {**TRUTH, "draw": True}, 5)
    assert [scan.name for scan in run.scans] == ["mo20", "mo25", "mo35"]
    assert run.title == "Simulated"
    for scan, counts in zip(run.scans, simulated.counts, strict=True):
        assert (scan.counts == counts).all()
        assert scan.step_deg == pytest.approx(0.1)
        assert (scan.dwell_s == 10.0).all()
    assert run.truth["zero_deg"] == simulated.truth.zero_deg


def test_seed_decides_everything():
    truth = {**TRUTH, "draw": True}
    one, same, other = (simulate_run(SHEET, truth, seed)[1] for seed in (7, 7, 8))
    assert one.truth == same.truth
    assert all((a == b).all() for a, b in zip(one.counts, same.counts, strict=True))
    assert one.truth != other.truth
    assert any((a != b).any() for a, b in zip(one.counts, other.counts, strict=True))


def test_counts_are_poisson_around_the_mean():
    # Sum of (n - m)^2/m over all points of many runs: one a degree of freedom.
    squares, points = 0.0, 0
    for seed in range(12):
        _, simulated = simulate_run(SHEET, TRUTH, seed)
        for counts, mean in zip(simulated.counts, simulated.expected_counts, strict=True):
            squares += float(((counts - mean) ** 2 / mean).sum())
            points += counts.size
    assert squares / points == pytest.approx(1.0, abs=5 * math.sqrt(2 / points) * 1.2)


def test_lines_only_where_they_are_excited():
    _, simulated = simulate_run(SHEET, {**TRUTH, "voltage_gain": 0.99}, 1)
    reading = simulated.specification.scans[0].reading_deg
    near_line = np.abs(reading - 7.22) < 0.051
    beside = np.abs(reading - 7.9) < 0.051
    low, _, high = simulated.expected_counts
    assert low[near_line].max() < low[beside].max()
    assert high[near_line].max() > 2 * high[beside].max()


def test_current_scales_the_tube_and_not_the_background():
    doubled = {**SHEET, "scan": [{**scan, "emission_current_mA": 2.0} for scan in SHEET["scan"]]}
    truth = {**TRUTH, "dead_time_us": 0.0, "background_per_s": 0.0}
    one, two = (simulate_run(sheet, truth, 1)[1] for sheet in (SHEET, doubled))
    for a, b in zip(one.expected_counts, two.expected_counts, strict=True):
        assert b == pytest.approx(2.0 * a)


def test_filter_lets_the_lines_pass_and_stops_the_next():
    # Zirconium's K edge stands between the K-M and K-L lines of molybdenum.
    filtered = {**SHEET, "tube": {"anode": "Mo", "filter": "Zr"}}
    truth = {**TRUTH, "filter_depth": 2.0, "dead_time_us": 0.0}
    bare, behind = (simulate_run(sheet, truth, 1)[1] for sheet in (SHEET, filtered))
    reading = bare.specification.scans[2].reading_deg
    ratio = behind.expected_counts[2] / bare.expected_counts[2]
    k_l, k_m = ratio[np.abs(reading - 7.2) < 0.01][0], ratio[np.abs(reading - 6.4) < 0.01][0]
    assert k_l > 3 * k_m


def test_another_source_of_spectra():
    def make(energy_keV, scan):
        return TubeSpectrum(energy_keV, 1.0, 29, 50.0 * scan.dwell_s, 0.0, 1.0)

    _, simulated = simulate_run(SHEET, {**TRUTH, "second_order": 0.0}, 1, make)
    assert simulated.expected_counts[0].max() > 100


@pytest.mark.parametrize(
    ("truth", "said"),
    [
        ({"voltage_gain": 0.1, "spacing_pm": 50.0}, "out of the crystal's reach"),
        ({"voltage_offset_kV": -40.0}, "true voltage"),
        ({"continuum_per_s": 1e7, "dead_time_us": 0.0}, None),
    ],
)
def test_truth_that_cannot_be(truth, said):
    if said is None:
        bright = {**SHEET, "scan": [{**SHEET["scan"][2], "dwell_s": 1e6}]}
        with pytest.raises(InputError, match="counts a point"):
            simulate_run(bright, {**TRUTH, **truth}, 1)
        return
    with pytest.raises(InputError, match=said):
        simulate_run(SHEET, {**TRUTH, **truth}, 1)
