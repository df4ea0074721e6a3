"""Propagation of distributions by Monte Carlo, and the validation of the linear route.

JCGM 101:2008, clauses 7 and 8. The procedure is adaptive (7.9): blocks of draws are added until
estimate, standard uncertainty and both ends of the coverage interval are stable to the wanted
number of significant digits of the standard uncertainty.
"""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hdetermine.budget.correlation import checked_correlation
from hdetermine.budget.derivatives import MeasurementFunction
from hdetermine.budget.distributions import checked_quantity, draw
from hdetermine.budget.intervals import numerical_tolerance, shortest_interval, symmetric_interval
from hdetermine.errors import InputError
from hdetermine.inference.spread import check_support, draw_inputs, planck_draws
from hdetermine.records.quantity import Quantity
from hdetermine.records.results import Budget, MeasurementModel, Route

FloatArray = NDArray[np.float64]
Sampler = Callable[[np.random.Generator, int], FloatArray]

BLOCK = 10_000
# Two blocks can agree by chance; the standard asks for no more than two.
MINIMUM_BLOCKS = 10
MAXIMUM_DRAWS = 2_000_000
# JCGM 101:2008, 8.2: the judge should be five times finer than the tolerance it judges by. For
# h that can take more draws than anybody waits for; the spreads reached are reported.
VALIDATING_SHARE = 0.2
VALIDATING_DRAWS = 300_000


@dataclass(frozen=True, slots=True, eq=False)
class MonteCarloResult:
    """Distribution of an output.

    Attributes
    ----------
    draws, blocks : int
        How many.
    stable : bool
        False if the cap was reached before the spreads were below the tolerance.
    value, standard_uncertainty : float
        Mean and standard deviation.
    symmetric, shortest : (float, float)
        Probabilistically symmetric and shortest coverage interval.
    coverage_probability : float
        Of both intervals.
    digits : int
        Significant digits of the standard uncertainty that had to be stable.
    tolerance : float
        Numerical tolerance delta that belongs to them.
    spreads : (float, float, float, float)
        Twice the standard deviations of the averages over the blocks: of value, standard
        uncertainty, lower and upper end of the symmetric interval.
    sorted_values : ndarray, shape (draws,)
        The discrete representation of the distribution function.
    """

    draws: int
    blocks: int
    stable: bool
    value: float
    standard_uncertainty: float
    symmetric: tuple[float, float]
    shortest: tuple[float, float]
    coverage_probability: float
    digits: int
    tolerance: float
    spreads: tuple[float, float, float, float]
    sorted_values: FloatArray


@dataclass(frozen=True, slots=True)
class Validation:
    """Does the linear route give the same coverage interval?

    `low_difference` and `high_difference` are the absolute differences of the ends; the
    validation is passed if neither exceeds `tolerance` (JCGM 101:2008, 8.1).
    """

    passed: bool
    tolerance: float
    low_difference: float
    high_difference: float
    digits: int
    linear_interval: tuple[float, float]
    monte_carlo_interval: tuple[float, float]


