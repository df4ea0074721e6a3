"""One group from its files to its finding: what a worker process does."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from hdetermine.classcheck.alignment import align
from hdetermine.classcheck.arithmetic import line_through_origin
from hdetermine.classcheck.claim import Claim
from hdetermine.classcheck.claimalone import (
    check_alone,
    explain_number_alone,
    planck_of_cutoffs_J_s,
)
from hdetermine.classcheck.comparison import compare_cutoffs, compare_planck
from hdetermine.classcheck.evidence import Evidence, gather_evidence
from hdetermine.classcheck.explanation import explain
from hdetermine.classcheck.finding import GroupFinding, Reanalysis, Shortcut
from hdetermine.classcheck.groups import Group
from hdetermine.classcheck.readingslips import WORDINGS
from hdetermine.classcheck.screening import (
    scan_label,
    screen_counts,
    screen_scans,
    screen_voltages,
)
from hdetermine.classcheck.statement import statement_slips
from hdetermine.classcheck.stretches import CountTrace, make_trace
from hdetermine.determination import determine
from hdetermine.errors import InputError
from hdetermine.files.apparatus import apparatus_of
from hdetermine.files.limits import MAX_SHEET_BYTES
from hdetermine.files.runfolder import read_bytes
from hdetermine.files.runsheet import parse_sheet, read_run
from hdetermine.files.sheetcheck import check_sheet
from hdetermine.physics.constants import PLANCK_PER_SLOPE
from hdetermine.records.apparatus import Crystal
from hdetermine.records.results import Determination
from hdetermine.records.run import Run

UNKNOWN_FWHM_DEG = 0.5
"""Resolution assumed for the screening of counts that gave no h."""
NEGLECTED_DEG = 0.02
"""A zero offset below this is not worth a line on the page."""


@dataclass(frozen=True, slots=True)
class GroupTask:
    """What a worker needs to know.

    Attributes
    ----------
    number : int
        Number of the group in the class.
    group : Group
        The group.
    seed : int
        Seed of the re-analysis.
    """

    number: int
    group: Group
    seed: int


def check_group(task: GroupTask) -> GroupFinding:
    """Read, re-analyse, screen and explain one group; a fault is part of the finding."""
    group = task.group
    claim = group.claim
    if group.folder is None:
        fault = group.data_fault or "There are no data: no folder bears this name."
        return _without_reanalysis(group, fault, _shared_crystal(group.sheet))
    try:
        run = read_run(group.folder, group.sheet)
    except InputError as error:
        return _without_reanalysis(group, str(error), _shared_crystal(group.sheet))
    traces = _traces(task.number, run)
    try:
        determination = determine(run, task.seed, posterior=False, monte_carlo=False)
    except InputError as error:
        finding = _without_reanalysis(group, str(error), run.apparatus.crystal)
        zero = run.apparatus.goniometer.zero_deg
        return replace(
            finding,
            looks=tuple(
                screen_counts(run, zero.value, zero.standard_uncertainty, UNKNOWN_FWHM_DEG)
            ),
            remarks=tuple(screen_scans(run, ())),
            traces=traces,
            simulated=bool(run.truth),
        )
    evidence = gather_evidence(determination)
    scale = determination.angle_scale
    looks = screen_counts(
        run, scale.zero.value, scale.zero.standard_uncertainty, scale.resolution.value
    )
    looks += screen_voltages(determination)
    return GroupFinding(
        name=group.name,
        reanalysis=_reanalysis(determination),
        claim=claim,
        claim_fault=group.claim_fault,
        planck=None
        if claim is None or claim.h is None
        else compare_planck(claim, evidence.planck_J_s, evidence.planck_u_J_s),
        cutoffs=compare_cutoffs(claim, evidence),
        explanation=None if claim is None else explain(align(claim, evidence), claim.unit),
        statement=() if claim is None else statement_slips(claim),
        shortcuts=_shortcuts(evidence),
        looks=tuple(looks),
        remarks=tuple(screen_scans(run, determination.cutoffs)),
        traces=traces,
        simulated=bool(run.truth),
    )


def _without_reanalysis(group: Group, fault: str, crystal: Crystal | None) -> GroupFinding:
    """Check what can be checked without data: the claim against itself."""
    claim = group.claim
    finding = GroupFinding(
        name=group.name, data_fault=fault, claim=claim, claim_fault=group.claim_fault
    )
    if claim is None:
        return finding
    itself = check_alone(claim, crystal)
    if not itself.comparable and claim.h is not None:
        itself = explain_number_alone(claim, crystal)
    return replace(
        finding,
        planck=None if claim.h is None else compare_planck(claim, np.nan, np.nan),
        cutoffs=compare_cutoffs(claim, None),
        itself=itself,
        planck_of_cutoffs_J_s=planck_of_cutoffs_J_s(claim, crystal),
        statement=statement_slips(claim),
    )


def _shared_crystal(sheet: Path | None) -> Crystal | None:
    """Crystal of the shared run sheet, if there is one that can be read."""
    if sheet is None:
        return None
    try:
        content = parse_sheet(read_bytes(sheet, sheet.name, MAX_SHEET_BYTES), sheet.name)
        apparatus, _ = apparatus_of(check_sheet(content, sheet.name), sheet.name)
    except InputError:
        return None  # every group without a sheet of its own reports what is wrong with it
    return apparatus.crystal


def _traces(number: int, run: Run) -> tuple[CountTrace, ...]:
    return tuple(
        make_trace(number, i, scan_label(scan, i), scan.reading_deg, scan.counts)
        for i, scan in enumerate(run.scans, 1)
    )


def _reanalysis(determination: Determination) -> Reanalysis:
    h, comparison = determination.h, determination.comparison
    return Reanalysis(
        planck_J_s=h.value_J_s,
        standard_uncertainty_J_s=h.standard_uncertainty_J_s,
        expanded_uncertainty_J_s=h.expanded_uncertainty_J_s,
        coverage_factor=h.coverage_factor,
        relative_deviation=comparison.relative_deviation,
        E_n=comparison.E_n,
        scans=len(determination.cutoffs),
        used=len(determination.used),
    )


def _shortcuts(evidence: Evidence) -> tuple[Shortcut, ...]:
    """What h the usual shortcuts would give with the same counts."""
    found = []
    for code, source in (
        ("straight_line_crossing", "crossing"),
        ("first_rising_point", "first_rise"),
    ):
        columns = evidence.shortcuts_deg.get(source, ())
        if columns:
            angle = np.median(np.array(columns), axis=0)
            found.append(Shortcut(WORDINGS[code].title, _planck(evidence, angle)))
    if abs(evidence.zero_deg) > NEGLECTED_DEG:
        angle = evidence.angle_deg + evidence.zero_deg
        found.append(Shortcut(WORDINGS["zero_offset"].title, _planck(evidence, angle)))
    return tuple(shortcut for shortcut in found if np.isfinite(shortcut.planck_J_s))


def _planck(evidence: Evidence, angle_deg: Sequence[float] | np.ndarray[tuple[int, ...],
            np.dtype[np.float64]]) -> float:  # fmt: skip
    wavelength = 2.0 * evidence.spacing_pm * np.sin(np.radians(angle_deg))
    return float(line_through_origin(wavelength, evidence.supplied_kV)) * PLANCK_PER_SLOPE


def forget_traces(finding: GroupFinding) -> GroupFinding:
    """Drop the counts once they have been compared."""
    return replace(finding, traces=())


def unexpected(group: Group, what: str) -> GroupFinding:
    """Make the finding of a group whose analysis ended in a way that it should not."""
    fault = f"The analysis ended unexpectedly ({what}); please report it with these files."
    claim: Claim | None = group.claim
    return GroupFinding(
        name=group.name, data_fault=fault, claim=claim, claim_fault=group.claim_fault
    )
