"""A quantity: one number with its uncertainty, and where both come from."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Literal

Distribution = Literal["normal", "t", "rectangular", "triangular", "arcsine"]
Evaluation = Literal["A", "B"]

DISTRIBUTIONS: tuple[Distribution, ...] = ("normal", "t", "rectangular", "triangular", "arcsine")

HALF_WIDTH_DIVISOR: dict[str, float] = {
    # JCGM 100:2008, 4.3.7 (rectangular), 4.3.9 (triangular); JCGM 101:2008, 6.4.6 (arcsine).
    "rectangular": math.sqrt(3.0),
    "triangular": math.sqrt(6.0),
    "arcsine": math.sqrt(2.0),
}
"""Half-width over standard uncertainty of each bounded distribution."""


@dataclass(frozen=True, slots=True)
class Quantity:
    """An input or result of the measurement.

    Attributes
    ----------
    name : str
        Dotted name as in the run sheet, for instance ``tube.voltage.gain``.
    symbol : str
        Plain-text symbol for tables, for instance ``g``.
    value : float
        Best estimate, in `unit`.
    standard_uncertainty : float
        Standard uncertainty, in `unit`; zero for an exact quantity.
    unit : str
        SI-style unit text; ``"1"`` for a plain ratio.
    distribution : {"normal", "t", "rectangular", "triangular", "arcsine"}
        Distribution attributed to the quantity (JCGM 101:2008, clause 6.4). The bounded ones
        reach from ``value - half_width`` to ``value + half_width``; ``"t"`` is a scaled and
        shifted Student distribution with `degrees_of_freedom`, whose *scale* is the
        standard uncertainty (JCGM 101:2008, 6.4.9).
    evaluation : {"A", "B"}
        How the uncertainty was evaluated (JCGM 100:2008, 4.2 and 4.3).
    degrees_of_freedom : float
        Infinite unless stated.
    common : bool
        True if one value acts on all scans alike (it does not average out with more voltages).
    source, note : str
        Free text from whoever stated the quantity.
    is_default : bool
        True if the uncertainty (or the whole quantity) is a documented default and was not
        stated by the user.
    """

    name: str
    symbol: str
    value: float
    standard_uncertainty: float
    unit: str
    distribution: Distribution = "normal"
    evaluation: Evaluation = "B"
    degrees_of_freedom: float = math.inf
    common: bool = True
    source: str = ""
    note: str = ""
    is_default: bool = False

    @property
    def half_width(self) -> float | None:
        """Half-width of a bounded distribution, in `unit`; None for normal and t."""
        divisor = HALF_WIDTH_DIVISOR.get(self.distribution)
        return None if divisor is None else self.standard_uncertainty * divisor

    @property
    def relative_standard_uncertainty(self) -> float:
        """Standard uncertainty over the magnitude of the value; infinite at value zero."""
        if self.value == 0.0:
            return math.inf
        return self.standard_uncertainty / abs(self.value)

    def with_uncertainty(self, standard_uncertainty: float) -> Quantity:
        """Return the same quantity with another standard uncertainty."""
        return replace(self, standard_uncertainty=standard_uncertainty)
