"""Every reason for which a scan is refused, reached by a scan that deserves it."""

from dataclasses import replace

import numpy as np
import pytest
from edge_specimens import EDGE_DEG, counted, given, parameters, window
from simulated import TRUTH, five_voltages, simulated, voltages

from hdetermine.inference.anglescale import angle_scale
from hdetermine.inference.cutoffs import find_cutoffs
from hdetermine.inference.edgefamily import Obstacle
from hdetermine.inference.edgemodel import LineTemplate, fit_edge
from hdetermine.inference.refusals import (
    dropouts,
    insignificant,
    line_inside,
    range_refusal,
    saturated,
    uncertain,
)
from hdetermine.records.scan import Scan


def cutoffs_of(run):
    """Cutoffs by scan, and the run's usable ones must stay usable."""
    _, _, cutoffs = find_cutoffs(run, angle_scale(run))
    return {cutoff.scan: cutoff for cutoff in cutoffs}


def odd(name, kV=30.0, **more):
    return {"name": name, "tube_voltage_kV": kV, **more}


# Sound scans beside the odd ones: the edge of a scan is expected where theirs let it be.
SOUND = ("u26", "u34", "u38")
SWEEPS = {
    "late": {"from_deg": 4.2},
    "far too late": {"from_deg": 5.0},
    "early end": {"from_deg": 2.0, "to_deg": 4.55},
    "far too early end": {"from_deg": 2.0, "to_deg": 4.0},
    "coarse": {"from_deg": 2.0, "step_deg": 0.5},
}
REASONS = {
    "late": "no background below the edge",
    "far too late": "no background below the edge",
    "early end": "outside the range or at the end",
    "far too early end": "outside the range or at the end",
    "coarse": "too few points around the edge",
    "line": "a characteristic line stands inside the smeared edge",
    "few": "too few counts: no edge stands out from the background",
    "left out": "left out by the run sheet: the door was open",
    "reference": "reference scan: it serves the angle scale only",
    "dead": "of the time",
}


@pytest.fixture(scope="module")
def odd_run():
    scans = [
        *voltages(26, 34, 38),
        *(odd(name) for name in SWEEPS),
        odd("line", 20.3),
        odd("few", dwell_s=0.02),
        odd("left out", leave_out="the door was open"),
        odd("reference", edge=False),
        odd("dead", emission_current_mA=60.0),
    ]
    run, _ = simulated(scans, {**TRUTH, "sweep": SWEEPS}, seed=3)
    return cutoffs_of(run)


@pytest.mark.parametrize("scan", REASONS)
def test_reason(odd_run, scan):
    cutoff = odd_run[scan]
    assert not cutoff.used
    assert REASONS[scan] in cutoff.reason
    assert not cutoff.reason.endswith(".")  # the report puts it into its own sentence
    assert np.isnan(cutoff.reading_deg)
    assert np.isnan(cutoff.wavelength_pm)
    # The counts are shown, without a fit.
    assert cutoff.curve is not None
    assert np.all(np.isnan(cutoff.curve.expected_counts))
    assert not cutoff.curve.in_window.any()


def test_sound_scans_stay(odd_run):
    assert set(odd_run) == {*REASONS, *SOUND}
    assert all(odd_run[name].used for name in SOUND)


@pytest.mark.parametrize(("kV", "too_close"), [(18.1, True), (24.0, False)])
def test_an_absorption_edge_right_above(kV, too_close):
    """The K edge of a zirconium filter stands at 68.89 pm, the limit of 18.1 kV at 68.5 pm."""
    run, _ = simulated(
        voltages(26, 34, 38, kV), {**TRUTH, "to_deg": 10.5}, seed=3, tube={"filter": "Zr"}
    )
    cutoff = cutoffs_of(run)[f"u{kV:g}"]
    assert cutoff.used is not too_close
    if too_close:
        assert cutoff.reason == (
            "a characteristic line or absorption edge stands too close above the edge"
        )


@pytest.fixture(scope="module")
def four():
    """Four voltages with their angle scale."""
    run, _ = five_voltages()
    return replace(run, scans=run.scans[1:]), angle_scale(run)


