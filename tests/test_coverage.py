"""Effective degrees of freedom and coverage factors; correlation matrices."""

import math

import numpy as np
import pytest

from hdetermine.budget.correlation import checked_correlation, correlated_groups, square_root
from hdetermine.budget.coverage import coverage_factor, effective_degrees_of_freedom
from hdetermine.errors import InputError


def test_equal_components_add_their_freedoms():
    assert effective_degrees_of_freedom(np.array([1.0, -1.0]), np.array([5.0, 5.0])) == (
        pytest.approx(10.0)
    )


def test_infinite_freedom():
    inf = math.inf
    assert effective_degrees_of_freedom(np.array([1.0, 2.0]), np.array([inf, inf])) == inf
    assert effective_degrees_of_freedom(np.array([0.0, 0.0]), np.array([3.0, 3.0])) == inf


def test_correlated_inputs_count_as_one_component():
    matrix = np.array([[1.0, 0.5, 0.0], [0.5, 1.0, 0.0], [0.0, 0.0, 1.0]])
    c = np.array([1.0, 1.0, 2.0])
    # Group variance 1 + 1 + 2*0.5 = 3 with 4 degrees of freedom; the other 4 with 10.
    expected = 7.0**2 / (3.0**2 / 4.0 + 4.0**2 / 10.0)
    found = effective_degrees_of_freedom(c, np.array([9.0, 4.0, 10.0]), matrix)
    assert found == pytest.approx(expected)


def test_a_member_that_does_not_contribute_lends_no_freedom():
    matrix = np.array([[1.0, 0.5], [0.5, 1.0]])
    assert effective_degrees_of_freedom(np.array([1.0, 0.0]), np.array([9.0, 2.0]), matrix) == (
        pytest.approx(9.0)
    )


def test_coverage_factor_truncates_what_is_printed():
    assert coverage_factor(0.95, 16.7) == coverage_factor(0.95, 16.0)
    assert coverage_factor(0.95, 18.996) == coverage_factor(0.95, 19.0)
    assert coverage_factor(0.95, 0.3) == coverage_factor(0.95, 1.0)
    assert coverage_factor(0.95) == pytest.approx(1.959964, abs=1e-6)
    with pytest.raises(ValueError, match="between 0 and 1"):
        coverage_factor(1.0)


NAMES = ["x", "y", "z"]


@pytest.mark.parametrize(
    ("matrix", "match"),
    [
        (np.eye(2), r"shape \(2, 2\); 3 inputs"),
        ([[1, 0.1, 0], [0.2, 1, 0], [0, 0, 1]], "not symmetric for x and y"),
        ([[1, 0, 0], [0, 0.9, 0], [0, 0, 1]], "ones on its diagonal"),
        ([[1, 0, 1.2], [0, 1, 0], [1.2, 0, 1]], "beyond one for x and z"),
        ([[1, 0.9, -0.9], [0.9, 1, 0.9], [-0.9, 0.9, 1]], "not positive semi-definite"),
        ([[1, np.nan, 0], [np.nan, 1, 0], [0, 0, 1]], "not finite"),
    ],
)
def test_bad_correlation_matrices(matrix, match):
    with pytest.raises(InputError, match=match):
        checked_correlation(np.array(matrix, dtype=float), 3, NAMES)


def test_rounding_errors_are_forgiven():
    matrix = np.array([[1.0 + 1e-15, 1.0 + 2e-16], [1.0, 1.0]])
    checked = checked_correlation(matrix, 2)
    np.testing.assert_array_equal(checked, np.ones((2, 2)))
    root = square_root(checked)
    np.testing.assert_allclose(root @ root.T, checked, atol=1e-12)


def test_groups_are_chained():
    matrix = np.eye(5)
    for i, j in ((0, 3), (3, 4)):
        matrix[i, j] = matrix[j, i] = 0.3
    assert correlated_groups(matrix) == [[0, 3, 4], [1], [2]]
