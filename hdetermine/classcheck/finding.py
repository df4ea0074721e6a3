"""What was found about a group: small enough to travel between processes."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

from hdetermine.classcheck.claim import Claim
from hdetermine.classcheck.comparison import CutoffLine, PlanckComparison
from hdetermine.classcheck.explanation import Explanation
from hdetermine.classcheck.screens import Look, Remark
from hdetermine.classcheck.slip import NamedSlip
from hdetermine.classcheck.stretches import CountTrace

Verdict = Literal[
    "agrees", "scatter", "slip", "differs", "statement", "no claim", "unusable claim",
    "consistent", "inconsistent", "alone", "nothing",
]  # fmt: skip

VERDICT_WORDS: dict[Verdict, str] = {
    "agrees": "claim agrees with the data",
    "scatter": "claim differs within ordinary scatter of reading",
    "slip": "claim differs; a slip would produce it",
    "differs": "claim differs; no slip of the catalogue produces it",
    "statement": "claim agrees; its uncertainty is stated otherwise than it is meant",
    "no claim": "analysed; no claim",
    "unusable claim": "analysed; the claim cannot be used",
    "consistent": "no usable data; the claim is consistent with itself",
    "inconsistent": "no usable data; the claim's cutoffs do not give its h",
    "alone": "no usable data; the claim cannot be checked",
    "nothing": "nothing usable",
}


@dataclass(frozen=True, slots=True)
class Reanalysis:
    """h from a group's own data, J s."""

    planck_J_s: float
    standard_uncertainty_J_s: float
    expanded_uncertainty_J_s: float
    coverage_factor: float
    relative_deviation: float
    E_n: float
    scans: int
    used: int


@dataclass(frozen=True, slots=True)
class Shortcut:
    """h that a common shortcut would give with the group's own counts."""

    title: str
    planck_J_s: float


@dataclass(frozen=True, slots=True)
class GroupFinding:
    """Everything about one group that reaches a table or a page.

    Attributes
    ----------
    name : str
        As found; shown only after it was made safe.
    reanalysis : Reanalysis or None
        None if its data gave no h; then `data_fault` says why.
    data_fault, claim_fault : str
        One sentence each, or empty.
    claim : Claim or None
        What it claims.
    planck : PlanckComparison or None
        Of the claimed h.
    cutoffs : tuple of CutoffLine
        By voltage.
    explanation : Explanation or None
        Of the claim by the group's own data.
    itself : Explanation or None
        Of the claim by its own cutoffs, where there are no usable data.
    planck_of_cutoffs_J_s : float
        h that the claimed cutoffs give, where there are no usable data; else nan.
    statement : tuple of NamedSlip
        Slips in the statement of the uncertainty.
    shortcuts : tuple of Shortcut
        For the page of feedback.
    looks : tuple of Look
        Statistics of the screening.
    remarks : tuple of Remark
        Findings of the screening; alarms are added when the size of the class is known.
    traces : tuple of CountTrace
        Counts, for the comparison between groups; dropped after it.
    simulated : bool
        True if the run has a truth.
    """

    name: str
    reanalysis: Reanalysis | None = None
    data_fault: str = ""
    claim: Claim | None = None
    claim_fault: str = ""
    planck: PlanckComparison | None = None
    cutoffs: tuple[CutoffLine, ...] = ()
    explanation: Explanation | None = None
    itself: Explanation | None = None
    planck_of_cutoffs_J_s: float = math.nan
    statement: tuple[NamedSlip, ...] = ()
    shortcuts: tuple[Shortcut, ...] = ()
    looks: tuple[Look, ...] = ()
    remarks: tuple[Remark, ...] = ()
    traces: tuple[CountTrace, ...] = ()
    simulated: bool = False

    @property
    def slips(self) -> tuple[NamedSlip, ...]:
        """Every slip that is named: of the number first, then of the statement."""
        numbers = self.explanation or self.itself
        return (*(numbers.slips if numbers else ()), *self.statement)

    @property
    def alarms(self) -> tuple[Remark, ...]:
        """Findings that question the data."""
        return tuple(remark for remark in self.remarks if remark.is_alarm)

    @property
    def verdict(self) -> Verdict:
        """One word for the group."""
        if self.claim is None:
            if self.reanalysis is None:
                return "nothing"
            return "unusable claim" if self.claim_fault else "no claim"
        if self.reanalysis is None:
            return self._alone()
        if self.explanation is None or not self.explanation.comparable:
            return "differs"
        if self.explanation.slips:
            return "slip"
        if self.claim.value_J_s < 0.0:
            return "differs"  # sizes are compared as logarithms, which do not see the sign
        if self.statement:
            return "statement" if self.explanation.ordinary else "differs"
        if self.explanation.agrees:
            return "agrees"
        return "scatter" if self.explanation.ordinary else "differs"

    def _alone(self) -> Verdict:
        if self.itself is None or not self.itself.comparable:
            return "alone"
        positive = self.claim is None or not self.claim.value_J_s < 0.0
        return "consistent" if self.itself.agrees and positive else "inconsistent"

    @property
    def deviation(self) -> float:
        """Claim over SI value minus one, else re-analysis over SI value minus one; or nan."""
        if self.planck is not None:
            return self.planck.relative_deviation
        return math.nan if self.reanalysis is None else self.reanalysis.relative_deviation
