"""Linear propagation for any measurement function of named inputs."""

import math
from dataclasses import replace

import numpy as np
import pytest
from hand_model import make_model
from uncertainties import correlated_values_norm, umath

from hdetermine.budget.planck import (
    common_share,
    group_of,
    group_shares,
    limiting_sentence,
    planck_budget,
    scan_family,
)
from hdetermine.budget.propagation import linear_budget, linear_outputs
from hdetermine.errors import InputError
from hdetermine.inference.measurement import GAIN, estimates, planck_J_s
from hdetermine.inference.weights import planck_gradient
from hdetermine.records.quantity import Quantity


def q(name, value, u, **more):
    return Quantity(name, name, value, u, "1", **more)


INPUTS = [q("x", 2.0, 0.03), q("y", -1.5, 0.02), q("k", 0.7, 0.05)]
R = np.array([[1.0, 0.6, 0.0], [0.6, 1.0, -0.3], [0.0, -0.3, 1.0]])


def wave(values):
    x, y, k = values
    return x * umath.exp(k * y) / y


def wave_numpy(values):
    """The same, with functions that take no numbers with uncertainty."""
    x, y, k = values
    return x * np.exp(k * y) / y


def budget(model=wave, inputs=INPUTS, correlation=R, **more):
    return linear_budget(model, inputs, correlation, measurand="w", unit="1", **more)


def test_quadrature_sum_with_correlations_is_the_combined_uncertainty():
    found = budget()
    c = np.array([row.contribution for row in found.rows])
    assert math.sqrt(c @ R @ c) == pytest.approx(found.combined_standard_uncertainty, rel=1e-14)
    assert sum(row.variance_share for row in found.rows) == pytest.approx(1.0, abs=1e-14)
    # Independent of our sums: the package's own treatment of correlated values.
    pairs = [(i.value, i.standard_uncertainty) for i in INPUTS]
    other = wave(correlated_values_norm(pairs, R))
    assert other.std_dev == pytest.approx(found.combined_standard_uncertainty, rel=1e-12)
    assert other.nominal_value == pytest.approx(found.value, rel=1e-14)


def test_sensitivities_are_signed():
    x, y, k = (i.value for i in INPUTS)
    w = x * math.exp(k * y) / y
    expected = [w / x, w * (k - 1.0 / y), w * y]
    assert [row.sensitivity for row in budget().rows] == pytest.approx(expected, rel=1e-12)
    assert expected[0] < 0.0 < expected[2]
    assert [row.contribution for row in budget().rows] == pytest.approx(
        [c * i.standard_uncertainty for c, i in zip(expected, INPUTS, strict=True)], rel=1e-12
    )


def test_functions_without_carried_derivatives_fall_back_on_differences():
    carried, differences = budget(), budget(wave_numpy)
    for one, other in zip(carried.rows, differences.rows, strict=True):
        assert other.sensitivity == pytest.approx(one.sensitivity, rel=1e-8)


def test_an_exact_input_keeps_its_sensitivity():
    exact = [INPUTS[0], q("y", -1.5, 0.0), INPUTS[2]]
    for model in (wave, wave_numpy):
        row = budget(model, exact, None).rows[1]
        assert row.contribution == 0.0
        assert row.sensitivity == pytest.approx(budget().rows[1].sensitivity, rel=1e-6)


def test_rows_carry_what_was_stated():
    inputs = [
        q("x", 2.0, 0.03, evaluation="A", degrees_of_freedom=4.0, source="log", common=False),
        q("y", -1.5, 0.02, distribution="rectangular", is_default=True),
    ]
    found = linear_budget(
        lambda v: v[0] - 2 * v[1],
        inputs,
        np.array([[1.0, 0.5], [0.5, 1.0]]),
        measurand="w",
        unit="m",
        group_of=str.upper,
    )
    first, second = found.rows
    assert (first.evaluation, first.degrees_of_freedom, first.source) == ("A", 4.0, "log")
    assert (first.common, first.correlated_with, first.group) == (False, ("y",), "X")
    assert (second.distribution, second.is_default) == ("rectangular", True)


def test_a_result_that_depends_on_nothing():
    found = budget(lambda v: 3.0)
    assert found.combined_standard_uncertainty == 0.0
    assert found.expanded_uncertainty == 0.0
    assert [row.variance_share for row in found.rows] == [0.0, 0.0, 0.0]


def test_second_order_of_a_square():
    # y = x^2 with x normal: the variance is exactly 4 x^2 u^2 + 2 u^4.
    found = linear_budget(
        lambda v: v[0] ** 2, [q("x", 0.3, 0.2)], measurand="y", unit="1", second_order=True
    )
    exact = math.sqrt(4 * 0.3**2 * 0.2**2 + 2 * 0.2**4)
    assert found.second_order_standard_uncertainty == pytest.approx(exact, rel=1e-9)


def test_second_order_of_a_product_of_correlated_inputs():
    # Normal inputs of mean zero: E[x^2 y^2] - E[xy]^2 = u^2 v^2 (1 + r^2) (Isserlis 1918).
    r = 0.7
    found = linear_budget(
        lambda v: v[0] * v[1],
        [q("x", 0.0, 0.2), q("y", 0.0, 0.5)],
        np.array([[1.0, r], [r, 1.0]]),
        measurand="y",
        unit="1",
        second_order=True,
    )
    assert found.combined_standard_uncertainty == 0.0
    assert found.second_order_standard_uncertainty == pytest.approx(
        0.1 * math.sqrt(1 + r**2), rel=1e-9
    )


