"""What-if and improvements."""

import math
from dataclasses import replace

import numpy as np
import pytest
from hand_model import make_model

from hdetermine.budget import suppose as s
from hdetermine.budget.planck import linear_figures, planck_budget, scan_family
from hdetermine.errors import InputError
from hdetermine.inference.weights import gls_weights, with_gls_weights

MODEL = make_model(5, scatter_seed=2, skew=1.3)


def changed(*texts, model=MODEL):
    return s.suppose(model, [s.parse_supposition(text, model) for text in texts])


def quantity(model, name):
    return next(q for q in model.inputs if q.name == name)


def test_supposed_standard_uncertainty():
    found = s.what_if(MODEL, ["tube.voltage.gain.u=0.001"])
    assert found.before.expanded_uncertainty == pytest.approx(
        planck_budget(MODEL).expanded_uncertainty
    )
    assert found.after.expanded_uncertainty < 0.8 * found.before.expanded_uncertainty
    assert quantity(found.model, "tube.voltage.gain").standard_uncertainty == pytest.approx(0.001)
    # Estimates and edges stay; the weights are those of the new covariance.
    np.testing.assert_array_equal(found.model.reading_deg, MODEL.reading_deg)
    np.testing.assert_allclose(found.model.weights, gls_weights(found.model))


def test_unchanged_suppositions_change_nothing():
    found = s.what_if(MODEL, ["tube.voltage.gain.u=0.004"])
    assert found.after.expanded_uncertainty == pytest.approx(found.before.expanded_uncertainty)
    assert found.after.value == pytest.approx(found.before.value)


def test_several_at_once():
    both = changed("tube.voltage.gain.u=0.001", "goniometer.zero_deg.u = 0")
    assert quantity(both, "tube.voltage.gain").standard_uncertainty == pytest.approx(0.001)
    assert quantity(both, "goniometer.zero_deg").standard_uncertainty == 0.0


def test_half_width():
    narrower = changed("tube.voltage.offset_kV.half_width=0.03")
    offset = quantity(narrower, "tube.voltage.offset_kV")
    assert offset.half_width == pytest.approx(0.03)
    bounded = quantity(changed("tube.voltage.gain.half_width=0.003"), "tube.voltage.gain")
    assert bounded.distribution == "rectangular"
    assert bounded.standard_uncertainty == pytest.approx(0.003 / math.sqrt(3))


def test_correlated_inputs_learn_from_each_other():
    # Zero and spacing with r = 0.6: the spacing exact leaves the zero sqrt(1 - r^2) of its u.
    exact = changed("crystal.spacing_pm.u=0")
    zero = quantity(exact, "goniometer.zero_deg")
    assert zero.standard_uncertainty == pytest.approx(0.01 * 0.8, rel=1e-3)
    assert quantity(exact, "crystal.spacing_pm").standard_uncertainty == 0.0
    i, j = (
        [q.name for q in exact.inputs].index(n)
        for n in ("crystal.spacing_pm", "goniometer.zero_deg")
    )
    assert exact.correlation[i, j] == 0.0
    # Twice as good: a measurement of its own with 1/3 of the variance.
    halved = changed("crystal.spacing_pm.u=0.01")
    assert quantity(halved, "crystal.spacing_pm").standard_uncertainty == pytest.approx(0.01)
    assert quantity(halved, "goniometer.zero_deg").standard_uncertainty == pytest.approx(
        0.01 * math.sqrt(1 - 0.75 * 0.36), rel=1e-3
    )
    worse = changed("crystal.spacing_pm.u=0.04")
    assert quantity(worse, "goniometer.zero_deg").standard_uncertainty > 0.01
    assert np.linalg.eigvalsh(worse.correlation)[0] > -1e-12


