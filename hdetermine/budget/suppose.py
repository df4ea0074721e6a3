"""What if an input were better known? New uncertainties without refitting the edges."""

from __future__ import annotations

import difflib
import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from hdetermine.budget.knowledge import with_uncertainties
from hdetermine.budget.planck import linear_figures, planck_budget, scan_family
from hdetermine.errors import InputError
from hdetermine.inference import measurement
from hdetermine.inference.spread import check_support
from hdetermine.records.quantity import HALF_WIDTH_DIVISOR, Quantity
from hdetermine.records.results import Budget, Improvement, MeasurementModel

FloatArray = NDArray[np.float64]

FIELDS = ("u", "half_width", "dof")
COUNTING_FAMILY = "scan.*.counting_deg"
# Its square is far from overflowing, and no uncertainty in the units of the budget is as large.
LARGEST = 1e12

# The run sheet states the repeatability once; the budget has one input a scan.
SHEET_NAMES = {"tube.voltage.repeatability_kV": "scan.*.voltage_kV"}


@dataclass(frozen=True, slots=True)
class Supposition:
    """One supposed figure: of which inputs, which figure, and its value."""

    name: str
    inputs: tuple[str, ...]
    field: str
    value: float


@dataclass(frozen=True, slots=True, eq=False)
class WhatIf:
    """The budget as it is and as it would be."""

    suppositions: tuple[Supposition, ...]
    before: Budget
    after: Budget
    model: MeasurementModel


def families(model: MeasurementModel) -> dict[str, tuple[str, ...]]:
    """Names that stand for several inputs of one kind, and what they stand for."""
    found: dict[str, tuple[str, ...]] = {}
    for quantity in model.inputs:
        family = scan_family(quantity.name)
        if family != quantity.name:
            found[family] = (*found.get(family, ()), quantity.name)
    return found


def parse_supposition(text: str, model: MeasurementModel) -> Supposition:
    """Read ``tube.voltage.gain.u=0.001``.

    Parameters
    ----------
    text : str
        Name of an input, a dot, one of ``u``, ``half_width``, ``dof``, an equals sign and a
        number in the unit of the input. ``scan.*.counting_deg`` and the like stand for that
        input of every scan, as does ``tube.voltage.repeatability_kV``.
    model : MeasurementModel
        With the inputs.

    Returns
    -------
    Supposition

    Raises
    ------
    InputError
        If it cannot be read, names no input (the nearest one is suggested), or its number is
        out of range.
    """
    target, equals, number = text.strip().rpartition("=")
    name, _, field = target.strip().rpartition(".")
    groups = families(model)
    known: dict[str, tuple[str, ...]] = {q.name: (q.name,) for q in model.inputs}
    known |= {sheet: groups[family] for sheet, family in SHEET_NAMES.items() if family in groups}
    known |= groups
    if not equals:
        raise InputError(f"--suppose {text!r} has no '='; write it like tube.voltage.gain.u=0.001.")
    if field not in FIELDS:
        if target.strip() in known:
            raise InputError(
                f"--suppose {text!r} does not say which figure of {target.strip()}; write "
                f"{target.strip()}.u=..., .half_width=... or .dof=..."
            )
        raise InputError(
            f"--suppose {text!r}: {field!r} is no figure of an input; use one of "
            f"{', '.join(FIELDS)}{_nearest(name or target, known)}."
        )
    if name not in known:
        raise InputError(f"--suppose {text!r}: there is no input {name!r}{_nearest(name, known)}.")
    try:
        value = float(number) if number.isascii() else math.nan
    except ValueError:
        value = math.nan
    allowed = value >= 0.0 if field == "u" else value > 0.0
    if not allowed or (math.isinf(value) and field != "dof"):
        least = "zero or a positive" if field == "u" else "a positive"
        raise InputError(f"--suppose {text!r}: {number.strip()!r} is not {least} number.")
    if value > LARGEST and field != "dof":
        raise InputError(f"--suppose {text!r}: no uncertainty is as large as {number.strip()}.")
    return Supposition(name, known[name], field, value)


def _nearest(name: str, known: dict[str, tuple[str, ...]]) -> str:
    close = difflib.get_close_matches(name, known, n=1, cutoff=0.3)
    return f"; the nearest is {close[0]}" if close else "; the budget lists their names"


def suppose(model: MeasurementModel, suppositions: Sequence[Supposition]) -> MeasurementModel:
    """Return the model with supposed uncertainties and the weights that follow.

    A half-width turns a normal or t input into a rectangular one. The two sides of a cutoff's
    likelihood scale with its supposed counting uncertainty. Estimates and responses stay; what
    happens to inputs that are correlated with a supposed one says `knowledge`.

    Raises
    ------
    InputError
        If one input gets two forms of uncertainty or a figure twice, or its distribution would
        reach values for which h is not defined.
    """
    given: dict[str, dict[str, float]] = {}
    for supposition in suppositions:
        for name in supposition.inputs:
            figures = given.setdefault(name, {})
            if supposition.field in figures:
                raise InputError(f"--suppose gives {name}.{supposition.field} twice; give it once.")
            figures[supposition.field] = supposition.value
            if "u" in figures and "half_width" in figures:
                raise InputError(
                    f"--suppose gives two forms of uncertainty for {name}; give u or half_width."
                )
    inputs = tuple(_reshaped(quantity, given.get(quantity.name, {})) for quantity in model.inputs)
    wanted = {
        quantity.name: _wanted(quantity, given[quantity.name])
        for quantity in inputs
        if not given.get(quantity.name, {}).keys().isdisjoint({"u", "half_width"})
    }
    changed = with_uncertainties(replace(model, inputs=inputs), wanted)
    check_support(changed)
    return replace(changed, skew=_scaled_sides(model, changed.inputs))


