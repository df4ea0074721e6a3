"""The order of a class check, and nothing else."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path

from hdetermine.classcheck.anonymity import (
    file_stems,
    group_codes,
    hide,
    shown_names,
    words_to_hide,
)
from hdetermine.classcheck.finding import GroupFinding
from hdetermine.classcheck.groupcheck import GroupTask, forget_traces
from hdetermine.classcheck.groups import Group, find_groups
from hdetermine.classcheck.screens import FAMILY_CHANCE, Remark, raise_alarms
from hdetermine.classcheck.stretches import Stretch, find_stretches
from hdetermine.classcheck.workers import Progress, check_groups
from hdetermine.errors import InputError
from hdetermine.files.plaintext import quoted
from hdetermine.report.plaintext import plain

STRETCHES_SHOWN = 12
"""Identical stretches that are listed for one group; more say the same."""


@dataclass(frozen=True, slots=True)
class GroupRow:
    """A group, ready to be shown.

    Attributes
    ----------
    label : str
        Its name made safe, or its code.
    stem : str
        Name of its page without the suffix.
    finding : GroupFinding
        What was found.
    """

    label: str
    stem: str
    finding: GroupFinding


@dataclass(frozen=True, slots=True)
class ClassFinding:
    """A whole class, ready to be shown.

    Attributes
    ----------
    title : str
        Name of the folder, or "Class" if names are hidden.
    rows : tuple of GroupRow
        By name, or by code if names are hidden.
    remarks : tuple of str
        What was noticed about the class as a whole.
    anonymous : bool
        True if codes stand in place of names.
    seed : int or None
        Seed of the re-analysis; None if it is the key of the codes and stays unsaid.
    """

    title: str
    rows: tuple[GroupRow, ...]
    remarks: tuple[str, ...]
    anonymous: bool
    seed: int | None


def check_class(
    top: Path,
    out: Path,
    *,
    jobs: int,
    seed: int,
    anonymise: bool,
    progress: Progress,
) -> ClassFinding:
    """Check a class.

    Parameters
    ----------
    top : Path
        Folder with a sub-folder a group.
    out : Path
        Where results will go; it is no group.
    jobs : int
        Processes at once.
    seed : int
        Seed of the re-analyses, and key of the codes.
    anonymise : bool
        Put codes in place of names, everywhere.
    progress : callable
        Called as ``progress(stage, done, total)``.

    Returns
    -------
    ClassFinding

    Raises
    ------
    InputError
        If there is no class to check.
    """
    if not top.is_dir():
        raise InputError(f"{quoted(str(top))}: there is no such folder; name the class's folder.")
    groups, remarks = find_groups(top, out)
    tasks = [GroupTask(number, group, seed) for number, group in enumerate(groups)]
    found = check_groups(tasks, jobs, progress)
    names = [group.name for group in groups]
    codes = group_codes(names, seed)
    labels = codes if anonymise else shown_names(names, codes)
    stems = [code.lower() for code in codes] if anonymise else file_stems(names, codes)
    progress("comparing counts", 0, 1)
    screened = _screened(found, labels)
    if anonymise:
        screened = [
            _anonymous(finding, group, code)
            for finding, group, code in zip(screened, groups, codes, strict=True)
        ]
    rows = [
        GroupRow(label, stem, finding)
        for label, stem, finding in zip(labels, stems, screened, strict=True)
    ]
    if anonymise:
        rows.sort(key=lambda row: row.label)
    return ClassFinding(
        title="Class" if anonymise else plain(top.resolve().name, 80) or "Class",
        rows=tuple(rows),
        remarks=remarks,
        anonymous=anonymise,
        seed=None if anonymise else seed,
    )


def _screened(found: Sequence[GroupFinding], labels: Sequence[str]) -> list[GroupFinding]:
    """Raise the alarms, now that the size of the class is known."""
    number_of_looks = Counter(look.family for finding in found for look in finding.looks)
    traces = [trace for finding in found for trace in finding.traces]
    stretches = find_stretches(traces, FAMILY_CHANCE)
    by_group: dict[int, list[Remark]] = {}
    for stretch in stretches:
        pair = (traces[stretch.first], traces[stretch.second])
        for mine, other, start in (
            (pair[0], pair[1], stretch.first_start),
            (pair[1], pair[0], stretch.second_start),
        ):
            same_group = mine.group == other.group
            if same_group and mine is not pair[0]:
                continue
            whose = "the same group" if same_group else "another group"
            partner = "" if same_group else labels[other.group]
            first_deg = float(mine.millidegrees[start]) / 1e3
            remark = _stretch_remark(stretch, mine.label, f"{other.label} of {whose}", first_deg)
            by_group.setdefault(mine.group, []).append(replace(remark, partner=partner))
    screened = []
    for number, finding in enumerate(found):
        alarms: list[Remark] = []
        for family in dict.fromkeys(look.family for look in finding.looks):
            looks = [look for look in finding.looks if look.family == family]
            alarms += raise_alarms(looks, number_of_looks[family])
        alarms += by_group.get(number, [])[:STRETCHES_SHOWN]
        screened.append(replace(forget_traces(finding), remarks=(*alarms, *finding.remarks)))
    return screened


def _stretch_remark(stretch: Stretch, where: str, other: str, first_deg: float) -> Remark:
    place = f"from {first_deg:g}° on"
    same = "" if stretch.same_angles else ", at other angles"
    return Remark(
        where=where,
        title="identical counts",
        sentence=f"{stretch.length} successive counts {place} are the same as in {other}{same}. "
        "Independent counting hardly ever repeats itself like that; one record used in both "
        "places does.",
        statistic=float(stretch.length),
        figure="successive equal counts",
        threshold=f"chance below {FAMILY_CHANCE:.1g} in the class",
        class_chance=stretch.probability,
    )


def _anonymous(finding: GroupFinding, group: Group, code: str) -> GroupFinding:
    """Put the code in place of the name, and hide the names of files."""
    names, files = words_to_hide(group)
    claim = finding.claim
    return replace(
        finding,
        name=code,
        claim=None if claim is None else replace(claim, group=code),
        data_fault=hide(finding.data_fault, names, files, code),
        claim_fault=hide(finding.claim_fault, names, files, code),
        remarks=tuple(
            remark
            if remark.title != "no cutoff"
            else replace(remark, sentence=hide(remark.sentence, names, files, code))
            for remark in finding.remarks
        ),
    )
