"""E_n of ISO 13528:2022, 9.7 (clause from memory), on worked figures.

The figure for 6.67(8)e-34 was computed for this check; U is expanded with k = 2.
"""

import pytest

from hdetermine.judgement import compare, e_number
from hdetermine.records.results import PlanckValue


def stated(value, expanded):
    return PlanckValue(value, expanded / 2.0, 0.95, 2.0, expanded, float("inf"), "linear", "")


@pytest.mark.parametrize(
    ("value", "expanded", "e_n", "agrees"),
    [
        (6.67e-34, 0.08e-34, 0.549123, True),
        (6.626_070_15e-34, 0.01e-34, 0.0, True),
        (6.626_070_15e-34 * 0.97, 0.19e-34, -1.046222, False),
    ],
)
def test_e_n(value, expanded, e_n, agrees):
    found = compare(stated(value, expanded))
    assert found.E_n == pytest.approx(e_n, abs=1e-6)
    assert found.verdict.startswith("agrees") is agrees


@pytest.mark.parametrize(
    ("value", "expanded", "reference", "reference_expanded", "expected"),
    [
        # ISO 13528:2022, 9.7 (from memory); figures worked out from the formula.
        (100.3, 0.25, 100.1, 0.12, 0.721218),
        (6.67e-34, 0.08e-34, 6.62607015e-34, 0.0, 0.549123),
    ],
)
def test_e_number_of_two_uncertain_values(value, expanded, reference, reference_expanded, expected):
    found = e_number(value, expanded, reference, reference_expanded)
    assert found == pytest.approx(expected, abs=1e-6)
