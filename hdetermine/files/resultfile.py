"""result.json and the two tables beside it: the same numbers for machines.

The keys are fixed, described in ``result.schema.json``, and carry their units. Floats stand in
the shortest form that gives them back exactly; a number that does not exist (nan) or has no end
(infinite degrees of freedom) is null. The same determination gives the same bytes.
"""

from __future__ import annotations

import json
import math
from collections.abc import Mapping, Sequence
from importlib import resources
from pathlib import Path
from typing import Any

import numpy as np

from hdetermine.errors import InputError
from hdetermine.files.cells import csv_bytes
from hdetermine.files.limits import MAX_RESULT_BYTES
from hdetermine.files.modelrecord import model_document, model_from
from hdetermine.records.results import (
    AngleScale,
    Budget,
    Cutoff,
    Determination,
    MeasurementModel,
    Relation,
    Route,
)

SCHEMA = "hdetermine-result/1"
ROUTES = ("linear", "monte_carlo", "posterior")


def result_document(determination: Determination) -> dict[str, Any]:
    """Everything that result.json says, as plain lists, dicts, numbers and text."""
    h = determination.h
    comparison = determination.comparison
    backwards = determination.read_backwards
    provenance = determination.provenance
    relation = determination.relation
    routes: dict[str, Any] = {name: _route(determination.routes.get(name)) for name in ROUTES}
    if routes["linear"] is not None:
        routes["linear"]["diagnostics"] |= {
            "slope_through_origin_pm_kV": relation.slope_pm_kV,
            "slope_through_origin_u_pm_kV": relation.slope_u_pm_kV,
            "model": model_document(determination.model),
        }
    document = {
        "schema": SCHEMA,
        "h": {
            "value_J_s": h.value_J_s,
            "standard_uncertainty_J_s": h.standard_uncertainty_J_s,
            "relative_standard_uncertainty": h.relative_standard_uncertainty,
            "coverage_probability": h.coverage_probability,
            "coverage_factor": h.coverage_factor,
            "expanded_uncertainty_J_s": h.expanded_uncertainty_J_s,
            "effective_degrees_of_freedom": h.effective_degrees_of_freedom,
            "route": h.route,
        },
        "comparison": {
            "reference_J_s": comparison.reference_J_s,
            "relative_deviation": comparison.relative_deviation,
            "E_n": comparison.E_n,
            "verdict": comparison.verdict,
        },
        "routes": routes,
        "cutoffs": [_cutoff(cutoff, relation) for cutoff in determination.cutoffs],
        "covariance_pm2": relation.covariance_pm2,
        "angle_scale": _angle_scale(determination.angle_scale),
        "relation": _relation(relation),
        "budget": _budget(determination.budget),
        "read_backwards": {
            "implied_voltage_gain": backwards.voltage_gain,
            "implied_voltage_gain_u": backwards.voltage_gain_u,
            "implied_spacing_pm": backwards.spacing_pm,
            "implied_spacing_u_pm": backwards.spacing_u_pm,
        },
        "checks": [
            {
                "name": check.name,
                "passed": check.passed,
                "figure": check.figure,
                "limit": check.limit,
                "meaning": check.meaning,
            }
            for check in determination.checks
        ],
        "provenance": {
            "package_version": provenance.package_version,
            "versions": _sorted(provenance.versions),
            "input_files": [
                {"name": file.name, "sha256": file.sha256} for file in determination.run.files
            ],
            "seed": provenance.seed,
            "settings": _sorted(provenance.settings),
        },
    }
    plain = _plain(document)
    assert isinstance(plain, dict)
    return plain


def result_json(determination: Determination) -> bytes:
    """The document as the bytes of result.json (ASCII, one line feed at the end)."""
    text = json.dumps(result_document(determination), indent=1, allow_nan=False)
    return text.encode("ascii") + b"\n"


def schema_text() -> str:
    """The JSON Schema of result.json (draft 2020-12)."""
    return resources.files("hdetermine").joinpath("result.schema.json").read_text("utf-8")


CUTOFF_COLUMNS = (
    "scan",
    "tube_voltage_kV",
    "used",
    "reason",
    "reading_deg",
    "glancing_angle_deg",
    "wavelength_pm",
    "standard_uncertainty_pm",
    "counting_u_deg",
    "window_u_deg",
    "window_from_deg",
    "window_to_deg",
    "deviance",
    "degrees_of_freedom",
    "shape",
)


def cutoffs_csv(determination: Determination) -> bytes:
    """One row a scan, refused ones with their reason."""
    rows = []
    for cutoff in determination.cutoffs:
        window = _window(cutoff) or (math.nan, math.nan)
        rows.append(
            (
                cutoff.scan,
                cutoff.tube_voltage_kV,
                cutoff.used,
                cutoff.reason,
                cutoff.reading_deg,
                cutoff.glancing_angle_deg,
                cutoff.wavelength_pm,
                cutoff.standard_uncertainty_pm,
                cutoff.counting_u_deg,
                cutoff.window_u_deg,
                *window,
                cutoff.deviance,
                cutoff.degrees_of_freedom if cutoff.used else None,
                cutoff.shape,
            )
        )
    return csv_bytes(CUTOFF_COLUMNS, rows)


def budget_csv(determination: Determination) -> bytes:
    """One row an input of the budget, columns as the keys of result.json."""
    rows = _budget(determination.budget)
    return csv_bytes(list(rows[0]), [list(row.values()) for row in rows])


