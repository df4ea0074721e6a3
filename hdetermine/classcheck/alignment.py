"""A claim and a group's data side by side: one vector of claimed numbers, one of rows."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from hdetermine.classcheck.arithmetic import Rows
from hdetermine.classcheck.claim import JOULES, Claim, ClaimedCutoff
from hdetermine.classcheck.evidence import Evidence
from hdetermine.classcheck.numeral import Numeral
from hdetermine.physics.bragg import glancing_angle_deg
from hdetermine.physics.constants import PLANCK_PER_SLOPE

FloatArray = NDArray[np.float64]

VOLTAGE_MATCH_kV = 0.051
"""A claimed voltage belongs to a scan if the two differ by no more: half a usual last digit."""
FILLED_RELATIVE_U = 0.01
"""Of a cutoff that is taken from the re-analysed relation because its scan gave none."""
LARGEST_CLAIMED_U = 0.05
"""A claim's own relative uncertainty counts up to this; beyond, nothing could be told apart."""
UNSEEN_STEP = 1e-5
"""Relative rounding assumed of a number whose writing is not known."""


@dataclass(frozen=True, slots=True, eq=False)
class Alignment:
    """Claimed numbers beside the evidence.

    Attributes
    ----------
    evidence : Evidence
        With a row for every claimed voltage.
    rows : Rows
        Which rows the claimed numbers belong to.
    log_values : ndarray, shape (m,)
        Natural logarithms of the claimed angles (degrees), wavelengths (pm) and h (J s).
    rounding_u : ndarray, shape (m,)
        Relative standard uncertainties from rounding.
    own_u : float
        Relative standard uncertainty that the claim states for h, bounded; zero if none.
    filled : ndarray of bool, shape (n,)
        Rows that the re-analysis did not measure.
    """

    evidence: Evidence
    rows: Rows
    log_values: FloatArray
    rounding_u: FloatArray
    own_u: float
    filled: NDArray[np.bool_]


def align(claim: Claim, evidence: Evidence) -> Alignment:
    """Put a claim beside a group's data.

    A claimed voltage whose scan gave no cutoff gets the one that the re-analysed relation
    foresees. A negative h is taken by its magnitude.
    """
    full = _with_rows_for(claim.cutoffs, evidence)
    index = {c: _row(full, c.tube_voltage_kV) for c in claim.cutoffs}
    angles = [(index[c], c.glancing_angle_deg) for c in claim.cutoffs if c.glancing_angle_deg]
    lengths = [(index[c], c.wavelength_pm) for c in claim.cutoffs if c.wavelength_pm]
    numerals = [numeral for _, numeral in angles + lengths]
    with_h = claim.h is not None
    if claim.h is not None:
        joules = JOULES[claim.unit]
        numerals.append(Numeral(abs(claim.h.value) * joules, claim.h.step * joules))
    used = sorted(set(index.values())) if claim.cutoffs else range(full.size)
    relative_u = claim.relative_u
    return Alignment(
        evidence=full,
        rows=Rows(
            np.array([row for row, _ in angles], dtype=np.int64),
            np.array([row for row, _ in lengths], dtype=np.int64),
            np.array(list(used), dtype=np.int64),
            with_h,
        ),
        log_values=np.array([math.log(numeral.value) for numeral in numerals]),
        rounding_u=np.array([_relative_rounding(numeral) for numeral in numerals]),
        own_u=min(relative_u, LARGEST_CLAIMED_U) if math.isfinite(relative_u) else 0.0,
        filled=~np.isin(full.displayed_kV, evidence.displayed_kV),
    )


def _relative_rounding(numeral: Numeral) -> float:
    return max(numeral.rounding_u / numeral.value, UNSEEN_STEP)


def _row(evidence: Evidence, voltage_kV: float) -> int:
    return int(np.argmin(np.abs(evidence.displayed_kV - voltage_kV)))


def _with_rows_for(cutoffs: tuple[ClaimedCutoff, ...], evidence: Evidence) -> Evidence:
    """Add rows for claimed voltages that the evidence does not have."""
    missing = [
        cutoff.tube_voltage_kV
        for cutoff in cutoffs
        if np.min(np.abs(evidence.displayed_kV - cutoff.tube_voltage_kV)) > VOLTAGE_MATCH_kV
    ]
    if not missing:
        return evidence
    displayed = np.concatenate([evidence.displayed_kV, missing])
    order = np.argsort(displayed, kind="stable")
    new = np.full(len(missing), np.nan)
    if evidence.size > 1:
        line = np.polynomial.Polynomial.fit(evidence.displayed_kV, evidence.supplied_kV, 1)
        supplied = line(np.array(missing))
    else:  # one point has no domain to fit over
        supplied = np.array(missing) * evidence.supplied_kV[0] / evidence.displayed_kV[0]
    wavelength = evidence.planck_J_s / PLANCK_PER_SLOPE / supplied
    angle = glancing_angle_deg(wavelength, evidence.spacing_pm)

    def extend(column: FloatArray, fill: FloatArray) -> FloatArray:
        return np.concatenate([column, fill])[order]

    def shortcut(column: FloatArray) -> FloatArray:
        ratio = float(np.nanmedian(column / evidence.angle_deg))
        return extend(column, angle * ratio)

    return replace(
        evidence,
        displayed_kV=displayed[order],
        supplied_kV=extend(evidence.supplied_kV, supplied),
        angle_deg=extend(evidence.angle_deg, angle),
        own_u=extend(evidence.own_u, np.full(len(missing), FILLED_RELATIVE_U)),
        shifts_deg={
            name: extend(column, np.full(len(missing), float(np.mean(column))))
            for name, column in evidence.shifts_deg.items()
        },
        shortcuts_deg={
            name: tuple(
                extend(column, new) if name == "line" else shortcut(column) for column in columns
            )
            for name, columns in evidence.shortcuts_deg.items()
        },
        last_deg=extend(evidence.last_deg, np.full(len(missing), float(np.max(evidence.last_deg)))),
    )
