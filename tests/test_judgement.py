"""Judgement: E_n, the result read backwards, and every check passing and failing."""

import math
from dataclasses import replace

import numpy as np
import pytest
from hand_model import make_model, with_input
from simulated import TRUTH, five_voltages, simulated, voltages

from hdetermine.budget.planck import planck_budget
from hdetermine.determination import determine
from hdetermine.inference import measurement as names
from hdetermine.inference.weights import with_gls_weights
from hdetermine.judgement import compare, consistency, read_backwards
from hdetermine.records.results import Comparison, Influence, PlanckValue, Route

SI = 6.626_070_15e-34  # exact


@pytest.mark.parametrize(
    ("value", "expanded", "e_n", "agrees"),
    [
        # ISO 13528:2022, 9.7 (from memory); h = 6.67(8)e-34: computed for this check.
        (6.67e-34, 0.08e-34, 0.549123, True),
        (SI, 0.02e-34, 0.0, True),
        (SI + 0.05e-34, 0.05e-34, 1.0, True),
        (SI - 0.0501e-34, 0.05e-34, -1.002, False),
    ],
)
def test_comparison(value, expanded, e_n, agrees):
    found = compare(PlanckValue(value, expanded / 2, 0.95, 2.0, expanded, math.inf, "linear", ""))
    assert found.E_n == pytest.approx(e_n, abs=1e-6)
    assert found.relative_deviation == pytest.approx(value / SI - 1.0, abs=1e-12)
    assert found.verdict.startswith("agrees") is agrees
    assert found.reference_J_s == SI


def made_with(**changed):
    """Exact points of the SI value, made with other true inputs than the sheet's estimates."""
    model = make_model(5)
    true = names.estimates(model)
    for i, quantity in enumerate(model.inputs):
        if quantity.name in changed:
            true[i] = changed[quantity.name]
    reading = names.predicted_reading_deg(model, np.array([SI]), true[:, np.newaxis])[:, 0]
    return with_gls_weights(replace(model, reading_deg=reading))


@pytest.mark.parametrize("gain", [0.98, 0.999, 1.0, 1.013])
def test_read_backwards_closes_on_the_gain(gain):
    found = read_backwards(planck_budget(made_with(**{names.GAIN: gain})))
    assert found.voltage_gain == pytest.approx(gain, abs=1e-9)


@pytest.mark.parametrize("spacing", [200.9, 201.36, 202.2])
def test_read_backwards_closes_on_the_spacing(spacing):
    model = made_with(**{names.SPACING: spacing})
    found = read_backwards(planck_budget(model))
    # To second order: another spacing is another angle.
    assert found.spacing_pm == pytest.approx(spacing, abs=1e-6)


def test_read_backwards_leaves_out_what_it_seeks():
    """The stated uncertainty of the gain has no part in that of the implied gain."""
    model = make_model(5, scatter_seed=2)
    found = read_backwards(planck_budget(model))
    wild = with_input(model, names.GAIN, standard_uncertainty=0.3)
    assert read_backwards(planck_budget(wild)).voltage_gain_u == pytest.approx(
        found.voltage_gain_u, rel=1e-9
    )
    # u(gain) of a run without any other uncertainty is that of counting alone, here small.
    budget = planck_budget(model)
    total = budget.combined_standard_uncertainty / budget.value
    assert 0.0 < found.voltage_gain_u < math.sqrt(total**2 - 0.0039**2) * 1.05
    # The spacing keeps the stated gain, which dominates.
    assert found.spacing_u_pm / found.spacing_pm == pytest.approx(total, rel=0.02)


@pytest.fixture(scope="module")
def sound():
    run, _ = five_voltages()
    return determine(run, posterior=False, monte_carlo=False)


WORDS = (
    "zero offset", "spacing from the lines", "width of the edges", "fits against", "scatter",
    "intercept", "exponent", "influence", "routes", "SI value",
)  # fmt: skip