def test_knowing_an_input_never_hurts_where_two_cancel():
    # Two inputs that cancel in h: alone, less of one would uncover the other.
    names = [q.name for q in MODEL.inputs]
    i, j = names.index("continuum.near_limit_excess"), names.index("goniometer.resolution_deg")
    correlation = MODEL.correlation.copy()
    correlation[i, j] = correlation[j, i] = -0.999
    inputs = list(MODEL.inputs)
    inputs[i] = inputs[i].with_uncertainty(5.0)
    inputs[j] = inputs[j].with_uncertainty(0.4)
    model = with_gls_weights(replace(MODEL, correlation=correlation, inputs=tuple(inputs)))
    expanded = linear_figures(model).expanded_uncertainty_J_s
    for entry in s.improvements(model):
        assert entry.expanded_if_zero <= entry.expanded_if_halved * (1 + 1e-9)
        assert entry.expanded_if_halved <= expanded * (1 + 1e-9)


def test_terms_of_a_series_go_together():
    assert scan_family("continuum.smooth_2") == "continuum.smooth_*"
    assert scan_family("tube.voltage.gain") == "tube.voltage.gain"


def test_degrees_of_freedom():
    found = s.what_if(MODEL, ["tube.voltage.gain.dof=3"])
    assert found.after.effective_degrees_of_freedom < 10
    assert found.after.coverage_factor > found.before.coverage_factor
    unbounded = changed("goniometer.zero_deg.dof=inf")
    assert math.isinf(quantity(unbounded, "goniometer.zero_deg").degrees_of_freedom)


@pytest.mark.parametrize(
    ("text", "members"),
    [
        ("scan.*.counting_deg.u=0.01", [f"scan.v{i}.counting_deg" for i in range(5)]),
        ("tube.voltage.repeatability_kV.u=0.05", [f"scan.v{i}.voltage_kV" for i in range(5)]),
        ("scan.v3.window_deg.u=0", ["scan.v3.window_deg"]),
    ],
)
def test_families_and_single_scans(text, members):
    supposition = s.parse_supposition(text, MODEL)
    assert list(supposition.inputs) == members
    model = changed(text)
    assert {quantity(model, name).standard_uncertainty for name in members} == {supposition.value}


def test_names_of_scans_may_hold_dots_and_equals_signs():
    odd = "20.5 kV=a.u"
    model = make_model(2)
    inputs = tuple(
        replace(q, name=q.name.replace("scan.v0.", f"scan.{odd}.")) for q in model.inputs
    )
    model = replace(model, inputs=inputs, scans=(odd, "v1"))
    supposition = s.parse_supposition(f"scan.{odd}.counting_deg.u=0.5", model)
    assert supposition.inputs == (f"scan.{odd}.counting_deg",)
    assert s.families(model)["scan.*.counting_deg"] == (
        f"scan.{odd}.counting_deg",
        "scan.v1.counting_deg",
    )


def test_sides_of_the_likelihood_follow_the_counting_uncertainty():
    halved = changed("scan.v2.counting_deg.u=0.01")
    np.testing.assert_allclose(halved.skew[2], MODEL.skew[2] / 2)
    np.testing.assert_array_equal(halved.skew[1], MODEL.skew[1])