def _reshaped(quantity: Quantity, figures: dict[str, float]) -> Quantity:
    if "half_width" in figures and quantity.half_width is None:
        quantity = replace(quantity, distribution="rectangular")
    if "dof" in figures:
        quantity = replace(quantity, degrees_of_freedom=figures["dof"])
    return quantity


def _wanted(quantity: Quantity, figures: dict[str, float]) -> float:
    if "u" in figures:
        return figures["u"]
    return figures["half_width"] / HALF_WIDTH_DIVISOR[quantity.distribution]


def _scaled_sides(model: MeasurementModel, inputs: tuple[Quantity, ...]) -> measurement.FloatArray:
    old = {quantity.name: quantity.standard_uncertainty for quantity in model.inputs}
    new = {quantity.name: quantity.standard_uncertainty for quantity in inputs}
    sides = model.skew.copy()
    for row, scan in enumerate(model.scans):
        name = measurement.counting_name(scan)
        if name in new and new[name] != old[name]:
            sides[row] = sides[row] * (new[name] / old[name]) if old[name] > 0.0 else new[name]
    return np.asarray(sides)


def what_if(
    model: MeasurementModel, texts: Sequence[str], coverage_probability: float = 0.95
) -> WhatIf:
    """Compare the budget with the one under suppositions, all taken together.

    Parameters
    ----------
    model : MeasurementModel
    texts : sequence of str
        As in `parse_supposition`.
    coverage_probability : float

    Returns
    -------
    WhatIf
    """
    suppositions = tuple(parse_supposition(text, model) for text in texts)
    changed = suppose(model, suppositions)
    return WhatIf(
        suppositions,
        planck_budget(model, coverage_probability),
        planck_budget(changed, coverage_probability),
        changed,
    )


def _expanded(
    model: MeasurementModel, names: Sequence[str], factor: float, coverage_probability: float
) -> float:
    """Expanded uncertainty with the uncertainties of some inputs multiplied."""
    wanted = {
        quantity.name: factor * quantity.standard_uncertainty
        for quantity in model.inputs
        if quantity.name in names
    }
    changed = with_uncertainties(model, wanted)
    return linear_figures(changed, coverage_probability).expanded_uncertainty_J_s


def improvements(
    model: MeasurementModel, coverage_probability: float = 0.95, *, each_scan: bool = False
) -> tuple[Improvement, ...]:
    """Expanded uncertainty that would remain if an input were known twice as well, or exactly.

    Every input with an uncertainty has an entry; inputs of the same kind of all scans have one
    together (``scan.*.counting_deg``), as have the terms of one series. The weights of the
    voltages are worked out anew each time.

    Parameters
    ----------
    model : MeasurementModel
    coverage_probability : float
    each_scan : bool
        Give the members of a kind an entry each as well.

    Returns
    -------
    tuple of Improvement
        Sorted, the largest gain first.
    """
    together = families(model)
    symbols = {scan_family(quantity.name): quantity.symbol for quantity in reversed(model.inputs)}
    groups: dict[str, tuple[str, ...]] = {
        quantity.name: (quantity.name,)
        for quantity in model.inputs
        if each_scan or scan_family(quantity.name) == quantity.name
    }
    groups |= together
    known = {quantity.name for quantity in model.inputs if quantity.standard_uncertainty > 0.0}
    entries = []
    for name, members in groups.items():
        if known.isdisjoint(members):
            continue
        halved = _expanded(model, members, 0.5, coverage_probability)
        zero = _expanded(model, members, 0.0, coverage_probability)
        entries.append(Improvement(name, symbols[scan_family(name)], halved, zero))
    return tuple(sorted(entries, key=lambda entry: entry.expanded_if_zero))


def counting_floor(model: MeasurementModel, coverage_probability: float = 0.95) -> float:
    """Expanded uncertainty of h with perfect counting statistics, J s."""
    return _expanded(model, families(model).get(COUNTING_FAMILY, ()), 0.0, coverage_probability)


@dataclass(frozen=True, slots=True, eq=False)
class BudgetStudy:
    """A budget, what would improve it, and what was supposed.

    `counting_floor` is the expanded uncertainty with perfect counting statistics.
    """

    budget: Budget
    improvements: tuple[Improvement, ...]
    counting_floor: float
    supposed: WhatIf | None


def study(model: MeasurementModel, texts: Sequence[str] = ()) -> BudgetStudy:
    """Work out the budget of a model, its improvements, and the suppositions if there are any.

    Parameters
    ----------
    model : MeasurementModel
    texts : sequence of str
        Suppositions, as in `parse_supposition`.

    Returns
    -------
    BudgetStudy
    """
    supposed = what_if(model, texts) if texts else None
    budget = planck_budget(model)
    return BudgetStudy(budget, improvements(model), counting_floor(model), supposed)