def checks(d, **changed):
    given = {
        "apparatus": d.run.apparatus,
        "scale": d.angle_scale,
        "cutoffs": d.cutoffs,
        "relation": d.relation,
        "comparison": d.comparison,
        "routes": d.routes,
        **changed,
    }
    found = consistency(**given)
    assert len(found) == len(WORDS)
    named = {}
    for word in WORDS:
        (one,) = [check for check in found if word in check.name]
        named[word] = one
    return named


def test_a_sound_run_passes(sound):
    found = checks(sound)
    for word, check in found.items():
        assert check.passed is not False, (word, check.figure, check.limit)
        assert check.meaning.endswith((".", "?"))
    assert tuple(found.values()) == sound.checks
    # Lines of one order too close together to tell the spacing; only one route.
    assert found["spacing from the lines"].passed is None
    assert found["routes"].passed is None


def zero_at(d, value):
    return {"scale": replace(d.angle_scale, zero=replace(d.angle_scale.zero, value=value))}


def related(d, **changed):
    return {"relation": replace(d.relation, **changed)}


def deviances(d, factor):
    return {"cutoffs": tuple(
        replace(c, deviance=factor * c.degrees_of_freedom) for c in d.cutoffs
    )}  # fmt: skip


def influences(shift, n=5):
    return tuple(Influence(f"u{i}", 20.0 + i, SI, shift if i == 2 else 0.1, 0.2) for i in range(n))


def with_route(d, value=1.0, u=1.0, usable=True):
    base = d.routes["linear"]
    other = Route(
        "monte_carlo", base.value_J_s + value * base.standard_uncertainty_J_s,
        u * base.standard_uncertainty_J_s, (0.0, 1.0), usable,
    )  # fmt: skip
    return {"routes": {**d.routes, "monte_carlo": other}}


def compared(e_n):
    return {"comparison": Comparison(SI, 0.0, e_n, "agrees" if abs(e_n) <= 1 else "does not")}


CASES = {
    # check, what is changed, verdict
    "zero as stated": ("zero offset", lambda d: zero_at(d, 0.0), True),
    "zero a little off": ("zero offset", lambda d: zero_at(d, 0.25), True),
    "zero far off": ("zero offset", lambda d: zero_at(d, 0.27), False),
    "zero far off, other sign": ("zero offset", lambda d: zero_at(d, -0.27), False),
    "no lines": ("zero offset",
                 lambda d: {"scale": replace(d.angle_scale, zero_from="run sheet")}, None),
    "spacing as stated": (
        "spacing from the lines",
        lambda d: {"scale": replace(d.angle_scale, free_spacing_pm=282.05,
                                    free_spacing_u_pm=0.02)}, True),
    "spacing of another crystal": (
        "spacing from the lines",
        lambda d: {"scale": replace(d.angle_scale, free_spacing_pm=281.3,
                                    free_spacing_u_pm=0.1)}, False),
    "edges as wide as lines": (
        "width of the edges", lambda d: {"scale": replace(d.angle_scale, edge_pull=-2.5)}, True),
    "edges wider": (
        "width of the edges", lambda d: {"scale": replace(d.angle_scale, edge_pull=2.7)}, False),
    "width unknown": (
        "width of the edges", lambda d: {"scale": replace(d.angle_scale, edge_pull=None)}, None),
    "fits as good as Poisson": ("fits against", lambda d: deviances(d, 1.0), True),
    "fits that miss": ("fits against", lambda d: deviances(d, 1.6), False),
    "no freedom": ("fits against", lambda d: {"cutoffs": tuple(
        replace(c, degrees_of_freedom=0) for c in d.cutoffs)}, None),
    "Birge ratio near one": ("scatter", lambda d: related(d, birge_ratio=1.2), True),
    "Birge ratio too large": ("scatter", lambda d: related(d, birge_ratio=2.0), False),
    "scatter was added": ("scatter", lambda d: related(
        d, birge_ratio=0.9, scatter_deg=0.02, stated_birge_ratio=2.5), False),
    "one voltage": ("scatter", lambda d: related(d, degrees_of_freedom=0), None),
    "through the origin": ("intercept", lambda d: related(
        d, intercept_pm=0.2, free_covariance=np.diag([1.0, 0.01])), True),
    "past the origin": ("intercept", lambda d: related(
        d, intercept_pm=-0.3, free_covariance=np.diag([1.0, 0.01])), False),
    "two voltages, no intercept": ("intercept", lambda d: related(d, intercept_pm=math.nan), None),
    "inverse": ("exponent", lambda d: related(d, exponent=0.98, exponent_u=0.01), True),
    "not inverse": ("exponent", lambda d: related(d, exponent=0.97, exponent_u=0.01), False),
    "two voltages, no exponent": ("exponent", lambda d: related(d, exponent=math.nan), None),
    "every scan alike": ("influence", lambda d: related(d, influence=influences(1.9)), True),
    "one scan decides": ("influence", lambda d: related(d, influence=influences(-2.1)), False),
    "two scans": ("influence", lambda d: related(d, influence=influences(0.1, 2)), None),
    "routes agree": ("routes", lambda d: with_route(d, 0.1, 1.05), True),
    "routes differ": ("routes", lambda d: with_route(d, 0.5, 1.0), False),
    "routes of other width": ("routes", lambda d: with_route(d, 0.0, 1.5), False),
    "route not usable": ("routes", lambda d: with_route(d, 5.0, 1.0, usable=False), None),
    "agrees with the SI": ("SI value", lambda d: compared(-0.99), True),
    "differs from the SI": ("SI value", lambda d: compared(1.01), False),
}  # fmt: skip