def propagate(
    model: MeasurementFunction,
    inputs: Sequence[Quantity],
    correlation: FloatArray | None = None,
    rng: np.random.Generator | None = None,
    *,
    coverage_probability: float = 0.95,
    digits: int = 2,
    tolerance_share: float = 1.0,
    refining_draws: int = MAXIMUM_DRAWS,
    maximum_draws: int = MAXIMUM_DRAWS,
    sampler: Sampler | None = None,
) -> MonteCarloResult:
    """Propagate the inputs' own distributions through a measurement function.

    Parameters
    ----------
    model : callable
        Takes an array of shape (m, draws) and returns one of shape (draws,); write it with
        NumPy's functions.
    inputs : sequence of Quantity
        m inputs.
    correlation : ndarray, shape (m, m), or None
        Between the inputs, by a Gaussian copula; see `budget.distributions.draw`.
    rng : numpy.random.Generator
        Source of all randomness; required.
    coverage_probability : float
        Of the coverage intervals.
    digits : int
        Significant digits of the standard uncertainty that must be stable.
    tolerance_share : float
        Go on until the spreads are below this share of the numerical tolerance: 1 to report
        the figures, 1/5 to validate another route by them (JCGM 101:2008, 8.2).
    refining_draws : int
        From here on a share below one is no longer insisted upon.
    maximum_draws : int
        Where to stop all the same.
    sampler : callable or None
        Replaces the draws from `inputs`: takes the generator and a number of draws.

    Returns
    -------
    MonteCarloResult

    Raises
    ------
    InputError
        If an input is not valid, or the function undefined for some of the draws.
    """
    if rng is None:
        raise ValueError("the draws need a generator")
    names = [checked_quantity(quantity).name for quantity in inputs]
    matrix = checked_correlation(correlation, len(names), names)
    if sampler is None:

        def sampler(generator: np.random.Generator, count: int) -> FloatArray:
            return draw(inputs, matrix, generator, count)

    # At least enough draws in a block for its own interval (JCGM 101:2008, 7.9.4 b).
    block = max(BLOCK, math.ceil(100.0 / (1.0 - coverage_probability)))
    most = max(MINIMUM_BLOCKS, maximum_draws // block)
    values: list[FloatArray] = []
    figures: list[tuple[float, float, float, float]] = []
    settled = False
    spread = np.zeros(4)
    while not settled and len(values) < most:
        values.append(_block(model, sampler(rng, block)))
        ordered = np.sort(values[-1])
        ends = symmetric_interval(ordered, coverage_probability)
        figures.append((float(ordered.mean()), float(ordered.std(ddof=1)), *ends))
        if len(values) >= MINIMUM_BLOCKS:
            averages = np.array(figures)
            spread = 2.0 * averages.std(axis=0, ddof=1) / math.sqrt(len(values))
            # Within-block variances and the scatter of the means give the pooled u.
            pooled = math.hypot(
                math.sqrt(float(np.mean(averages[:, 1] ** 2))), float(averages[:, 0].std())
            )
            share = tolerance_share if len(values) * block < refining_draws else 1.0
            wanted = share * numerical_tolerance(pooled, digits)
            settled = bool(np.all(spread <= wanted))
    everything = np.sort(np.concatenate(values))
    u = float(everything.std(ddof=1))
    tolerance = numerical_tolerance(u, digits)
    of_value, of_u, of_low, of_high = spread.tolist()
    return MonteCarloResult(
        draws=len(everything),
        blocks=len(values),
        stable=settled or bool(np.all(spread <= tolerance)),
        value=float(everything.mean()),
        standard_uncertainty=u,
        symmetric=symmetric_interval(everything, coverage_probability),
        shortest=shortest_interval(everything, coverage_probability),
        coverage_probability=coverage_probability,
        digits=digits,
        tolerance=tolerance,
        spreads=(of_value, of_u, of_low, of_high),
        sorted_values=everything,
    )


def _block(model: MeasurementFunction, draws: FloatArray) -> FloatArray:
    with np.errstate(all="ignore"):
        result = np.broadcast_to(np.asarray(model(draws), dtype=float), draws.shape[1:])
    undefined = int(np.count_nonzero(~np.isfinite(result)))
    if undefined:
        raise InputError(
            f"The measurement function is not defined for {undefined} of {result.size} draws of "
            "its inputs; narrow the distributions that reach there."
        )
    return result


def validate(
    linear: Budget, result: MonteCarloResult, *, digits: int = 2, shortest: bool = False
) -> Validation:
    """Compare the linear coverage interval with that of the Monte Carlo route.

    Parameters
    ----------
    linear : Budget
        Its interval is value plus and minus expanded uncertainty.
    result : MonteCarloResult
        Of the same function and coverage probability.
    digits : int
        Significant digits of the standard uncertainty regarded as meaningful.
    shortest : bool
        Compare with the shortest instead of the symmetric interval.

    Returns
    -------
    Validation
    """
    low = linear.value - linear.expanded_uncertainty
    high = linear.value + linear.expanded_uncertainty
    interval = result.shortest if shortest else result.symmetric
    tolerance = numerical_tolerance(result.standard_uncertainty, digits)
    low_difference, high_difference = abs(low - interval[0]), abs(high - interval[1])
    return Validation(
        passed=max(low_difference, high_difference) <= tolerance,
        tolerance=tolerance,
        low_difference=low_difference,
        high_difference=high_difference,
        digits=digits,
        linear_interval=(low, high),
        monte_carlo_interval=interval,
    )


def monte_carlo_planck(
    model: MeasurementModel, rng: np.random.Generator, **settings: Any
) -> MonteCarloResult:
    """Propagate the inputs of h; `settings` go to `montecarlo.propagate`."""
    check_support(model)
    return propagate(
        lambda values: planck_draws(model, values),
        model.inputs,
        model.correlation,
        rng,
        sampler=lambda generator, count: draw_inputs(model, generator, count),
        **settings,
    )


def monte_carlo_route(
    model: MeasurementModel, linear: Budget, rng: np.random.Generator, *, digits: int = 2
) -> Route:
    """Take the Monte Carlo route to h and judge the linear one by it.

    Parameters
    ----------
    model : MeasurementModel
        With its weights.
    linear : Budget
        Of the same model.
    rng : numpy.random.Generator
        Source of all randomness.
    digits : int
        Significant digits of the standard uncertainty, for stability and validation.

    Returns
    -------
    Route
        Not usable if the figures were not stable at the cap. The diagnostics hold the
        validation of the linear route under ``validation``.
    """
    result = monte_carlo_planck(
        model,
        rng,
        digits=digits,
        coverage_probability=linear.coverage_probability,
        tolerance_share=VALIDATING_SHARE,
        refining_draws=VALIDATING_DRAWS,
    )
    interval = result.symmetric
    if linear.coverage_probability != 0.95:
        interval = (
            float(np.quantile(result.sorted_values, 0.025)),
            float(np.quantile(result.sorted_values, 0.975)),
        )
    reason = (
        ""
        if result.stable
        else (f"After {result.draws} draws the figures are not yet stable to {digits} digits.")
    )
    names = ("value", "standard_uncertainty", "lower_end", "upper_end")
    return Route(
        name="monte_carlo",
        value_J_s=result.value,
        standard_uncertainty_J_s=result.standard_uncertainty,
        interval_95_J_s=interval,
        usable=result.stable,
        reason=reason,
        diagnostics={
            "draws": result.draws,
            "blocks": result.blocks,
            "stable": result.stable,
            "stable_digits": digits,
            "tolerance_J_s": result.tolerance,
            "spreads_J_s": dict(zip(names, result.spreads, strict=True)),
            "coverage_probability": result.coverage_probability,
            "symmetric_interval_J_s": list(result.symmetric),
            "shortest_interval_J_s": list(result.shortest),
            "validation": dataclasses.asdict(validate(linear, result, digits=digits)),
        },
    )