def load_model(path: str | Path) -> MeasurementModel:
    """Read the measurement model out of a result.json.

    Parameters
    ----------
    path : path
        The file.

    Raises
    ------
    InputError
        If it cannot be read, is not a result of this version, or lacks a part.
    """
    file = Path(path)
    try:
        with file.open("rb") as stream:
            content = stream.read(MAX_RESULT_BYTES + 1)
    except OSError as error:
        raise InputError(f"{file} cannot be read ({error.strerror}): check its name.") from error
    if len(content) > MAX_RESULT_BYTES:
        raise InputError(
            f"{file} is larger than {MAX_RESULT_BYTES} bytes: it is no result.json of hdetermine."
        )
    try:
        document = json.loads(content)
    except (ValueError, RecursionError) as error:
        raise InputError(
            f"{file} is not JSON: give the result.json of an analysis, or the run's folder."
        ) from error
    if not isinstance(document, dict) or document.get("schema") != SCHEMA:
        raise InputError(
            f'{file} does not say "schema": "{SCHEMA}": give a result.json that this version of '
            "hdetermine has written."
        )
    found: object = document
    for key in ("routes", "linear", "diagnostics", "model"):
        found = found.get(key) if isinstance(found, dict) else None
    return model_from(found, str(file))


def _route(route: Route | None) -> dict[str, Any] | None:
    if route is None:
        return None
    # A route that its own diagnostics forbid is said to be so and gives no numbers away.
    low, high = route.interval_95_J_s
    return {
        "value_J_s": route.value_J_s if route.usable else None,
        "standard_uncertainty_J_s": route.standard_uncertainty_J_s if route.usable else None,
        "interval_95_J_s": [low, high] if route.usable else [None, None],
        "diagnostics": {
            **_sorted(route.diagnostics),
            "usable": route.usable,
            "reason": route.reason,
        },
    }


def _window(cutoff: Cutoff) -> tuple[float, float] | None:
    if not cutoff.windows:
        return None
    return cutoff.windows[0].from_deg, cutoff.windows[0].to_deg


def _cutoff(cutoff: Cutoff, relation: Relation) -> dict[str, Any]:
    fit = None
    if cutoff.used:
        correlation: list[float] | None = None
        if cutoff.scan in relation.scans:
            row = relation.scans.index(cutoff.scan)
            u = np.sqrt(np.diag(relation.covariance_pm2))
            correlation = (relation.covariance_pm2[row] / (u[row] * u)).tolist()
        fit = {
            "window_deg": _window(cutoff),
            "deviance": cutoff.deviance,
            "degrees_of_freedom": cutoff.degrees_of_freedom,
            "shape": cutoff.shape,
            "correlation": correlation,
        }
    return {
        "scan": cutoff.scan,
        "tube_voltage_kV": cutoff.tube_voltage_kV,
        "glancing_angle_deg": cutoff.glancing_angle_deg,
        "wavelength_pm": cutoff.wavelength_pm,
        "standard_uncertainty_pm": cutoff.standard_uncertainty_pm,
        "used": cutoff.used,
        "reason": cutoff.reason,
        "fit": fit,
    }


def _angle_scale(scale: AngleScale) -> dict[str, Any]:
    return {
        "zero_deg": scale.zero.value,
        "zero_u_deg": scale.zero.standard_uncertainty,
        "resolution_fwhm_deg": scale.resolution.value,
        "lines": [
            {
                "scan": line.scan,
                "label": line.label,
                "order": line.order,
                "wavelength_pm": line.wavelength_pm,
                "wavelength_u_pm": line.wavelength_u_pm,
                "reading_deg": line.reading_deg,
                "reading_u_deg": line.reading_u_deg,
                "expected_deg": line.expected_deg,
                "used": line.used,
                "reason": line.reason,
            }
            for line in scale.lines
        ],
    }


def _relation(relation: Relation) -> dict[str, Any]:
    slope, intercept = relation.free_slope_pm_kV, relation.intercept_pm
    covariance: object = relation.free_covariance
    if math.isnan(slope):  # too few voltages for an intercept: the line through the origin
        slope = relation.slope_pm_kV
        covariance = [[relation.slope_u_pm_kV**2, None], [None, None]]
    return {
        "slope": slope,
        "intercept": intercept,
        "covariance": covariance,
        "exponent": relation.exponent,
        "exponent_u": relation.exponent_u,
        "chi2": relation.chi2,
        "degrees_of_freedom": relation.degrees_of_freedom,
        "birge_ratio": relation.birge_ratio,
    }


def _budget(budget: Budget) -> list[dict[str, Any]]:
    return [
        {
            "quantity": row.quantity,
            "symbol": row.symbol,
            "estimate": row.estimate,
            "unit": row.unit,
            "standard_uncertainty": row.standard_uncertainty,
            "evaluation": row.evaluation,
            "distribution": row.distribution,
            "degrees_of_freedom": row.degrees_of_freedom,
            "sensitivity": row.sensitivity,
            "contribution_J_s": row.contribution,
            "variance_share": row.variance_share,
        }
        for row in budget.rows
    ]


def _sorted(mapping: Mapping[str, object]) -> dict[str, object]:
    """The same mapping in the order of its keys, all the way down."""
    return {
        key: _sorted(value) if isinstance(value, Mapping) else value
        for key, value in sorted(mapping.items())
    }


def _plain(value: object) -> object:
    """Plain JSON values: arrays become lists, numbers without a value null."""
    if isinstance(value, Mapping):
        return {str(key): _plain(item) for key, item in value.items()}
    if isinstance(value, np.ndarray):
        return _plain(value.tolist())
    if isinstance(value, Sequence) and not isinstance(value, str):
        return [_plain(item) for item in value]
    if isinstance(value, np.generic):
        return _plain(value.item())
    if isinstance(value, float):
        # Adding zero makes a negative zero positive: its sign is chance.
        return value + 0.0 if math.isfinite(value) else None
    if value is None or isinstance(value, str | bool | int):
        return value
    raise TypeError(f"{type(value).__name__} has no place in a result file")