@pytest.mark.parametrize("case", CASES)
def test_check(sound, case):
    word, change, verdict = CASES[case]
    check = checks(sound, **change(sound))[word]
    assert check.passed is verdict
    assert check.meaning.endswith((".", "?"))
    if verdict is None:
        assert check.figure is None
    else:
        assert math.isfinite(check.figure)
        assert check.limit is not None
        assert (abs(check.figure) <= check.limit) is verdict


def test_words_of_a_check_fit_its_verdict(sound):
    for case in ("Birge ratio near one", "Birge ratio too large"):
        word, change, verdict = CASES[case]
        meaning = checks(sound, **change(sound))[word].meaning
        assert ("do not agree" in meaning) is not verdict
    narrow = checks(sound, scale=replace(sound.angle_scale, edge_pull=-3.0))["width of the edges"]
    wide = checks(sound, scale=replace(sound.angle_scale, edge_pull=3.0))["width of the edges"]
    assert "narrower" in narrow.meaning
    assert "wider" in wide.meaning
    one = checks(sound, **related(sound, influence=influences(-2.1)))["influence"]
    assert "u2 alone moves the result by 2.1 u" in one.meaning


def test_spacing_is_known_no_better_than_the_temperature(sound):
    """20 K of uncertainty are 0.08 % of the spacing of rock salt."""
    scale = replace(sound.angle_scale, free_spacing_pm=282.4, free_spacing_u_pm=0.01)
    crystal = sound.run.apparatus.crystal
    loose = replace(crystal, temperature_C=crystal.temperature_C.with_uncertainty(20.0))
    apparatus = replace(sound.run.apparatus, crystal=loose)
    assert checks(sound, scale=scale)["spacing from the lines"].passed is False
    assert checks(sound, scale=scale, apparatus=apparatus)["spacing from the lines"].passed is True


def test_a_wrong_gain_is_noticed_and_read_backwards():
    """True gain 1.02 against a stated 1.000(4): five standard uncertainties."""
    run, simulation = simulated(
        voltages(24, 29, 35), {**TRUTH, "voltage_gain": 1.02, "to_deg": 9.0}, seed=7
    )
    d = determine(run, posterior=False, monte_carlo=False)
    assert d.comparison.E_n < -1.0
    assert checks(d)["SI value"].passed is False
    back = d.read_backwards
    assert simulation.truth.voltage_gain == 1.02
    assert back.voltage_gain == pytest.approx(1.02, abs=3.0 * back.voltage_gain_u)
    assert back.voltage_gain_u < 0.006