@pytest.mark.parametrize(
    ("texts", "match"),
    [
        (["tube.voltage.gian.u=0.1"], "no input 'tube.voltage.gian'; the nearest is .*gain"),
        (["scan.v9.counting_deg.u=1"], r"the nearest is scan\.v\d\.counting_deg"),
        (["zzz.u=1"], "no input 'zzz'; the budget lists their names"),
        (["tube.voltage.gain=0.1"], "does not say which figure of tube.voltage.gain"),
        (["tube.voltage.gain.value=2"], "'value' is no figure .* the nearest is tube.voltage.gain"),
        (["tube.voltage.gain.u"], "has no '='"),
        (["tube.voltage.gain.u=abc"], "'abc' is not zero or a positive number"),
        (["tube.voltage.gain.u=-1"], "not zero or a positive"),
        (["tube.voltage.gain.u=nan"], "not zero or a positive"),
        (["tube.voltage.gain.u=inf"], "not zero or a positive"),
        (["tube.voltage.gain.u=\u0663"], "not zero or a positive"),
        # Their squares overflowed, which ended in a traceback.
        (["tube.voltage.gain.u=1e308"], "no uncertainty is as large as 1e308"),
        (["counter.dead_time_us.half_width=1e200"], "no uncertainty is as large"),
        (["tube.voltage.gain.half_width=0"], "not a positive number"),
        (["tube.voltage.gain.half_width=-2"], "not a positive number"),
        (["tube.voltage.gain.dof=0"], "not a positive number"),
        (["tube.voltage.gain.u=1e-3", "tube.voltage.gain.half_width=1e-3"], "two forms"),
        (["tube.voltage.gain.u=1e-3", "tube.voltage.gain.u=1e-4"], "twice"),
        (["scan.*.counting_deg.u=1", "scan.v1.counting_deg.u=2"], "twice"),
        (["crystal.spacing_pm.half_width=300"], "reaches d <= 0"),
    ],
)  # fmt: skip
def test_bad_suppositions(texts, match):
    with pytest.raises(InputError, match=match):
        s.what_if(MODEL, texts)


def test_improvements():
    found = s.improvements(MODEL, each_scan=True)
    expanded = linear_figures(MODEL).expanded_uncertainty_J_s
    by_name = {entry.quantity: entry for entry in found}
    assert {q.name for q in MODEL.inputs if q.standard_uncertainty > 0} <= set(by_name)
    zeros = [entry.expanded_if_zero for entry in found]
    assert zeros == sorted(zeros)
    assert found[0].quantity == "tube.voltage.gain"
    for entry in found:
        assert entry.expanded_if_zero <= entry.expanded_if_halved * (1 + 1e-12)
        assert entry.expanded_if_halved <= expanded * (1 + 1e-12)
    gain = by_name["tube.voltage.gain"]
    assert gain.expanded_if_zero < gain.expanded_if_halved < expanded
    # The entry for all scans together is the what-if with all of them zero.
    family = by_name["scan.*.counting_deg"]
    other = s.what_if(MODEL, ["scan.*.counting_deg.u=0"]).after
    assert family.expanded_if_zero == pytest.approx(other.expanded_uncertainty, rel=1e-9)


def test_improvements_of_single_scans_only_if_asked_for():
    found = {entry.quantity for entry in s.improvements(MODEL)}
    assert "scan.*.counting_deg" in found
    assert not any(name.startswith("scan.v") for name in found)


def test_exact_inputs_cannot_improve():
    exact = changed("tube.voltage.gain.u=0")
    assert "tube.voltage.gain" not in {entry.quantity for entry in s.improvements(exact)}


def test_counting_floor():
    floor = s.counting_floor(MODEL)
    now = linear_figures(MODEL).expanded_uncertainty_J_s
    assert floor < now
    same = s.what_if(MODEL, ["scan.*.counting_deg.u=0"]).after.expanded_uncertainty
    assert floor == pytest.approx(same, rel=1e-9)


def test_figures_without_rows_are_those_of_the_budget():
    full, quick = planck_budget(MODEL), linear_figures(MODEL)
    assert quick.value_J_s == pytest.approx(full.value, rel=1e-14)
    assert quick.standard_uncertainty_J_s == pytest.approx(
        full.combined_standard_uncertainty, rel=1e-9
    )
    assert quick.expanded_uncertainty_J_s == pytest.approx(full.expanded_uncertainty, rel=1e-9)


def test_single_scan():
    model = make_model(1)
    assert s.counting_floor(model) < linear_figures(model).expanded_uncertainty_J_s
    assert "scan.*.counting_deg" in {entry.quantity for entry in s.improvements(model)}


def test_study():
    plain = s.study(MODEL)
    assert plain.supposed is None
    assert plain.improvements == s.improvements(MODEL)
    supposed = s.study(MODEL, ["tube.voltage.gain.u=0.001"]).supposed
    assert supposed.after.expanded_uncertainty < plain.budget.expanded_uncertainty
