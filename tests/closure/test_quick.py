"""The quick part of the closure study, and checks of the study's own tools."""

import math
from dataclasses import replace

import numpy as np
import pytest
from bench import yardstick
from scipy.stats import linregress

from hdetermine.planning.simulation import simulate_run

from . import independent
from .bound import cutoff_bound_deg
from .picture import picture
from .record import RunRecord
from .settings import BASE, COPPER, PINNED, SETTINGS
from .study import run_study
from .tables import document
from .tally import Coverage, mean_of, tally, width_of

QUICK_RUNS = 4


@pytest.fixture(scope="module")
def records():
    return run_study(BASE, QUICK_RUNS, jobs=1)


def test_truth_is_covered(records):
    """A few runs of nine voltages: none may lie far out, and the analysis alone is unbiased."""
    assert not any(record.refused for record in records)
    found = tally(BASE.name, records)
    for route, figures in found.routes.items():
        assert abs(figures.pull_mean.value) < 3.5 / math.sqrt(QUICK_RUNS), route
        assert figures.covered.inside >= QUICK_RUNS - 1, route
    assert abs(found.alone.value) < 0.002
    assert abs(found.cutoff_bias.value) < 0.004
    assert found.cutoffs_used.fraction > 0.9
    # The method in use today is off by several times that on the same counts.
    assert found.yardstick_cutoffs.value < -0.007


def test_tables_and_picture(records):
    text = document("Quick", [tally(BASE.name, records)], "| bound |")
    assert text.count(BASE.name) >= 4
    assert "yardstick" in text
    assert picture(records).startswith(b"<?xml")
    assert picture(records, "png").startswith(b"\x89PNG")


@pytest.mark.parametrize("setting", [*SETTINGS, PINNED], ids=lambda setting: setting.name)
def test_every_setting_is_a_run(setting):
    run, simulated = simulate_run(setting.run_sheet(), setting.truth_table(1), 1)
    assert len(run.scans) == len(setting.voltages_kV) + (setting.lines_scan is not None)
    for scan, limit in zip(run.scans, simulated.limits, strict=True):
        inside = scan.reading_deg[0] + 0.4 < limit.reading_deg < scan.reading_deg[-1] - 1.0
        assert inside or not scan.edge


def test_bound_falls_with_the_root_of_the_time():
    """Four times the dwell, half the bound; a wider window never raises it."""
    long = replace(PINNED, dwell_s=40.0)
    bounds = []
    for setting in (PINNED, long):
        _, simulated = simulate_run(setting.run_sheet(), setting.truth_table(1), 1)
        bounds.append(cutoff_bound_deg(simulated, 4, (3.0, 5.5)))
    assert bounds[0] / bounds[1] == pytest.approx(2.0, rel=1e-6)
    assert 0.001 < bounds[0] < 0.05
    assert cutoff_bound_deg(simulated, 4, (2.5, 6.0)) < bounds[1]
    assert cutoff_bound_deg(simulated, 4, (3.0, 5.5), ("amplitude", "level")) < bounds[1]


def test_bound_is_reached_by_a_fit_that_knows_all():
    """One parameter, a maximum-likelihood fit by the score: its spread is the bound."""
    _, simulated = simulate_run(PINNED.run_sheet(), PINNED.truth_table(1), 1)
    full = cutoff_bound_deg(simulated, 4, (3.0, 5.5))
    alone = cutoff_bound_deg(simulated, 4, (3.0, 5.5), ())
    # Without nuisances the information of the cutoff alone bounds it lower.
    plan = simulated.specification.scans[4]
    up, down = (
        simulate_run(PINNED.run_sheet(), {**PINNED.truth_table(1), "voltage_gain": gain}, 1)[1]
        for gain in (1.0002, 0.9998)
    )
    inside = (plan.reading_deg > 2.99) & (plan.reading_deg < 5.51)
    move = up.limits[4].reading_deg - down.limits[4].reading_deg
    slope = ((up.expected_counts[4] - down.expected_counts[4]) / move)[inside]
    mean = simulated.expected_counts[4][inside]
    information = float((slope**2 / mean).sum())
    assert 1.0 / math.sqrt(information) == pytest.approx(alone, rel=1e-3)
    assert alone < full
    estimates = []
    rng = np.random.default_rng(5)
    for _ in range(4000):
        counts = rng.poisson(mean)
        estimates.append(float((slope * (counts - mean) / mean).sum()) / information)
    assert np.std(estimates) == pytest.approx(1.0 / math.sqrt(information), rel=0.05)


