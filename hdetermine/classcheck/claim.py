"""What a group claims: records, in the units of the claim and in SI."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

from hdetermine.classcheck.numeral import Numeral
from hdetermine.physics.constants import ELEMENTARY_CHARGE_C

PlanckUnit = Literal["J s", "eV s"]

JOULES: dict[str, float] = {"J s": 1.0, "eV s": ELEMENTARY_CHARGE_C}
"""J s per unit in which h may be claimed."""


@dataclass(frozen=True, slots=True)
class ClaimedCutoff:
    """The cutoff that a group claims for one voltage.

    Attributes
    ----------
    tube_voltage_kV : float
        As displayed.
    wavelength_pm : Numeral or None
        Claimed cutoff wavelength, pm.
    glancing_angle_deg : Numeral or None
        Claimed cutoff angle, as the group put it into Bragg's law, degrees.
    """

    tube_voltage_kV: float
    wavelength_pm: Numeral | None = None
    glancing_angle_deg: Numeral | None = None


@dataclass(frozen=True, slots=True)
class Claim:
    """A group's own numbers.

    Attributes
    ----------
    group : str
        Whose claim it is, as written.
    source : str
        File, and row for a table.
    h : Numeral or None
        Claimed Planck constant, in `unit`.
    unit : {"J s", "eV s"}
        As stated.
    standard : Numeral or None
        Standard uncertainty, in `unit`, if stated as such.
    expanded : Numeral or None
        Expanded uncertainty, in `unit`, if stated as such.
    coverage_factor : float
        k of the expanded uncertainty.
    cutoffs : tuple of ClaimedCutoff
        By rising voltage.
    """

    group: str
    source: str
    h: Numeral | None = None
    unit: PlanckUnit = "J s"
    standard: Numeral | None = None
    expanded: Numeral | None = None
    coverage_factor: float = 2.0
    cutoffs: tuple[ClaimedCutoff, ...] = ()

    @property
    def value_J_s(self) -> float:
        """Claimed h, J s; nan if none."""
        return math.nan if self.h is None else self.h.value * JOULES[self.unit]

    @property
    def standard_uncertainty_J_s(self) -> float:
        """Claimed standard uncertainty, J s; nan if none was stated."""
        if self.standard is not None:
            return self.standard.value * JOULES[self.unit]
        if self.expanded is not None:
            return self.expanded.value / self.coverage_factor * JOULES[self.unit]
        if self.h is not None and self.h.uncertainty is not None:
            return self.h.uncertainty * JOULES[self.unit]
        return math.nan

    @property
    def relative_u(self) -> float:
        """Claimed standard uncertainty over the claimed value; nan if either is missing."""
        value = self.value_J_s
        return abs(self.standard_uncertainty_J_s / value) if value else math.nan

    @property
    def is_empty(self) -> bool:
        """True if the claim holds no number at all."""
        return self.h is None and not self.cutoffs
