"""Which slips explain a claim, if ordinary scatter does not.

The rule has four parts, and all must hold.

1. The claim does not agree with the re-analysis within what both state.
2. The prediction of the slip fits the claim: probability of chi squared at least
   `LEAST_FIT_PROBABILITY`.
3. All slips that fit, weighted by how common they are, make the claim at least `LEAST_ODDS`
   times more probable than *any* ordinary scatter of the grid does. Whatever the length of the
   catalogue, an honest claim passes this part alone with a probability of at most 1/`LEAST_ODDS`
   (the mean of such a ratio is at most one if there is no slip, and Markov's inequality does
   the rest: Wasserman, Ramdas and Balakrishnan, PNAS 117, 16880 (2020); from memory). That is
   the worst case; `tests/closure/class_study` measures how often it happens with all four.
4. They explain it better than a mistake that could lead anywhere.

Combinations of two are tried only where no single slip fits.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import logsumexp

from hdetermine.classcheck import numberslips, readingslips, relationslips
from hdetermine.classcheck.alignment import Alignment
from hdetermine.classcheck.arithmetic import RIGHT, Variant, together
from hdetermine.classcheck.claim import PlanckUnit
from hdetermine.classcheck.slip import NamedSlip, Slip, Wording
from hdetermine.classcheck.weighing import (
    ANYTHING,
    COARSE,
    ORDINARY,
    ORDINARY_WITHOUT_CUTOFFS,
    STATED_ONLY,
    Scatter,
    factor_shifts,
    weigh,
)

FloatArray = NDArray[np.float64]

LEAST_FIT_PROBABILITY = 0.01
LEAST_ODDS = 10.0
LEAST_PAIR_ODDS, CLEAR_ODDS = 100.0, 1e4
LEAST_SHARE, LEAST_PAIR_SHARE = 3e-3, 1e-1
"""A slip (a pair of them) is listed if it is at least this probable beside the best one."""
SINGLES_SHARE, PAIRS_SHARE, ANYTHING_SHARE = 0.75, 0.1, 0.15
AGREEMENT_PROBABILITY = 0.05

WORDINGS: dict[str, Wording] = {
    **readingslips.WORDINGS,
    **relationslips.WORDINGS,
    **numberslips.WORDINGS,
}
"""Every slip of the catalogue that concerns the number."""


@dataclass(frozen=True, slots=True)
class Explanation:
    """What was found out about a claim's numbers.

    Attributes
    ----------
    comparable : bool
        False if the claim holds nothing that can be set against the data.
    agrees : bool
        True if the claim agrees with the re-analysis within what both state.
    ordinary : bool
        True if ordinary scatter of reading covers the difference.
    slips : tuple of NamedSlip
        Most probable, which is most specific, first; empty if none may be named.
    """

    comparable: bool
    agrees: bool
    ordinary: bool
    slips: tuple[NamedSlip, ...] = ()


@dataclass(frozen=True, slots=True, eq=False)
class _Candidate:
    """A variant of one slip or two, with its share of the prior."""

    codes: tuple[str, ...]
    share: float
    variant: Variant


def catalogue(alignment: Alignment, unit: PlanckUnit) -> list[Slip]:
    """Make every slip for one group's data and claim."""
    evidence = alignment.evidence
    return [
        *readingslips.reading_slips(evidence),
        *relationslips.relation_slips(evidence),
        *numberslips.number_slips(unit),
    ]


def explain(
    alignment: Alignment,
    unit: PlanckUnit,
    *,
    against_itself: bool = False,
    skipped: frozenset[str] = frozenset(),
) -> Explanation:
    """Find the slips that explain a claim.

    Parameters
    ----------
    alignment : Alignment
        Claim and data.
    unit : {"J s", "eV s"}
        Unit of the claim.
    against_itself : bool
        True if the evidence was made from the claim's own cutoffs.
    skipped : frozenset of str
        Slips that are not tried, because what they need is not known.

    Returns
    -------
    Explanation
    """
    rows = alignment.rows
    if rows.size == 0:
        return Explanation(False, False, False)
    ordinary: Sequence[Scatter] = ORDINARY
    if against_itself:
        ordinary = STATED_ONLY
    elif not (rows.angles.size or rows.wavelengths.size):
        ordinary = ORDINARY_WITHOUT_CUTOFFS
    none = np.zeros((1, rows.size))
    # With and without the counting statistics of the re-analysis: readings by others need not
    # share them, and ordinary scatter has the benefit of the doubt.
    tries = [weigh(alignment, RIGHT, none, ordinary, own) for own in (1.0, 0.0)]
    right = max(float(one.log_best[0]) for one in tries)
    covered = max(float(one.fit_probability[0]) for one in tries) >= LEAST_FIT_PROBABILITY
    if not math.isfinite(right):
        return Explanation(False, False, False)
    bounded = min(max(alignment.own_u, 0.002), 0.02)
    stated = (Scatter(bounded, bounded, 0.001),)
    agreement = weigh(alignment, RIGHT, none, STATED_ONLY if against_itself else stated)
    close = against_itself or _h_agrees(alignment)
    if close and agreement.fit_probability[0] >= AGREEMENT_PROBABILITY:
        return Explanation(True, True, True)
    anything = weigh(alignment, RIGHT, none, ANYTHING).log_mean[0] + math.log(ANYTHING_SHARE)
    bar = max(right + math.log(LEAST_ODDS), anything)
    slips = [slip for slip in catalogue(alignment, unit) if slip.code not in skipped]
    singles = _singles(slips)
    named, best = _name(alignment, singles, STATED_ONLY if against_itself else ordinary, bar, right)
    if against_itself or best > anything + math.log(CLEAR_ODDS):
        return Explanation(True, False, covered, named)
    # There are thousands of pairs, and one of them gives almost any number: they must explain
    # the claim much better than a single slip, and than a mistake that could lead anywhere.
    pair_bar = max(bar, anything + math.log(LEAST_PAIR_ODDS), best + math.log(LEAST_PAIR_ODDS))
    pairs, _ = _name(alignment, _pairs(slips), COARSE, pair_bar, right)
    return Explanation(True, False, covered, pairs or named)


