"""What one analysis found: judgement, provenance, and everything together.

The records of the single stages are gathered here, so that `hdetermine.records.results` names
them all.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hdetermine.records.anglescale import AngleScale, LineMeasure
from hdetermine.records.cutoff import Cutoff, FittedCurve, WindowFit
from hdetermine.records.relation import Influence, MeasurementModel, Relation
from hdetermine.records.run import Run
from hdetermine.records.uncertainty import Budget, BudgetRow, Improvement, Route, RouteName

FloatArray = NDArray[np.float64]

__all__ = [
    "AngleScale",
    "Budget",
    "BudgetRow",
    "Check",
    "Comparison",
    "Cutoff",
    "Determination",
    "FittedCurve",
    "FloatArray",
    "Improvement",
    "Influence",
    "LineMeasure",
    "MeasurementModel",
    "PlanckValue",
    "Provenance",
    "ReadBackwards",
    "Relation",
    "Route",
    "RouteName",
    "WindowFit",
]


@dataclass(frozen=True, slots=True)
class PlanckValue:
    """The reported value of h.

    Attributes
    ----------
    value_J_s, standard_uncertainty_J_s : float
        Estimate and standard uncertainty, J s.
    coverage_probability, coverage_factor, expanded_uncertainty_J_s : float
        p, k and U = k u.
    effective_degrees_of_freedom : float
        Infinite if no Type A input of finite freedom matters.
    route : {"linear", "monte_carlo", "posterior"}
        Where the figures come from.
    route_reason : str
        One sentence: why that route.
    """

    value_J_s: float
    standard_uncertainty_J_s: float
    coverage_probability: float
    coverage_factor: float
    expanded_uncertainty_J_s: float
    effective_degrees_of_freedom: float
    route: RouteName
    route_reason: str

    @property
    def relative_standard_uncertainty(self) -> float:
        """u(h)/h."""
        return self.standard_uncertainty_J_s / self.value_J_s


@dataclass(frozen=True, slots=True)
class Comparison:
    """The result against the exact SI value."""

    reference_J_s: float
    relative_deviation: float
    E_n: float
    verdict: str


@dataclass(frozen=True, slots=True)
class ReadBackwards:
    """With h exact, what the same run says about the supply and the crystal."""

    voltage_gain: float
    voltage_gain_u: float
    spacing_pm: float
    spacing_u_pm: float


@dataclass(frozen=True, slots=True)
class Check:
    """A consistency check: its figure, its limit and what it means.

    `passed` is None where the data do not allow the check; `measure` says what the figure is.
    """

    name: str
    passed: bool | None
    figure: float | None
    limit: float | None
    meaning: str
    measure: str = ""


@dataclass(frozen=True, slots=True)
class Provenance:
    """Versions, seed and settings that made the result."""

    package_version: str
    versions: Mapping[str, str]
    seed: int
    settings: Mapping[str, object]


@dataclass(frozen=True, slots=True, eq=False)
class Determination:
    """Everything that one analysis of one run found.

    Attributes
    ----------
    run : Run
        What was analysed.
    h : PlanckValue
        The reported value.
    comparison, read_backwards
        Judgement against the SI value.
    routes : mapping of route name to Route
        All routes that were taken.
    angle_scale, cutoffs, relation, model
        The stages, in their order. `cutoffs` has one entry a scan, refused ones included.
    budget : Budget
        Of h, in J s.
    improvements : tuple of Improvement
        Sorted, best first.
    counting_floor_J_s : float
        Expanded uncertainty with perfect counting statistics.
    checks : tuple of Check
        Consistency checks.
    provenance : Provenance
        Versions, seed, settings.
    posterior_samples : ndarray, shape (n, dim) or None
        Thinned chain for the picture; column 0 is h in J s.
    posterior_names : tuple of str
        Names of the columns.
    """

    run: Run
    h: PlanckValue
    comparison: Comparison
    read_backwards: ReadBackwards
    routes: Mapping[str, Route]
    angle_scale: AngleScale
    cutoffs: tuple[Cutoff, ...]
    relation: Relation
    model: MeasurementModel
    budget: Budget
    improvements: tuple[Improvement, ...]
    counting_floor_J_s: float
    checks: tuple[Check, ...]
    provenance: Provenance
    posterior_samples: FloatArray | None = None
    posterior_names: tuple[str, ...] = ()

    @property
    def used(self) -> tuple[Cutoff, ...]:
        """The cutoffs that took part."""
        return tuple(cutoff for cutoff in self.cutoffs if cutoff.used)

    @property
    def refused(self) -> tuple[Cutoff, ...]:
        """The scans that did not take part, each with its reason."""
        return tuple(cutoff for cutoff in self.cutoffs if not cutoff.used)
