"""The arithmetic between counts and a claimed h, step by step, with one step or two altered.

    reading -> (zero) -> angle as called -> sine -> wavelength -> pairing with a voltage
            -> relation -> number

A `Variant` says which step was done how; `predict` says which angles, wavelengths and h follow
from a group's own data, and how they answer to scatter in the readings.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hdetermine.classcheck.evidence import Evidence
from hdetermine.physics.constants import PLANCK_PER_SLOPE

FloatArray = NDArray[np.float64]
AngleStep = Callable[[FloatArray], FloatArray]
Combination = Callable[[FloatArray, FloatArray], FloatArray]

_STEP = 1e-4


# --- how wavelengths and voltages become one slope --------------------------------------------
# Each takes wavelengths (..., n) in pm and voltages (n,) in kV; rows that are nan in either are
# left out by the caller. Each returns the slope lambda * U in pm kV, shape (...).


def mean_of_products(wavelength: FloatArray, voltage: FloatArray) -> FloatArray:
    """Mean of the single values."""
    return np.asarray(np.mean(wavelength * voltage, axis=-1))


def line_through_origin(wavelength: FloatArray, voltage: FloatArray) -> FloatArray:
    """Least squares of lambda against 1/U through the origin."""
    x = 1.0 / voltage
    return np.asarray(wavelength @ x / (x @ x))


def line_with_intercept(wavelength: FloatArray, voltage: FloatArray) -> FloatArray:
    """Least squares of lambda against 1/U with an intercept."""
    x = 1.0 / voltage
    x = x - np.mean(x)
    return np.asarray(wavelength @ x / (x @ x))


def voltage_line_through_origin(wavelength: FloatArray, voltage: FloatArray) -> FloatArray:
    """Least squares of U against 1/lambda through the origin."""
    y = 1.0 / wavelength
    return np.asarray(y @ voltage / np.sum(y * y, axis=-1))


def voltage_line_with_intercept(wavelength: FloatArray, voltage: FloatArray) -> FloatArray:
    """Least squares of U against 1/lambda with an intercept."""
    y = 1.0 / wavelength
    y = y - np.mean(y, axis=-1, keepdims=True)
    return np.asarray(y @ voltage / np.sum(y * y, axis=-1))


PROPER: tuple[Combination, ...] = (
    mean_of_products,
    line_through_origin,
    line_with_intercept,
    voltage_line_through_origin,
    voltage_line_with_intercept,
)
"""Ways to combine the voltages that are all in use and none of them wrong."""


# --- variants ---------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True, eq=False)
class Variant:
    """One way of doing the arithmetic; what is None is done as it should be.

    Attributes
    ----------
    note : str
        What is particular about the variant, for the reader; may be empty.
    angle_deg : ndarray, shape (n,), or None
        Cutoff angles read otherwise.
    reading_u : float
        Relative standard uncertainty with which `angle_deg` foretells what a person reads.
    shift_deg : ndarray, shape (n,), or None
        Added to the angles.
    order : ndarray of int, shape (n,), or None
        Row whose cutoff stands in each row of the table; -1 for none.
    called : callable or None
        From the glancing angle to what is called the glancing angle, degrees.
    sine_of : callable or None
        From the called angle to what the sine is taken of, degrees.
    voltage_kV : ndarray, shape (n,), or None
        Voltages used in the relation; nan for a row that is left out.
    combine : callable or None
        How wavelengths and voltages become one slope.
    invert : bool or None
        True if the reciprocal of the slope is used, in 1/(pm kV).
    wavelength_factor, planck_factor : float
        Factors on every wavelength, and on h alone.
    """

    note: str = ""
    angle_deg: FloatArray | None = None
    reading_u: float = 0.0
    shift_deg: FloatArray | None = None
    order: NDArray[np.int64] | None = None
    called: AngleStep | None = None
    sine_of: AngleStep | None = None
    voltage_kV: FloatArray | None = None
    combine: Combination | None = None
    invert: bool | None = None
    wavelength_factor: float = 1.0
    planck_factor: float = 1.0

    @property
    def steps_key(self) -> tuple[int, ...]:
        """Equal for variants that differ by factors only (as long as they live)."""
        return tuple(id(getattr(self, name)) for name in _STEPS)

    @property
    def without_factors(self) -> Variant:
        """The same steps, multiplying nothing."""
        return replace(self, note="", wavelength_factor=1.0, planck_factor=1.0)


_STEPS = (
    "angle_deg", "shift_deg", "order", "called", "sine_of", "voltage_kV", "combine", "invert",
)  # fmt: skip
RIGHT = Variant()


def together(one: Variant, other: Variant) -> Variant | None:
    """Do both; None if both alter the same step."""
    taken: dict[str, Any] = {}
    for name in _STEPS:
        mine, theirs = getattr(one, name), getattr(other, name)
        if mine is not None and theirs is not None:
            return None
        taken[name] = mine if mine is not None else theirs
    if one.order is not None and other.voltage_kV is not None:
        return None
    if other.order is not None and one.voltage_kV is not None:
        return None
    return Variant(
        note="; ".join(note for note in (one.note, other.note) if note),
        reading_u=max(one.reading_u, other.reading_u),
        wavelength_factor=one.wavelength_factor * other.wavelength_factor,
        planck_factor=one.planck_factor * other.planck_factor,
        **taken,
    )


# --- predictions ------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True, eq=False)
class Rows:
    """Which rows of the evidence a claim speaks of.

    `angles` and `wavelengths` are indices of the evidence at which a cutoff is claimed as an
    angle or as a wavelength; `used` those from which h is taken to come; `with_h` whether h is
    claimed.
    """

    angles: NDArray[np.int64]
    wavelengths: NDArray[np.int64]
    used: NDArray[np.int64]
    with_h: bool

    @property
    def size(self) -> int:
        """Length of the vector of claimed numbers."""
        return int(self.angles.size + self.wavelengths.size + self.with_h)


@dataclass(frozen=True, slots=True, eq=False)
class Prediction:
    """Natural logarithms of what would be claimed, and their answer to the readings.

    Attributes
    ----------
    log_values : ndarray, shape (m,)
        Called angles (degrees), wavelengths (pm), h (J s), as in `Rows`.
    response : ndarray, shape (m, n)
        d(log value)/d(log reading).
    """

    log_values: FloatArray
    response: FloatArray


def predict(
    evidence: Evidence,
    variant: Variant,
    combine: Combination,
    rows: Rows,
    around: FloatArray | float = 0.0,
) -> Prediction | None:
    """Say what a variant would have made of a group's data.

    Parameters
    ----------
    evidence : Evidence
        The group's data, n voltages.
    variant : Variant
        What was done otherwise.
    combine : callable
        How the voltages are combined, unless the variant says.
    rows : Rows
        Which numbers are claimed, m of them.
    around : ndarray, shape (n,), or float
        Logarithmic deviations of the readings about which the answer is linearised; the
        prediction itself is for the evidence as it is.

    Returns
    -------
    Prediction or None
        None if the variant cannot give such numbers.
    """
    base = evidence.angle_deg if variant.angle_deg is None else variant.angle_deg
    n = base.size
    deviation = np.broadcast_to(around, n)
    steps = np.vstack([np.zeros(n), _STEP * np.eye(n)])
    angle = base * np.exp(deviation + steps)
    if variant.shift_deg is not None:
        angle = angle + variant.shift_deg
    if variant.order is not None:
        angle = np.where(variant.order >= 0, angle[:, variant.order], np.nan)
    called = angle if variant.called is None else variant.called(angle)
    sine_of = called if variant.sine_of is None else variant.sine_of(called)
    wavelength = np.abs(2.0 * evidence.spacing_pm * np.sin(np.radians(sine_of)))
    wavelength = wavelength * variant.wavelength_factor
    parts = [called[:, rows.angles], wavelength[:, rows.wavelengths]]
    if rows.with_h:
        voltage = evidence.supplied_kV if variant.voltage_kV is None else variant.voltage_kV
        chosen = rows.used[np.isfinite(voltage[rows.used] * wavelength[0, rows.used])]
        method = combine if variant.combine is None else variant.combine
        if chosen.size < max(_fewest(variant, method), rows.used.size // 2):
            return None
        with np.errstate(divide="ignore", invalid="ignore"):  # wavelengths may all be the same
            slope = method(wavelength[:, chosen], voltage[chosen])
            slope = 1.0 / slope if variant.invert else slope
        parts.append(np.abs(slope[:, np.newaxis]) * PLANCK_PER_SLOPE * variant.planck_factor)
    values = np.hstack(parts)
    if not np.all(np.isfinite(values)) or np.any(values <= 0.0):
        return None
    logs = np.log(values)
    response = (logs[1:] - logs[0]).T / _STEP
    return Prediction(logs[0] - response @ deviation, response)


def _fewest(variant: Variant, method: Combination) -> int:
    """Voltages that a combination needs: a line with two parameters is drawn through three."""
    two_parameters = method in (line_with_intercept, voltage_line_with_intercept)
    return 3 if two_parameters or variant.combine is not None else 1
