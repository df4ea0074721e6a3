"""Truths: stated, taken from the run sheet, or drawn from its distributions."""

import math

import numpy as np
import pytest

from hdetermine.errors import InputError
from hdetermine.planning.specification import check_specification
from hdetermine.planning.truth import draw_from, settle_truth
from hdetermine.records.quantity import HALF_WIDTH_DIVISOR, Quantity

SHEET = {
    "schema": 1,
    "tube": {
        "anode": "Cu",
        "voltage": {
            "gain": {"value": 1.0, "u": 0.004},
            "repeatability_kV": {"value": 0.0, "u": 0.02},
        },
    },
    "crystal": {"material": "LiF", "reflection": "200", "temperature_C": {"value": 25.0, "u": 2.0}},
    "goniometer": {"step_deg": 0.1, "zero_deg": {"value": 0.02, "u": 0.1}},
    "scan": [
        {"file": f"a{kV}.csv", "tube_voltage_kV": float(kV), "dwell_s": 5.0} for kV in (20, 30)
    ],
}
SWEEP = {"from_deg": 4.0, "to_deg": 12.0}


def settled(seed=3, **truth):
    specification = check_specification({**SHEET, "truth": {**SWEEP, **truth}})
    return settle_truth(
        specification.truth, specification.apparatus, 2, np.random.default_rng(seed)
    )


def test_without_a_word_the_truth_is_the_estimate():
    truth = settled()
    assert truth.voltage_gain == 1.0
    assert truth.zero_deg == 0.02
    assert truth.displacements_kV == (0.0, 0.0)
    assert truth.spacing_in_use_pm == truth.spacing_pm


def test_stated_truth_wins_over_a_draw():
    truth = settled(draw=True, voltage_gain=1.01, zero_deg=-0.3, kernel="triangular")
    assert (truth.voltage_gain, truth.zero_deg, truth.triangular_fraction) == (1.01, -0.3, 1.0)
    assert truth.voltage_offset_kV != 0.0
    # The other draws do not depend on what is stated.
    assert truth.spacing_pm == settled(draw=True).spacing_pm


def test_spacing_in_use_expands():
    truth = settled(temperature_C=35.0, spacing_pm=201.0, expansion_per_K=3e-5)
    assert truth.spacing_in_use_pm == pytest.approx(201.0 * (1 + 3e-4))


def test_repeatability_as_spread_or_list():
    assert settled(voltage_repeatability_kV=[0.1, -0.2]).displacements_kV == (0.1, -0.2)
    spread = [settled(seed, voltage_repeatability_kV=0.5).displacements_kV for seed in range(300)]
    assert np.std(spread) == pytest.approx(0.5, rel=0.1)
    with pytest.raises(InputError, match="found 3 displacements for 2 scans"):
        settled(voltage_repeatability_kV=[0.1, 0.2, 0.3])


def test_box_is_marked():
    assert math.isnan(settled(kernel="box").triangular_fraction)
    assert settled(kernel={"triangular_fraction": 0.3}).triangular_fraction == 0.3


@pytest.mark.parametrize("distribution", ["normal", "t", *HALF_WIDTH_DIVISOR])
def test_draws_have_the_stated_spread(distribution):
    quantity = Quantity("x", "x", 5.0, 0.2, "1", distribution=distribution, degrees_of_freedom=12)
    rng = np.random.default_rng(11)
    draws = np.array([draw_from(quantity, rng) for _ in range(20_000)])
    # Student's distribution is wider than its scale (JCGM 101:2008, 6.4.9.4).
    spread = 0.2 * (math.sqrt(12 / 10) if distribution == "t" else 1.0)
    assert draws.mean() == pytest.approx(5.0, abs=0.01)
    assert draws.std() == pytest.approx(spread, rel=0.03)
    if quantity.half_width is not None:
        assert np.abs(draws - 5.0).max() <= quantity.half_width


def test_draws_stay_above_a_bound():
    quantity = Quantity("x", "x", 1.0, 5.0, "1")
    rng = np.random.default_rng(2)
    assert min(draw_from(quantity, rng, 0.0) for _ in range(500)) > 0.0
    with pytest.raises(InputError, match="wholly below"):
        draw_from(Quantity("x", "x", -9.0, 0.1, "1"), rng, 0.0)
