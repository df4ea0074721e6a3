"""Slips in the statement of the uncertainty: they follow by arithmetic, not by likelihood."""

from __future__ import annotations

import math

from hdetermine.classcheck.claim import Claim
from hdetermine.classcheck.slip import NamedSlip, Wording

COVERAGE_TOLERANCE = 0.1
"""Relative; both figures are usually rounded to one or two digits."""
HIDDEN_PLACES = 90.0
"""The value's last place over the uncertainty's from which rounding is to blame. A spreadsheet
drops up to one trailing zero in ten values, and two in a hundred, without anybody's doing."""

WORDINGS: dict[str, Wording] = {
    "coverage": Wording(
        "expanded and standard uncertainty confused",
        "The standard uncertainty u and the expanded uncertainty U that are stated do not belong "
        "together: U is k times u.",
        "State u, k and U = k u, and which of them stands behind the ± sign.",
    ),
    "rounded_away": Wording(
        "uncertainty rounded away",
        "The value is given to so few places that rounding it moves it by more than the "
        "uncertainty that is stated.",
        "Round the uncertainty to two significant digits, and the value to the same place.",
    ),
}


def statement_slips(claim: Claim) -> tuple[NamedSlip, ...]:
    """Name what is wrong with the way a claim states its uncertainty.

    Expanded against standard is named only where a claim states both and they contradict each
    other: one figure alone cannot tell how it was meant.
    """
    found = []
    if _coverage_confused(claim):
        found.append(_named("coverage", f"U/u stated: {_ratio(claim):.2g}, k: "
                            f"{claim.coverage_factor:g}"))  # fmt: skip
    if _rounded_away(claim):
        found.append(_named("rounded_away"))
    return tuple(found)


def _named(code: str, note: str = "") -> NamedSlip:
    words = WORDINGS[code]
    return NamedSlip((code,), words.title, words.sentence, words.remedy, note)


def _ratio(claim: Claim) -> float:
    if claim.standard is None or claim.expanded is None or claim.standard.value == 0.0:
        return math.nan
    return claim.expanded.value / claim.standard.value


def _coverage_confused(claim: Claim) -> bool:
    if claim.standard is None or claim.expanded is None or claim.standard.value <= 0.0:
        return False
    rounding = max(
        (0.5 * number.step / number.value for number in (claim.standard, claim.expanded)
         if number.value > 0.0), default=0.0,
    )  # fmt: skip
    tolerance = COVERAGE_TOLERANCE + 2.0 * rounding
    k = claim.coverage_factor
    ratio = _ratio(claim)
    if abs(ratio / k - 1.0) <= tolerance or abs(k - 1.0) <= tolerance:
        return False
    return abs(ratio - 1.0) <= tolerance or abs(ratio * k - 1.0) <= tolerance


def _rounded_away(claim: Claim) -> bool:
    if claim.h is None or claim.h.uncertainty is not None:
        return False
    stated = claim.standard or claim.expanded
    if stated is None or claim.h.step == 0.0 or stated.step == 0.0:
        return False
    u = stated.value / (1.0 if claim.standard is not None else claim.coverage_factor)
    if stated.value == 0.0:
        return True
    return claim.h.rounding_u > u and claim.h.step / stated.step >= HIDDEN_PLACES
