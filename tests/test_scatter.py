"""Scatter from repeats, and beyond what the inputs allow."""

import math
from dataclasses import replace

import numpy as np
import pytest
from hand_model import make_model

from hdetermine.inference import measurement as names
from hdetermine.inference.relation import relate
from hdetermine.inference.scatter import (
    add_scatter,
    birge_ratio_of,
    learn_repeatability,
    least_chi2,
    log_covariance_of,
)
from hdetermine.inference.weights import single_planck_J_s, with_gls_weights


def shifted(model, by_deg):
    """The model with its cutoffs moved."""
    return with_gls_weights(replace(model, reading_deg=model.reading_deg + np.asarray(by_deg)))


def repeats(by_deg):
    """Three scans of 25 kV, two of 32 kV, one of 20 kV."""
    model = make_model(6)
    displayed = np.array([25.0, 25.0, 25.0, 32.0, 32.0, 20.0])
    model = replace(model, displayed_kV=displayed)
    reading = names.predicted_reading_deg(
        model, np.array([6.6e-34]), names.estimates(model)[:, np.newaxis]
    )[:, 0]
    return shifted(replace(model, reading_deg=reading), by_deg)


def test_without_repeats_nothing_is_learnt():
    model = make_model(5, scatter_seed=1)
    same, relative = learn_repeatability(model)
    assert same is model
    assert relative is None


def test_repeats_that_agree_leave_the_model_alone():
    model = repeats([0.01, -0.02, 0.01, 0.005, -0.01, 0.0])
    same, relative = learn_repeatability(model)
    assert same is model
    assert relative is not None
    assert 0.0 < relative < 0.01


def test_repeats_that_differ_raise_the_repeatability():
    model = repeats([0.15, -0.2, 0.05, 0.12, -0.12, 0.0])
    wider, relative = learn_repeatability(model)
    # Hand-worked: pooled scatter of ln h within the groups, 3 degrees of freedom.
    log_h = np.log(single_planck_J_s(model))
    squares = sum(
        float(np.sum((log_h[group] - log_h[group].mean()) ** 2))
        for group in (slice(0, 3), slice(3, 5))
    )
    assert relative == pytest.approx(math.sqrt(squares / 3.0))
    for scan, kV in zip(wider.scans, wider.displayed_kV, strict=True):
        (voltage,) = [q for q in wider.inputs if q.name == names.voltage_name(scan)]
        # All of the scatter that counting (0.02 degrees and a little) does not explain.
        assert 0.8 * relative * kV < voltage.standard_uncertainty < relative * kV
        assert voltage.degrees_of_freedom == 3.0
        assert voltage.evaluation == "A"
        assert voltage.source == "repeated scans"
    others = [
        (one, other)
        for one, other in zip(model.inputs, wider.inputs, strict=True)
        if not one.name.endswith(".voltage_kV")
    ]
    assert all(one == other for one, other in others)
    # With that the repeats are no longer a surprise.
    assert birge_ratio_of(wider) < 1.6 < birge_ratio_of(model)


def test_scatter_that_the_inputs_explain_is_not_added():
    model = make_model(9, scatter_seed=1)
    same, scatter = add_scatter(model)
    assert same is model
    assert scatter == 0.0


WILD = (0.3, -0.2, 0.1, -0.35, 0.25, -0.1, 0.2)


@pytest.mark.parametrize(
    ("scans", "factor"), [(7, math.sqrt(6 / 4)), (4, math.sqrt(3.0)), (3, 2.0)]
)
def test_scatter_is_that_of_paule_and_mandel_widened(scans, factor):
    """Without the factor chi-square would come down to its degrees of freedom.

    R. C. Paule and J. Mandel, J. Res. NBS 87, 377 (1982); factor of O. Bodnar and C. Elster,
    Metrologia 51, 516 (2014), which is not defined for three values: twice then.
    """
    model = shifted(make_model(scans), WILD[:scans])
    wider, scatter = add_scatter(model)
    assert scatter > 0.0
    log_h = np.log(single_planck_J_s(model))
    zero = next(q.value for q in model.inputs if q.name == names.ZERO)
    per_degree = np.pi / 180.0 / np.tan(np.radians(model.reading_deg - zero))
    total = log_covariance_of(model) + np.diag((scatter / factor * per_degree) ** 2)
    assert least_chi2(log_h, total) == pytest.approx(scans - 1, rel=1e-6)
    # One input a scan, acting on its own cutoff only.
    added = wider.inputs[len(model.inputs) :]
    assert [q.name for q in added] == [names.scatter_name(scan) for scan in model.scans]
    assert all(q.standard_uncertainty == scatter and not q.common for q in added)
    np.testing.assert_array_equal(wider.responses_deg[:, len(model.inputs) :], np.eye(scans))
    assert wider.correlation.shape == (len(wider.inputs), len(wider.inputs))
    assert relate(wider, scatter, None).chi2 < scans - 1
    assert wider.weights.sum() == pytest.approx(1.0)


def test_two_scans_cannot_tell_scatter():
    model = shifted(make_model(2), [0.5, -0.5])
    assert add_scatter(model) == (model, 0.0)


def test_scatter_is_seldom_added_by_chance():
    """Its limit is a chance of 1 %: of 200 sound runs some two, ten would be a fault."""
    base = make_model(6, gaussian=True)
    rng = np.random.default_rng(12)
    index = {q.name: i for i, q in enumerate(base.inputs)}
    own = np.array(
        [
            math.hypot(*(base.inputs[index[name(scan)]].standard_uncertainty for name in
                         (names.counting_name, names.window_name, names.background_name)))
            for scan in base.scans
        ]
    )  # fmt: skip
    added = sum(
        add_scatter(shifted(base, own * rng.standard_normal(6)))[1] > 0.0 for _ in range(200)
    )
    assert added < 10


def test_birge_ratio():
    assert math.isnan(birge_ratio_of(make_model(1)))
    model = make_model(5, scatter_seed=3)
    assert birge_ratio_of(model) == pytest.approx(relate(model, 0.0, None).birge_ratio)
