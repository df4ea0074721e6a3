"""The budget of h: every input of the measurement equation as a row."""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from uncertainties import unumpy

from hdetermine.budget.coverage import coverage_factor, effective_degrees_of_freedom
from hdetermine.budget.propagation import linear_budget
from hdetermine.inference import measurement
from hdetermine.inference.weights import planck_gradient
from hdetermine.records.results import Budget, MeasurementModel

GROUPS: Mapping[str, str] = {
    measurement.GAIN: "voltage gain",
    measurement.OFFSET: "voltage offset",
    measurement.RIPPLE: "voltage ripple",
    measurement.WORK_FUNCTION: "cathode work function",
    measurement.SPACING: "spacing with temperature",
    measurement.TEMPERATURE: "spacing with temperature",
    measurement.EXPANSION: "spacing with temperature",
    measurement.REFRACTION: "refraction",
    measurement.ZERO: "angle zero after the lines",
    measurement.RESOLUTION: "resolution and its kernel",
    measurement.KERNEL: "resolution and its kernel",
    measurement.DEAD_TIME: "dead time",
    measurement.EXCESS: "continuum shape near the limit",
    measurement.EXCESS_ENERGY: "continuum shape near the limit",
    measurement.WAVELENGTH_SCALE: "reference wavelengths",
    "continuum.smooth_1": "smooth factor of the continuum",
    "continuum.smooth_2": "smooth factor of the continuum",
    "continuum.smooth_3": "smooth factor of the continuum",
}
SCAN_GROUPS: Mapping[str, str] = {
    "counting_deg": "counting statistics",
    "window_deg": "spread between fit windows",
    "background_deg": "background shape",
    "voltage_kV": "voltage repeatability",
    "scatter_deg": "scatter between scans",
}


def group_of(name: str) -> str:
    """Group of an input of h, in words; the name itself for an input of another kind."""
    if name.startswith("scan."):
        return SCAN_GROUPS.get(name.rpartition(".")[2], name)
    return GROUPS.get(name, name)


def planck_budget(
    model: MeasurementModel, coverage_probability: float = 0.95, *, second_order: bool = False
) -> Budget:
    """Linear budget of h with the model's weights.

    Parameters
    ----------
    model : MeasurementModel
        With n scans and m inputs.
    coverage_probability : float
        Of the expanded uncertainty.
    second_order : bool
        Add the next terms of the Taylor series (slow: of the order of m^2 evaluations).

    Returns
    -------
    Budget
        In J s, one row an input, grouped.
    """

    def planck(values: Any) -> Any:
        return measurement.planck_J_s(model, values, unumpy.sin)

    return linear_budget(
        planck,
        model.inputs,
        model.correlation,
        measurand="h",
        unit="J s",
        coverage_probability=coverage_probability,
        second_order=second_order,
        group_of=group_of,
    )


@dataclass(frozen=True, slots=True)
class LinearFigures:
    """The bottom line of a linear budget of h, without its rows."""

    value_J_s: float
    standard_uncertainty_J_s: float
    expanded_uncertainty_J_s: float


def linear_figures(model: MeasurementModel, coverage_probability: float = 0.95) -> LinearFigures:
    """Compute h, u and U as `planck_budget` does, from the closed derivatives: a hundred
    what-ifs in the time of one budget.
    """
    u = np.array([quantity.standard_uncertainty for quantity in model.inputs])
    freedoms = np.array([quantity.degrees_of_freedom for quantity in model.inputs])
    contributions = planck_gradient(model) * u
    combined = math.sqrt(max(float(contributions @ model.correlation @ contributions), 0.0))
    effective = effective_degrees_of_freedom(contributions, freedoms, model.correlation)
    return LinearFigures(
        float(measurement.planck_J_s(model, measurement.estimates(model))),
        combined,
        coverage_factor(coverage_probability, effective) * combined,
    )


_LEADING, _SEEN = 0.05, 0.005  # shares of the variance that limit a result, or are worth a word


def group_shares(budget: Budget) -> dict[str, float]:
    """Share of the variance of each group of rows, largest first."""
    shares: dict[str, float] = {}
    for row in budget.rows:
        key = row.group or row.quantity
        shares[key] = shares.get(key, 0.0) + row.variance_share
    return dict(sorted(shares.items(), key=lambda item: -item[1]))


def common_share(budget: Budget) -> float:
    """Share of the variance that does not shrink with more voltages."""
    return sum(row.variance_share for row in budget.rows if row.common)


def _percent(share: float) -> str:
    """Whole per cent, with the space that the SI brochure asks for."""
    return f"{100.0 * share:.0f}\N{NARROW NO-BREAK SPACE}%"


def _listed(parts: list[str]) -> str:
    return " and ".join(filter(None, (", ".join(parts[:-1]), parts[-1])))


def limiting_sentence(budget: Budget) -> str:
    """Say in one sentence what limits the result, and what more voltages could do."""
    shares = group_shares(budget)
    if not budget.combined_standard_uncertainty > 0.0:
        return "No input has an uncertainty, so nothing limits the result."
    largest = list(shares.items())[:3]
    leading = [f"{group} ({_percent(share)})" for group, share in largest if share > _LEADING]
    following = [
        f"{group} ({_percent(share)})" for group, share in largest if _SEEN < share <= _LEADING
    ]
    if leading:
        leading[0] = leading[0].replace(")", " of the variance)")
        limits = _listed(leading)
    else:
        limits = f"no single source by more than {_percent(_LEADING)} of the variance"
    if following:
        limits += f", followed by {_listed(following)}"
    return (
        f"{budget.measurand} is limited by {limits}; {_percent(common_share(budget))} of the "
        "variance is common to all voltages: more voltages would not average it out."
    )


def scan_family(name: str) -> str:
    """Name that inputs of one kind share; an input of no such kind keeps its own.

    ``scan.*.counting_deg`` for that input of every scan, ``continuum.smooth_*`` for the terms
    of one series.
    """
    if name.startswith("scan."):
        return f"scan.*.{name.rpartition('.')[2]}"
    return re.sub(r"_\d+\Z", "_*", name)
