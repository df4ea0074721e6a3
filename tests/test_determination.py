"""The whole path: demo runs against their truth, seeds, progress, and runs with nothing usable."""

import math
import tomllib
from dataclasses import replace

import numpy as np
import pytest
from simulated import TRUTH, five_voltages, simulated, voltages

import hdetermine
from hdetermine.determination import determine
from hdetermine.errors import InputError
from hdetermine.files.runsheet import read_run
from hdetermine.files.shipped import shipped_folder
from hdetermine.inference import measurement as names

SI = 6.626_070_15e-34  # exact
DEMOS = ("copper_lithium_fluoride", "molybdenum_rocksalt")


@pytest.fixture(scope="module", params=DEMOS)
def demo(request):
    folder = shipped_folder("demo_runs") / request.param
    truth = tomllib.loads((folder / "truth.toml").read_text("utf-8"))
    return determine(read_run(folder), posterior=False, monte_carlo=False), truth


def test_demo_recovers_h(demo):
    d, _ = demo
    assert abs(d.h.value_J_s - SI) < d.h.expanded_uncertainty_J_s
    assert abs(d.comparison.E_n) < 1.0
    assert 0.001 < d.h.relative_standard_uncertainty < 0.01


def test_demo_recovers_its_truth(demo):
    d, truth = demo
    t = truth["truth"]
    scale = d.angle_scale
    for quantity, true in ((scale.zero, t["zero_deg"]), (scale.resolution, t["resolution_deg"])):
        assert abs(quantity.value - true) < 3.5 * quantity.standard_uncertainty
    limits = {limit["scan"]: limit for limit in truth["limit"]}
    for cutoff in d.used:
        true = limits[cutoff.scan]["wavelength_pm"]
        assert abs(cutoff.wavelength_pm - true) < 4.0 * cutoff.standard_uncertainty_pm
    back = d.read_backwards
    assert abs(back.voltage_gain - t["voltage_gain"]) < 3.0 * back.voltage_gain_u


def test_demo_is_whole(demo):
    d, truth = demo
    assert len(d.cutoffs) == len(d.run.scans) == len(truth["limit"])
    assert len(d.used) == len(d.relation.scans) == len(d.model.scans) >= 8
    assert {c.scan for c in d.refused} == {s.name for s in d.run.scans if not s.edge}
    assert all(math.isnan(c.standard_uncertainty_pm) for c in d.refused)
    for cutoff, variance in zip(d.used, np.diag(d.relation.covariance_pm2), strict=True):
        assert cutoff.standard_uncertainty_pm == pytest.approx(math.sqrt(variance))
    assert sum(row.variance_share for row in d.budget.rows) == pytest.approx(1.0)
    assert d.counting_floor_J_s < d.budget.expanded_uncertainty
    assert d.h.route == "linear"
    assert d.h.value_J_s == d.budget.value
    assert d.h.expanded_uncertainty_J_s == pytest.approx(
        d.h.coverage_factor * d.h.standard_uncertainty_J_s
    )
    assert set(d.routes) == {"linear"}
    assert d.routes["linear"].interval_95_J_s == pytest.approx(
        (d.h.value_J_s - d.h.expanded_uncertainty_J_s, d.h.value_J_s + d.h.expanded_uncertainty_J_s)
    )


def test_three_lines_of_python():
    """As the README has it."""
    assert hdetermine.determine is determine
    assert hdetermine.read_run is read_run


@pytest.fixture(scope="module")
def three():
    run, _ = five_voltages()
    return replace(run, scans=run.scans[1:4])


@pytest.fixture(scope="module")
def drawn(three):
    """Linear and Monte Carlo, seed 3."""
    return determine(three, 3, posterior=False)


def test_seed(three, drawn):
    same, other = (determine(three, seed, posterior=False) for seed in (3, 4))
    assert drawn.h == same.h
    assert drawn.routes["monte_carlo"] == same.routes["monte_carlo"]
    assert drawn.routes["monte_carlo"] != other.routes["monte_carlo"]
    assert drawn.routes["linear"] == other.routes["linear"]
    assert drawn.provenance.seed == 3
    # The draws differ by less than a tenth of u.
    values = [d.routes["monte_carlo"].value_J_s for d in (drawn, other)]
    assert abs(values[0] - values[1]) < 0.1 * drawn.h.standard_uncertainty_J_s


