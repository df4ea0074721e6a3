"""Uncertainty: the three routes, the budget, what would improve it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from hdetermine.records.quantity import Distribution, Evaluation

FloatArray = NDArray[np.float64]
RouteName = Literal["linear", "monte_carlo", "posterior"]


@dataclass(frozen=True, slots=True)
class Route:
    """h and its uncertainty by one of the three routes.

    Attributes
    ----------
    name : {"linear", "monte_carlo", "posterior"}
        Which one.
    value_J_s, standard_uncertainty_J_s : float
        Estimate and standard uncertainty.
    interval_95_J_s : (float, float)
        Probabilistically symmetric 95 % interval.
    usable : bool
        False if the route's own diagnostics forbid its use (then `reason` says why).
    reason : str
        Why it is not usable.
    diagnostics : mapping
        JSON-able figures of the route.
    """

    name: RouteName
    value_J_s: float
    standard_uncertainty_J_s: float
    interval_95_J_s: tuple[float, float]
    usable: bool = True
    reason: str = ""
    diagnostics: Mapping[str, object] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class BudgetRow:
    """One input of the budget.

    `sensitivity` is dy/dx with its sign; `contribution` is sensitivity times standard
    uncertainty, signed; `variance_share` is c_i u_i sum_j r_ij c_j u_j / u_c^2, so that the
    shares sum to one with correlations too (and may be negative).
    """

    quantity: str
    symbol: str
    estimate: float
    unit: str
    standard_uncertainty: float
    evaluation: Evaluation
    distribution: Distribution
    degrees_of_freedom: float
    sensitivity: float
    contribution: float
    variance_share: float
    common: bool = True
    correlated_with: tuple[str, ...] = ()
    source: str = ""
    is_default: bool = False
    group: str = ""


@dataclass(frozen=True, slots=True, eq=False)
class Budget:
    """An uncertainty budget of any measurement function of named inputs.

    Attributes
    ----------
    measurand, unit : str
        What the result is.
    value : float
        Result at the inputs' estimates.
    combined_standard_uncertainty : float
        Quadrature sum with correlations (JCGM 100:2008, eq. 16).
    effective_degrees_of_freedom : float
        Welch-Satterthwaite (JCGM 100:2008, eq. G.2b).
    coverage_probability, coverage_factor, expanded_uncertainty : float
        Student's t for the effective degrees of freedom.
    rows : tuple of BudgetRow
        One an input.
    correlation : ndarray, shape (m, m)
        Between the rows.
    second_order_standard_uncertainty : float or None
        With the next terms of the Taylor series (JCGM 100:2008, 5.1.2 note), if computed.
    """

    measurand: str
    unit: str
    value: float
    combined_standard_uncertainty: float
    effective_degrees_of_freedom: float
    coverage_probability: float
    coverage_factor: float
    expanded_uncertainty: float
    rows: tuple[BudgetRow, ...]
    correlation: FloatArray
    second_order_standard_uncertainty: float | None = None


@dataclass(frozen=True, slots=True)
class Improvement:
    """Expanded uncertainty that would remain if an input were better known."""

    quantity: str
    symbol: str
    expanded_if_halved: float
    expanded_if_zero: float
