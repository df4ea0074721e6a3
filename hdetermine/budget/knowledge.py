"""Inputs known better or worse than they are: what that does to those correlated with them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from hdetermine.inference.weights import input_covariance, with_gls_weights
from hdetermine.records.results import MeasurementModel

# A square and its root need not give the number back; an input that nobody touched must.
_TOUCHED = 1e-12


def with_uncertainties(model: MeasurementModel, wanted: Mapping[str, float]) -> MeasurementModel:
    """Return the model with other standard uncertainties and the weights that follow.

    An input without correlations just gets its new standard uncertainty. For a correlated one
    to be known better means to have learnt something about it from elsewhere, and then those
    correlated with it are known better too: the covariance matrix V becomes
    V - (1 - u'^2/u^2) v v^T/u^2, v its column (the conditional covariance for u' = 0). To leave
    the correlations as they are would instead destroy what two inputs cancel of each other.
    Several inputs are taken in their order; one that earlier ones have already brought below
    its wanted value stays there.

    Parameters
    ----------
    model : MeasurementModel
    wanted : mapping of input name to standard uncertainty
        In the units of the inputs.

    Returns
    -------
    MeasurementModel
        With new standard uncertainties, correlations and weights.
    """
    covariance = input_covariance(model)
    original = np.diag(covariance).copy()
    for i, quantity in enumerate(model.inputs):
        target = wanted.get(quantity.name)
        if target is None:
            continue
        variance = covariance[i, i]
        alone = np.count_nonzero(covariance[:, i]) <= 1
        if original[i] == 0.0 or (alone and variance > 0.0):
            covariance[i, i] = target**2
        elif target**2 > original[i] or variance > target**2:
            column = covariance[:, i].copy()
            covariance -= (1.0 - target**2 / variance) / variance * np.outer(column, column)
            # The same without the rounding of a difference.
            covariance[i, :] = covariance[:, i] = column * (target**2 / variance)
    u = np.sqrt(np.clip(np.diag(covariance), 0.0, None))
    scale = np.where(u > 0.0, u, 1.0)
    correlation = np.clip(covariance / np.outer(scale, scale), -1.0, 1.0)
    np.fill_diagonal(correlation, 1.0)
    inputs = tuple(
        quantity.with_uncertainty(float(new)) if abs(new - old) > _TOUCHED * old else quantity
        for quantity, new, old in zip(model.inputs, u, np.sqrt(original), strict=True)
    )
    return with_gls_weights(replace(model, inputs=inputs, correlation=correlation))