def test_coverage_interval():
    # 0 of 10 at 95 %: upper bound 1 - 0.025^(1/10), exact (Clopper and Pearson 1934).
    assert Coverage(0, 10).interval == pytest.approx((0.0, 1.0 - 0.025**0.1))
    assert Coverage(10, 10).interval == pytest.approx((0.025**0.1, 1.0))
    low, high = Coverage(380, 400).interval
    assert low < 0.95 < high


def test_means_and_widths_know_their_errors():
    rng = np.random.default_rng(8)
    samples = rng.standard_normal((400, 100))
    means = [mean_of(row) for row in samples]
    widths = [width_of(row) for row in samples]
    assert np.std([m.value / m.error for m in means]) == pytest.approx(1.0, abs=0.1)
    assert np.std([(w.value - 1.0) / w.error for w in widths]) == pytest.approx(1.0, abs=0.15)
    assert math.isnan(mean_of([math.nan]).value)


def test_refused_runs_are_counted():
    record = RunRecord(1, seconds=1.0, refused="no usable edge")
    found = tally("x", [record])
    assert found.refused == {"no usable edge": 1}
    assert document("y", [found])


def test_yardstick_reads_a_corner():
    reading = np.arange(2.0, 8.0, 0.1)
    counts = 10.0 + 800.0 * np.maximum(reading - 4.03, 0.0)
    assert yardstick.cutoff_reading(reading, counts) == pytest.approx(4.03, abs=0.03)
    assert math.isnan(yardstick.cutoff_reading(reading, np.full(reading.size, 10.0)))


def test_yardstick_is_ordinary_least_squares():
    rng = np.random.default_rng(3)
    voltage = np.linspace(20.0, 40.0, 9)
    wavelength = 1239.84 / voltage + rng.normal(0.0, 0.2, 9)
    found = yardstick.planck_value(wavelength, voltage)
    line = linregress(1.0 / voltage, wavelength)
    assert found.value_J_s == pytest.approx(line.slope * yardstick.PLANCK_PER_SLOPE)
    assert found.standard_error_J_s == pytest.approx(line.stderr * yardstick.PLANCK_PER_SLOPE)
    assert yardstick.planck_value(wavelength[:2], voltage[:2]) is None


def test_independent_spectrum(tmp_path):
    """spekpy's molybdenum target at 25 keV: its limit, its rise near it, its lines."""
    pytest.importorskip("spekpy")
    library = independent.Library(tmp_path, "Mo", "casim", 12.0)
    spectrum = independent.LibrarySpectrum(
        library, 25.0, 1.0, independent.Absorber(0.0, 100.0), 9.8
    )
    wavelength = independent.HC_PER_E_pm_kV / np.array([25.01, 24.99, 24.6, 23.0, 22.0])
    rate = spectrum.continuum_per_s(wavelength)
    assert rate[0] == 0.0
    assert (rate[1:] > 0.0).all()
    energy = independent.HC_PER_E_pm_kV / wavelength[1:]
    kramers = (25.0 - energy) / energy * energy / wavelength[1:]
    ratio = rate[1:] / kramers
    # Over Kramers' law 1.5 to 2.2 times at the limit, falling to near one in some keV.
    assert 1.4 < ratio[0] / ratio[2] < 2.3
    assert ratio[2] / ratio[3] == pytest.approx(1.0, abs=0.1)
    strongest = max(spectrum.lines(), key=lambda line: line.area_deg_per_s)
    # Mo K-L3: 70.9317 pm (NIST SRD 128).
    assert strongest.wavelength_pm == pytest.approx(70.9317, rel=1e-4)


def test_copper_setting_finds_its_lines_scan():
    sheet = COPPER.run_sheet()
    assert sheet["scan"][-1]["edge"] is False
