"""The linear law of propagation for any measurement function of named inputs."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hdetermine.budget.correlation import checked_correlation, square_root
from hdetermine.budget.coverage import coverage_factor, effective_degrees_of_freedom
from hdetermine.budget.derivatives import MeasurementFunction, jacobian, second_order_variance
from hdetermine.budget.distributions import checked_quantity
from hdetermine.errors import InputError
from hdetermine.records.quantity import Quantity
from hdetermine.records.results import Budget, BudgetRow

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class LinearOutputs:
    """Several outputs of the same inputs, with their covariances.

    Attributes
    ----------
    names : tuple of str
        Of the k outputs.
    values : ndarray, shape (k,)
        At the estimates of the inputs.
    covariance : ndarray, shape (k, k)
        Of the outputs.
    sensitivities : ndarray, shape (k, m)
        Derivatives by the inputs.
    """

    names: tuple[str, ...]
    values: FloatArray
    covariance: FloatArray
    sensitivities: FloatArray

    @property
    def standard_uncertainties(self) -> FloatArray:
        """Square roots of the variances, shape (k,)."""
        return np.asarray(np.sqrt(np.diag(self.covariance)))

    @property
    def correlation(self) -> FloatArray:
        """Correlation matrix, shape (k, k); nan for an output without uncertainty."""
        u = self.standard_uncertainties
        with np.errstate(invalid="ignore", divide="ignore"):
            return np.asarray(self.covariance / np.outer(u, u))


def _checked(
    inputs: Sequence[Quantity], correlation: FloatArray | None
) -> tuple[FloatArray, FloatArray]:
    names = [checked_quantity(quantity).name for quantity in inputs]
    if len(set(names)) < len(names):
        twice = next(name for name in names if names.count(name) > 1)
        raise InputError(f"The input {twice} is named twice; nothing may enter a budget twice.")
    u = np.array([quantity.standard_uncertainty for quantity in inputs])
    return u, checked_correlation(correlation, len(names), names)


def linear_outputs(
    model: MeasurementFunction,
    inputs: Sequence[Quantity],
    correlation: FloatArray | None = None,
    names: Sequence[str] = (),
) -> LinearOutputs:
    """Propagate to several outputs at once.

    Parameters
    ----------
    model : callable
        Takes an array of m values, returns k numbers; see `derivatives.jacobian`.
    inputs : sequence of Quantity
        m named inputs.
    correlation : ndarray, shape (m, m), or None
        Between the inputs.
    names : sequence of str
        Of the outputs, in order.

    Returns
    -------
    LinearOutputs

    References
    ----------
    JCGM 100:2008, 5.2.2 and H.2.3.
    """
    u, matrix = _checked(inputs, correlation)
    values, derivatives = jacobian(model, inputs)
    scaled = derivatives * u
    return LinearOutputs(tuple(names), values, scaled @ matrix @ scaled.T, derivatives)


def linear_budget(
    model: MeasurementFunction,
    inputs: Sequence[Quantity],
    correlation: FloatArray | None = None,
    *,
    measurand: str,
    unit: str,
    coverage_probability: float = 0.95,
    second_order: bool = False,
    group_of: Callable[[str], str] | None = None,
) -> Budget:
    """Uncertainty budget of a measurement function.

    Parameters
    ----------
    model : callable
        Takes an array of m values in the order of `inputs` and returns one number. It is called
        with numbers with uncertainty first; see `derivatives.jacobian` for functions that do
        not accept them.
    inputs : sequence of Quantity
        m named inputs, each named once.
    correlation : ndarray, shape (m, m), or None
        Between the inputs; None if they are independent. It is applied as it stands: the
        sensitivities are those of the named inputs, never of combinations of them.
    measurand, unit : str
        What the result is called, and its unit.
    coverage_probability : float
        Of the expanded uncertainty.
    second_order : bool
        Add the combined standard uncertainty with the next terms of the Taylor series.
    group_of : callable or None
        Group of a row from the name of its input.

    Returns
    -------
    Budget

    Raises
    ------
    InputError
        If an input or the correlation matrix is not valid, or the function undefined.

    References
    ----------
    JCGM 100:2008, eq. (16), (G.2b), note to 5.1.2.
    """
    u, matrix = _checked(inputs, correlation)
    values, derivatives = jacobian(model, inputs)
    if len(values) != 1:
        raise ValueError("a budget has one output; use linear_outputs for several")
    sensitivities = derivatives[0]
    contributions = sensitivities * u
    parts = contributions * (matrix @ contributions)
    variance = max(float(parts.sum()), 0.0)
    shares = parts / variance if variance > 0.0 else np.zeros(len(parts))
    freedoms = np.array([quantity.degrees_of_freedom for quantity in inputs])
    effective = effective_degrees_of_freedom(contributions, freedoms, matrix)
    factor = coverage_factor(coverage_probability, effective)
    combined = math.sqrt(variance)
    second = None
    if second_order:
        estimates = np.array([quantity.value for quantity in inputs])
        root = np.diag(u) if correlation is None else u[:, np.newaxis] * square_root(matrix)
        second = math.sqrt(max(variance + second_order_variance(model, estimates, root), 0.0))
    rows = tuple(
        BudgetRow(
            quantity=quantity.name,
            symbol=quantity.symbol,
            estimate=quantity.value,
            unit=quantity.unit,
            standard_uncertainty=quantity.standard_uncertainty,
            evaluation=quantity.evaluation,
            distribution=quantity.distribution,
            degrees_of_freedom=quantity.degrees_of_freedom,
            sensitivity=float(sensitivities[i]),
            contribution=float(contributions[i]),
            variance_share=float(shares[i]),
            common=quantity.common,
            correlated_with=tuple(
                inputs[j].name for j in np.flatnonzero(matrix[i]).tolist() if j != i
            ),
            source=quantity.source,
            is_default=quantity.is_default,
            group="" if group_of is None else group_of(quantity.name),
        )
        for i, quantity in enumerate(inputs)
    )
    return Budget(
        measurand=measurand,
        unit=unit,
        value=float(values[0]),
        combined_standard_uncertainty=combined,
        effective_degrees_of_freedom=effective,
        coverage_probability=coverage_probability,
        coverage_factor=factor,
        expanded_uncertainty=factor * combined,
        rows=rows,
        correlation=matrix,
        second_order_standard_uncertainty=second,
    )
