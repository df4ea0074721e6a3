"""First guesses of a run, made consistent with one another, and the first fit of a scan."""

from dataclasses import replace

import pytest
from simulated import five_voltages

from hdetermine.inference.anglescale import angle_scale
from hdetermine.inference.edgesearch import search_edge
from hdetermine.inference.firstfit import first_fit, first_guesses, surroundings


@pytest.fixture(scope="module")
def stages():
    run, truth = five_voltages()
    return run, angle_scale(run), {limit.scan: limit.reading_deg for limit in truth.limits}


def misled(monkeypatch, answers):
    """The search finds something else in some scans."""
    monkeypatch.setattr(
        "hdetermine.inference.firstfit.search_edge",
        lambda scan, clear: answers.get(scan.name, search_edge(scan, clear)),
    )


def test_guesses_stand_near_the_edges(stages):
    run, scale, true = stages
    for name, guess in first_guesses(run, scale).items():
        assert guess == pytest.approx(true[name], abs=0.3)


@pytest.mark.parametrize("wrong", [3.1, 5.6, None], ids=["too low", "too high", "nothing"])
def test_a_scan_that_misleads_is_set_right_by_the_others(stages, monkeypatch, wrong):
    """sin(theta) U is the same for all voltages: the median of the run tells."""
    run, scale, true = stages
    misled(monkeypatch, {"u30": wrong})
    guesses = first_guesses(run, scale)
    assert guesses["u30"] == pytest.approx(true["u30"], abs=0.3)
    assert guesses["u34"] == search_edge(run.scans[3], run.scans[3].reading_deg < 5.9)


def test_two_scans_set_nothing_right(stages, monkeypatch):
    run, scale, _ = stages
    misled(monkeypatch, {"u30": 3.1, "u34": None})
    guesses = first_guesses(replace(run, scans=run.scans[2:4]), scale)
    assert guesses == {"u30": 3.1, "u34": None}


def test_scans_left_out_have_no_say(stages, monkeypatch):
    run, scale, true = stages
    misled(monkeypatch, {"u22.5": 9.0, "u26": 9.0, "u30": 9.0})
    scans = tuple(
        replace(scan, leave_out="for this test") if scan.tube_voltage_kV <= 30.0 else scan
        for scan in run.scans
    )
    guesses = first_guesses(replace(run, scans=scans), scale)
    assert guesses["u34"] == pytest.approx(true["u34"], abs=0.3)


def test_first_fit_finds_the_edge_and_its_surroundings(stages):
    run, scale, true = stages
    scan = run.scans[3]
    edge = first_fit(run, scale, scan, true["u34"] + 0.2)
    assert not isinstance(edge, str)
    assert edge.fit.reading_deg == pytest.approx(true["u34"], abs=4.0 * edge.fit.reading_u_deg)
    assert edge.points.all()
    # Lines of Mo in NaCl stand above the edge, by angle.
    starts = [obstacle.from_deg for obstacle in edge.obstacles]
    assert starts == sorted(starts)
    assert 5.5 < starts[0] < 6.5
    assert edge.obstacles[0].template is not None


def test_surroundings_are_the_inputs_at_their_estimates(stages):
    run, scale, _ = stages
    given = surroundings(run, scale, run.scans[2])
    apparatus = run.apparatus
    assert given.zero_deg == scale.zero.value
    assert given.kernel.fwhm_deg == scale.resolution.value
    assert given.kernel.triangular_fraction == scale.kernel.value
    assert given.excess == apparatus.continuum.near_limit_excess.value
    assert given.dead_time_us == 90.0
    # 30 kV with a ripple of zero, and 4.5 eV of the cathode (default).
    work_function = apparatus.tube.cathode_work_function_eV.value
    assert given.energy_keV == pytest.approx(30.0 + 1e-3 * work_function, rel=1e-6)