def test_all_routes_and_their_progress(three):
    seen = []
    d = determine(three, 2, progress=lambda *step: seen.append(step))
    assert set(d.routes) == {"linear", "monte_carlo", "posterior"}
    u = d.routes["linear"].standard_uncertainty_J_s
    for route in d.routes.values():
        assert route.usable, route.reason
        assert abs(route.value_J_s - d.budget.value) < 0.3 * u
    assert d.posterior_samples.shape[1] == len(d.posterior_names)
    assert d.h.route_reason
    stages = list(dict.fromkeys(stage for stage, _, _ in seen))
    assert stages[:3] == ["lines", "edges", "monte carlo"]
    assert len(stages) > 3
    for stage in stages:
        steps = [(done, total) for name, done, total in seen if name == stage]
        done = [step[0] for step in steps]
        assert done == sorted(done), stage
        assert steps[-1][0] == steps[-1][1]
    # No stage comes back.
    order = [stages.index(stage) for stage, _, _ in seen]
    assert order == sorted(order)


def test_one_voltage_gives_h_and_says_what_it_cannot_test():
    run, _ = simulated(voltages(35), TRUTH, seed=3)
    d = determine(run, posterior=False, monte_carlo=False)
    assert abs(d.comparison.E_n) < 1.0
    untested = [check.name for check in d.checks if check.passed is None]
    assert len(untested) >= 4
    assert math.isnan(d.relation.birge_ratio)
    assert np.array_equal(d.relation.weights, [1.0])


def test_repeated_scans_tell_the_repeatability():
    scans = [
        {"name": f"r{i}", "tube_voltage_kV": kV} for i, kV in enumerate((30.0, 30.0, 30.0, 24.0))
    ]
    wobble = {"voltage_repeatability_kV": (0.6, -0.5, 0.1, 0.0)}
    run, _ = simulated(scans, {**TRUTH, **wobble}, seed=3)
    d = determine(run, posterior=False, monte_carlo=False)
    # Standard deviation of the displacements: 0.55 kV of 30 kV.
    assert d.relation.repeat_u_relative == pytest.approx(0.0185, rel=0.25)
    repeat = next(row for row in d.budget.rows if row.quantity == names.voltage_name("r0"))
    assert repeat.standard_uncertainty > 0.3
    assert repeat.degrees_of_freedom == 2.0


def test_a_truth_in_the_run_changes_nothing(three, drawn):
    """The truth of a simulated run rides along; the analysis must not look at it."""
    assert three.truth
    lied = determine(
        replace(three, truth={"voltage_gain": 3.0, "zero_deg": 9.0}),
        posterior=False,
        monte_carlo=False,
    )
    assert lied.routes["linear"] == drawn.routes["linear"]


def refusal(run):
    with pytest.raises(InputError) as caught:
        determine(run)
    sentence = str(caught.value)
    assert sentence.endswith(".")
    assert "\n" not in sentence
    return sentence


def test_nothing_usable(three):
    empty = tuple(replace(scan, counts=0 * scan.counts) for scan in three.scans)
    said = refusal(replace(three, scans=empty))
    assert said.startswith("none of the 3 scans carries a usable edge: too few counts")
    assert said.count("too few counts") == 1  # one reason, said once
    mixed = (replace(three.scans[0], leave_out="the door was open"), *empty[1:])
    assert "left out by the run sheet: the door was open; too few counts" in refusal(
        replace(three, scans=mixed)
    )
    alone = refusal(replace(three, scans=empty[:1]))
    assert alone.startswith("the only scan, u26, carries no usable edge: ")


def test_only_a_reference_scan(three):
    reference = replace(three.scans[0], edge=False)
    assert "reference scan" in refusal(replace(three, scans=(reference,)))


def test_no_scan_at_all(three):
    assert refusal(replace(three, scans=())).startswith("none of the 0 scans")
