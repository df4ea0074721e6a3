"""Which route counts, and what is said about the others."""

import numpy as np
import pytest
from hand_model import make_model, with_input

from hdetermine.budget.choice import choose_route, disagreements
from hdetermine.budget.planck import planck_budget
from hdetermine.inference import measurement
from hdetermine.inference.montecarlo import monte_carlo_route
from hdetermine.records.results import Route


def route(name, value=6.60e-34, u=3.0e-36, usable=True, reason="", **diagnostics):
    return Route(name, value, u, (value - 2 * u, value + 2 * u), usable, reason, diagnostics)


def carlo(passed, **more):
    validation = {
        "passed": passed,
        "tolerance": 5e-38,
        "low_difference": 3e-38 if passed else 9e-38,
        "high_difference": 1e-38,
    }
    return route("monte_carlo", validation=validation, **more)


def test_linear_counts_if_validated():
    name, reason = choose_route({"linear": route("linear"), "monte_carlo": carlo(True)})
    assert name == "linear"
    assert "passes the validation" in reason
    assert "0.0100 u, with 0.0167 u allowed" in reason


def test_monte_carlo_counts_otherwise():
    name, reason = choose_route({"linear": route("linear"), "monte_carlo": carlo(False)})
    assert name == "monte_carlo"
    assert "fails the validation" in reason
    assert "0.0300 u" in reason
    name, _ = choose_route({"linear": route("linear"), "monte_carlo": carlo(True)}, False)
    assert name == "monte_carlo"


@pytest.mark.parametrize(
    ("more", "words"),
    [
        ({}, "was not taken"),
        (
            {"monte_carlo": route("monte_carlo", usable=False, reason="Not stable.")},
            "not usable. The Monte Carlo route is not usable: Not stable.",
        ),
    ],
)
def test_without_a_usable_monte_carlo_route_the_linear_one_stands_unvalidated(more, words):
    name, reason = choose_route({"linear": route("linear"), **more})
    assert name == "linear"
    assert "not validated" in reason
    assert words in reason


@pytest.mark.parametrize(
    ("value", "u", "said"),
    [
        (6.600e-34 + 0.29 * 3e-36, 3.0e-36, False),
        (6.600e-34 + 0.31 * 3e-36, 3.0e-36, True),
        (6.600e-34 - 0.31 * 3e-36, 3.0e-36, True),
        (6.600e-34, 3.0e-36 * 1.14, False),
        (6.600e-34, 3.0e-36 * 1.16, True),
        (6.600e-34, 3.0e-36 * 0.84, True),
    ],
)
def test_a_posterior_that_differs_is_named(value, u, said):
    routes = {
        "linear": route("linear"),
        "monte_carlo": carlo(True),
        "posterior": route("posterior", value, u),
    }
    found = list(disagreements(routes, "linear"))
    assert bool(found) is said
    assert all(sentence.startswith("The posterior route differs") for sentence in found)


def test_the_cause_is_what_the_posterior_learned():
    priors = [
        {"quantity": "h", "distribution": "flat"},
        {
            "quantity": "goniometer.zero_deg",
            "value": 0.0,
            "standard_uncertainty": 0.1,
            "posterior_value": 0.08,
            "posterior_standard_uncertainty": 0.02,
        },
        {
            "quantity": "tube.voltage.gain",
            "value": 1.0,
            "standard_uncertainty": 0.004,
            "posterior_value": 1.0,
            "posterior_standard_uncertainty": 0.004,
        },
    ]
    routes = {
        "linear": route("linear"),
        "monte_carlo": carlo(True),
        "posterior": route("posterior", 6.62e-34, priors=priors),
    }
    _, reason = choose_route(routes)
    assert "goniometer.zero_deg by +0.8 of its u" in reason
    assert "tube.voltage.gain" not in reason


def test_a_posterior_that_has_not_converged_is_never_silent():
    routes = {
        "linear": route("linear"),
        "monte_carlo": carlo(True),
        "posterior": route("posterior", usable=False, reason="The chain has not converged."),
    }
    name, reason = choose_route(routes)
    assert name == "linear"
    assert "The posterior route is not usable: The chain has not converged." in reason


def test_on_real_routes():
    model = with_input(
        make_model(3), measurement.GAIN, standard_uncertainty=0.02, distribution="rectangular"
    )
    budget = planck_budget(model)
    half = budget.expanded_uncertainty
    linear = Route(
        "linear",
        budget.value,
        budget.combined_standard_uncertainty,
        (budget.value - half, budget.value + half),
    )
    drawn = monte_carlo_route(model, budget, np.random.default_rng(1))
    assert choose_route({"linear": linear, "monte_carlo": drawn})[0] == "monte_carlo"