@pytest.mark.parametrize(
    ("spoil", "reason"),
    [
        (lambda s: np.minimum(s.counts, 600), "saturation: the counter stops at 600 counts"),
        (lambda s: 400 * s.counts, "more than a dead time of 90 µs lets through"),
        (lambda s: 0 * s.counts, "too few counts: no edge stands out"),
        (lambda s: 1 * (np.abs(s.reading_deg - 5.0) < 0.01), "too few counts: no edge stands out"),
        (lambda s: np.where(np.arange(s.counts.size) % 2, s.counts, s.counts // 3),
         "the model does not describe the edge"),
        (lambda s: s.counts[::-1], "the model does not describe the edge"),
        (lambda s: s.counts * (s.reading_deg < 4.4), "the cutoff would be uncertain by"),
    ],
    ids=["counter stops", "impossible rate", "no counts", "one count", "alternating", "reversed",
         "tripped"],
)  # fmt: skip
def test_spoilt_counts(four, spoil, reason):
    run, scale = four
    before, scan, *after = run.scans
    scan = replace(scan, counts=np.asarray(spoil(scan), dtype=np.int64))
    _, _, cutoffs = find_cutoffs(replace(run, scans=(before, scan, *after)), scale)
    assert [cutoff.used for cutoff in cutoffs] == [True, False, True, True]
    assert reason in cutoffs[1].reason


def test_a_paralysable_counter_is_stopped_earlier():
    """Its recorded rate has its maximum at 1/(e tau): near it nothing can be told."""
    scans = [*voltages(26, 34, 38), odd("bright", emission_current_mA=30.0)]
    reasons = {}
    for model in ("paralysable", "nonparalysable"):
        run, _ = simulated(scans, TRUTH, seed=3, counter={"dead_time_model": model})
        bright = cutoffs_of(run)["bright"]
        reasons[model] = bright.reason if not bright.used else ""
    assert reasons["nonparalysable"] == ""
    assert reasons["paralysable"].startswith("saturation:")


def test_a_fit_that_does_not_settle(monkeypatch, four):
    monkeypatch.setattr("hdetermine.inference.cutoffs.fit_family", lambda *_: None)
    _, _, cutoffs = find_cutoffs(*four)
    assert {cutoff.reason for cutoff in cutoffs} == {"the fit did not converge"}


# The pieces by themselves, at their limits.


def fit(rate=6000.0, seed=1, **more):
    around, true = given(), parameters(rate=rate, **more)
    return fit_edge(counted(window(), true, around, seed), around, true)


@pytest.mark.parametrize(
    ("edge", "begins"),
    [(2.0, "no background"), (2.30, "no background"), (2.35, ""), (5.0, ""), (7.45, ""),
     (7.55, "the edge lies"), (9.0, "the edge lies")],
)  # fmt: skip
def test_range(edge, begins):
    readings = 2.0 + 0.1 * np.arange(60)
    scan = Scan("s", 30.0, readings, np.zeros(60, dtype=np.int64), np.ones(60))
    refusal = range_refusal(scan, edge, 0.25)
    assert refusal.startswith(begins)
    assert bool(refusal) is bool(begins)


@pytest.mark.parametrize(("distance", "inside"), [(0.1, True), (0.19, True), (0.22, False)])
def test_line_inside_is_a_matter_of_the_width(distance, inside):
    found = fit()
    place = found.reading_deg - found.given.zero_deg + distance  # 0.8 widths are 0.2 degrees
    line = Obstacle(0.0, 9.0, LineTemplate(((place, 0.004, 1.0),)))
    assert bool(line_inside(found, (line,), found.given)) is inside
    assert not line_inside(found, (Obstacle(0.0, 9.0, None),), found.given)


def test_significance():
    assert insignificant(fit()) == ""
    assert "no edge stands out" in insignificant(fit(rate=1e-6))
    # Significant as a rise, but where it begins nobody can say.
    broad = fit()
    assert uncertain(5.0, 0.01) == ""
    assert uncertain(5.0, 0.4).endswith("uncertain by 8 %")
    assert saturated(broad) == ""


def test_dropouts():
    found = fit(rate=12_000.0)
    readings, counts = found.window.reading_deg, found.window.counts.astype(np.int64)
    scan = Scan("s", 30.0, readings, counts, found.window.dwell_s)
    assert not dropouts(scan, found).any()
    high = np.flatnonzero(counts > 300)

    def with_zeros(*places):
        changed = counts.copy()
        changed[list(places)] = 0
        holed = replace(found, window=replace(found.window, counts=changed.astype(float)))
        return np.flatnonzero(dropouts(scan, holed)).tolist()

    assert with_zeros(high[3]) == [high[3]]
    assert with_zeros(high[3], high[6]) == [high[3], high[6]]
    # Three are no isolated slips, and zeros of the background are counts like others.
    assert with_zeros(high[3], high[6], high[8]) == []
    assert with_zeros(0, 1) == []
    assert readings[1] < EDGE_DEG