def test_second_order_third_derivatives():
    # y = x^3 at x: variance to second order u^2 9x^4 + u^4 (18 x^2 + 18 x^2).
    x, u = 1.2, 0.05
    found = linear_budget(
        lambda v: v[0] ** 3, [q("x", x, u)], measurand="y", unit="1", second_order=True
    )
    exact = math.sqrt(9 * x**4 * u**2 + 36 * x**2 * u**4)
    assert found.second_order_standard_uncertainty == pytest.approx(exact, rel=1e-7)
    # ... and mixed ones: y = x z^2, f_x f_xzz + 2 f_xz^2/2 ordered pairs.
    z, v = 0.8, 0.07
    found = linear_budget(
        lambda values: values[0] * values[1] ** 2,
        [q("x", x, u), q("z", z, v)],
        measurand="y",
        unit="1",
        second_order=True,
    )
    first = (z**2 * u) ** 2 + (2 * x * z * v) ** 2
    second = 0.5 * (2 * x) ** 2 * v**4 + (2 * z) ** 2 * u**2 * v**2 + z**2 * 2 * u**2 * v**2
    assert found.second_order_standard_uncertainty == pytest.approx(
        math.sqrt(first + second), rel=1e-7
    )


def test_several_outputs():
    outputs = linear_outputs(lambda v: [v[0] + v[1], v[0] - v[1], 5.0], INPUTS[:2], R[:2, :2])
    ux, uy, r = 0.03, 0.02, 0.6
    covariance = np.array(
        [
            [ux**2 + uy**2 + 2 * r * ux * uy, ux**2 - uy**2, 0],
            [ux**2 - uy**2, ux**2 + uy**2 - 2 * r * ux * uy, 0],
            [0, 0, 0],
        ]
    )
    np.testing.assert_allclose(outputs.covariance, covariance, atol=1e-18)
    assert outputs.correlation[0, 1] == pytest.approx(
        covariance[0, 1] / math.sqrt(covariance[0, 0] * covariance[1, 1])
    )
    with pytest.raises(ValueError, match="linear_outputs"):
        budget(lambda v: [v[0], v[1]])


@pytest.mark.parametrize(
    ("inputs", "correlation", "model", "match"),
    [
        ([q("x", 1, 0.1), q("x", 2, 0.1)], None, sum, "x is named twice"),
        ([q("x", 1, -0.1)], None, sum, "zero or a positive"),
        ([q("x", 1, 0.1, distribution="flat")], None, sum, "unknown; use one of"),
        ([q("x", 1, 0.1)], np.eye(2), sum, "shape"),
        ([q("x", 0, 0.1)], None, lambda v: 1.0 / v[0], "not defined"),
    ],
)
def test_bad_input(inputs, correlation, model, match):
    with pytest.raises(InputError, match=match):
        linear_budget(model, inputs, correlation, measurand="y", unit="1")


# --- the budget of h --------------------------------------------------------------------------


def test_budget_of_h():
    model = make_model(9, scatter_seed=4)
    found = planck_budget(model)
    assert found.value == pytest.approx(planck_J_s(model, estimates(model)), rel=1e-14)
    gradient = np.array([row.sensitivity for row in found.rows])
    np.testing.assert_allclose(gradient, planck_gradient(model), rtol=1e-9, atol=1e-45)
    c = np.array([row.contribution for row in found.rows])
    assert math.sqrt(c @ found.correlation @ c) == pytest.approx(
        found.combined_standard_uncertainty, rel=1e-13
    )
    assert sum(row.variance_share for row in found.rows) == pytest.approx(1.0, abs=1e-12)
    assert sum(group_shares(found).values()) == pytest.approx(1.0, abs=1e-12)
    assert found.rows[8].correlated_with == ("crystal.spacing_pm", "lines.wavelength_scale")
    assert 0.0 < common_share(found) < 1.0
    assert "voltage gain" in limiting_sentence(found)
    assert math.isfinite(found.effective_degrees_of_freedom)


def test_three_contributions_are_named_whatever_their_size():
    """One input may hold nearly all of the variance: the next two are named all the same."""
    model = make_model(9, scatter_seed=4)
    inputs = tuple(
        replace(one, standard_uncertainty=0.01, distribution="normal") if one.name == GAIN else one
        for one in model.inputs
    )
    found = planck_budget(replace(model, inputs=inputs))
    shares = list(group_shares(found).items())[:3]
    assert shares[0][1] > 0.8 > 0.05 > shares[1][1]
    sentence = limiting_sentence(found)
    assert f"is limited by {shares[0][0]} (" in sentence
    assert "followed by" in sentence
    for group, share in shares:
        assert (group in sentence) is (share > 0.005)


def test_groups_and_families():
    model = make_model(3)
    groups = {row.quantity: row.group for row in planck_budget(model).rows}
    assert groups["tube.voltage.gain"] == "voltage gain"
    assert groups["scan.v1.counting_deg"] == "counting statistics"
    assert not any("." in group for group in groups.values())
    assert group_of("something.else") == "something.else"
    assert {scan_family(row.quantity) for row in planck_budget(model).rows if not row.common} == {
        "scan.*.counting_deg",
        "scan.*.window_deg",
        "scan.*.background_deg",
        "scan.*.voltage_kV",
    }


def test_common_contributions_do_not_shrink_with_more_voltages():
    few, many = planck_budget(make_model(3)), planck_budget(make_model(9))

    def variance(found, common):
        return sum(
            row.variance_share * found.combined_standard_uncertainty**2
            for row in found.rows
            if row.common is common and row.quantity.startswith(("scan", "tube.voltage.gain"))
        )

    assert variance(many, False) < 0.6 * variance(few, False)
    assert variance(many, True) == pytest.approx(variance(few, True), rel=0.02)
