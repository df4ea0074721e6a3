"""The measurement model inside a result file: written, and read back number for number.

With it the budget can be worked out again, with other uncertainties, without the scans.
"""

from __future__ import annotations

import math
from typing import Annotated, Any

import numpy as np
from pydantic import AfterValidator, BaseModel, ConfigDict, Field, ValidationError

from hdetermine.errors import InputError
from hdetermine.files.plaintext import plain_text, quoted
from hdetermine.inference import measurement
from hdetermine.records.quantity import Distribution, Evaluation, Quantity
from hdetermine.records.results import MeasurementModel

# Far beyond every number of a model, and its square far from overflowing.
_LARGEST = 1e12
Finite = Annotated[float, Field(ge=-_LARGEST, le=_LARGEST, allow_inf_nan=False)]
Spread = Annotated[float, Field(ge=0, le=_LARGEST, allow_inf_nan=False)]
Freedom = Annotated[float, Field(ge=0, allow_inf_nan=False)]
# Result files come from others too: their names are shown on a terminal.
Plain = Annotated[str, AfterValidator(plain_text)]


class _Strict(BaseModel):
    model_config = ConfigDict(extra="forbid", strict=True)


class _Input(_Strict):
    name: Plain
    symbol: Plain
    value: Finite
    standard_uncertainty: Spread
    unit: Plain
    distribution: Distribution
    evaluation: Evaluation
    degrees_of_freedom: Freedom | None
    common: bool
    source: Plain
    note: Plain
    is_default: bool


class _Scan(_Strict):
    name: Plain
    displayed_kV: Finite
    reading_deg: Finite
    weight: Finite
    lower_u_deg: Spread | None
    upper_u_deg: Spread | None
    responses_deg: dict[Plain, Finite]


class _Correlation(_Strict):
    between: Annotated[list[Plain], Field(min_length=2, max_length=2)]
    coefficient: Annotated[float, Field(ge=-1, le=1)]


class _Document(_Strict):
    reference_temperature_C: Finite
    inputs: list[_Input]
    correlations: list[_Correlation]
    scans: list[_Scan]


def model_document(model: MeasurementModel) -> dict[str, Any]:
    """Write a model as numbers and names; zero responses and correlations are left out."""
    names = [quantity.name for quantity in model.inputs]
    pairs = np.argwhere(np.triu(model.correlation, 1) != 0.0)
    return {
        "reference_temperature_C": model.reference_temperature_C,
        "inputs": [
            {field: getattr(quantity, field) for field in _Input.model_fields}
            for quantity in model.inputs
        ],
        "correlations": [
            {"between": [names[i], names[j]], "coefficient": model.correlation[i, j]}
            for i, j in pairs
        ],
        "scans": [
            {
                "name": scan,
                "displayed_kV": model.displayed_kV[i],
                "reading_deg": model.reading_deg[i],
                "weight": model.weights[i],
                "lower_u_deg": model.skew[i, 0],
                "upper_u_deg": model.skew[i, 1],
                "responses_deg": {
                    name: response
                    for name, response in zip(names, model.responses_deg[i], strict=True)
                    if response != 0.0
                },
            }
            for i, scan in enumerate(model.scans)
        ],
    }


def model_from(document: object, where: str) -> MeasurementModel:
    """Read a model back.

    Parameters
    ----------
    document : object
        What a result file holds in the place of the model.
    where : str
        The file, as messages name it.

    Raises
    ------
    InputError
        If a part is missing, of another kind, or names what is not there.
    """
    try:
        read = _Document.model_validate(document)
    except ValidationError as error:
        first = error.errors(include_url=False)[0]
        place = ".".join(str(part) for part in first["loc"]) or "the model"
        raise InputError(
            f"{where}: {quoted(place)} is not as hdetermine writes it "
            f"({first['msg'].lower()}); analyse the run again to get a sound result file."
        ) from error
    inputs = tuple(_quantity(one) for one in read.inputs)
    index = {quantity.name: i for i, quantity in enumerate(inputs)}
    scans = tuple(scan.name for scan in read.scans)
    named = [name for scan in read.scans for name in scan.responses_deg]
    named += [name for pair in read.correlations for name in pair.between]
    named += measurement.required_inputs(scans)
    missing = [name for name in named if name not in index]
    if missing or not scans or len(index) < len(inputs) or len(set(scans)) < len(scans):
        what = f"has no input {quoted(missing[0])}" if missing else "repeats or lacks a name"
        raise InputError(
            f"{where}: its model {what}; analyse the run again to get a sound result file."
        )
    correlation = np.eye(len(inputs))
    for pair in read.correlations:
        i, j = (index[name] for name in pair.between)
        correlation[i, j] = correlation[j, i] = pair.coefficient
    responses = np.zeros((len(scans), len(inputs)))
    for i, scan in enumerate(read.scans):
        for name, response in scan.responses_deg.items():
            responses[i, index[name]] = response
    return MeasurementModel(
        scans=scans,
        displayed_kV=np.array([scan.displayed_kV for scan in read.scans]),
        reading_deg=np.array([scan.reading_deg for scan in read.scans]),
        inputs=inputs,
        correlation=correlation,
        responses_deg=responses,
        weights=np.array([scan.weight for scan in read.scans]),
        skew=np.array(
            [[_or(scan.lower_u_deg, math.nan), _or(scan.upper_u_deg, math.nan)]
             for scan in read.scans]
        ),
        reference_temperature_C=read.reference_temperature_C,
    )  # fmt: skip


def _quantity(read: _Input) -> Quantity:
    values = read.model_dump()
    return Quantity(**{**values, "degrees_of_freedom": _or(read.degrees_of_freedom, math.inf)})


def _or(value: float | None, otherwise: float) -> float:
    return otherwise if value is None else value