def _h_agrees(alignment: Alignment) -> bool:
    """Whether the claimed h lies within two combined standard uncertainties of the data's."""
    if not alignment.rows.with_h:
        return True
    evidence = alignment.evidence
    own = evidence.planck_u_J_s / evidence.planck_J_s
    u = math.sqrt(own**2 + alignment.own_u**2 + float(alignment.rounding_u[-1]) ** 2)
    return abs(float(alignment.log_values[-1]) - math.log(evidence.planck_J_s)) <= 2.0 * u


def _singles(slips: list[Slip]) -> list[_Candidate]:
    total = sum(slip.weight for slip in slips)
    return [
        _Candidate((slip.code,), SINGLES_SHARE * slip.weight / total / len(slip.variants), variant)
        for slip in slips
        for variant in slip.variants
    ]


def _pairs(slips: list[Slip]) -> list[_Candidate]:
    found = []
    total = 0.0
    for one, other in itertools.combinations(slips, 2):
        if one.code == other.code:
            continue
        weight = one.weight * other.weight
        total += weight
        for first, second in itertools.product(_few(one), _few(other)):
            both = together(first, second)
            if both is not None:
                share = weight / (len(_few(one)) * len(_few(other)))
                found.append(_Candidate((one.code, other.code), share, both))
    return [_Candidate(c.codes, PAIRS_SHARE * c.share / total, c.variant) for c in found]


def _few(slip: Slip) -> tuple[Variant, ...]:
    """Fewer variants of a shortcut that has many of them: for combinations of two."""
    if slip.code in ("straight_line_crossing", "first_rising_point"):
        return slip.variants[:: max(1, len(slip.variants) // 3)]
    return slip.variants


def _name(
    alignment: Alignment,
    candidates: list[_Candidate],
    grid: Sequence[Scatter],
    bar: float,
    right: float,
) -> tuple[tuple[NamedSlip, ...], float]:
    """Name the slips that pass the rule, grouped by code; return the best log weight too."""
    log_weight, probability, planck = _weigh_all(alignment, candidates, grid)
    fitting = np.flatnonzero((probability >= LEAST_FIT_PROBABILITY) & np.isfinite(log_weight))
    if fitting.size == 0 or logsumexp(log_weight[fitting]) < bar:
        return (), -math.inf
    by_codes: dict[tuple[str, ...], list[int]] = {}
    for index in fitting:
        by_codes.setdefault(candidates[index].codes, []).append(int(index))
    sums = {codes: float(logsumexp(log_weight[members])) for codes, members in by_codes.items()}
    best = max(sums.values())
    named = []
    for codes in sorted(sums, key=lambda key: (-sums[key], key)):
        share = LEAST_SHARE if len(codes) == 1 else LEAST_PAIR_SHARE
        if sums[codes] < best + math.log(share) or sums[codes] < right:
            continue
        top = max(by_codes[codes], key=lambda index: float(log_weight[index]))
        named.append(
            _named(codes, candidates[top].variant.note, float(planck[top]),
                   float(probability[top]), sums[codes] - right)
        )  # fmt: skip
    return tuple(named), best


def _weigh_all(
    alignment: Alignment, candidates: list[_Candidate], grid: Sequence[Scatter]
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Log weight, fit probability and predicted h of every candidate.

    Candidates that differ only by factors share one prediction.
    """
    groups: dict[tuple[int, ...], list[int]] = {}
    for index, candidate in enumerate(candidates):
        groups.setdefault(candidate.variant.steps_key, []).append(index)
    log_weight = np.full(len(candidates), -np.inf)
    probability = np.zeros(len(candidates))
    planck = np.full(len(candidates), np.nan)
    for members in groups.values():
        variants = [candidates[index].variant for index in members]
        shifts = factor_shifts(alignment, variants)
        weights = weigh(alignment, variants[0].without_factors, shifts, grid)
        log_weight[members] = weights.log_mean + np.log([candidates[i].share for i in members])
        probability[members] = weights.fit_probability
        planck[members] = weights.planck_J_s
    return log_weight, probability, planck


def _named(
    codes: tuple[str, ...], note: str, planck: float, probability: float, log_odds: float
) -> NamedSlip:
    words = [WORDINGS[code] for code in codes]
    sentence = words[0].sentence
    if len(words) == 2:
        # Each sentence by itself says "gives this number", which one alone does not.
        sentence = "Both together give this number; one alone does not, or not as well."
    return NamedSlip(
        codes=codes,
        title=" and ".join(word.title for word in words),
        sentence=sentence,
        remedy=" ".join(word.remedy for word in words),
        note=note,
        predicted_J_s=planck,
        fit_probability=probability,
        odds=math.exp(min(log_odds, 690.0)),
    )
