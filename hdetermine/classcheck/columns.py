"""The class table: what each column is called and holds, for pages and files alike."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

from hdetermine.classcheck.classwork import ClassFinding, GroupRow
from hdetermine.classcheck.finding import VERDICT_WORDS
from hdetermine.classcheck.screens import Remark
from hdetermine.files.cells import Value


@dataclass(frozen=True, slots=True)
class FileColumn:
    """A column of ``class.csv`` and ``class.xlsx``."""

    header: str
    value: Callable[[GroupRow], Value]


def _number(value: float | None) -> float | None:
    return None if value is None or not math.isfinite(value) else value


def _claim(row: GroupRow, name: str) -> float | None:
    planck = row.finding.planck
    return None if planck is None else _number(getattr(planck, name))


def _data(row: GroupRow, name: str) -> float | None:
    reanalysis = row.finding.reanalysis
    return None if reanalysis is None else _number(getattr(reanalysis, name))


def slip_text(row: GroupRow) -> str:
    """Slips that are named, most specific first."""
    return "; ".join(slip.title for slip in row.finding.slips)


def alarm_text(row: GroupRow) -> str:
    """Alarms of the screening, each kind once, with the groups that they concern too."""
    kinds: dict[str, list[Remark]] = {}
    for alarm in row.finding.alarms:
        kinds.setdefault(alarm.title, []).append(alarm)
    return "; ".join(_kind_text(title, alarms) for title, alarms in kinds.items())


def _kind_text(title: str, alarms: list[Remark]) -> str:
    wheres = list(dict.fromkeys(alarm.where for alarm in alarms))
    place = f"{wheres[0]}{', …' if len(wheres) > 1 else ''}"
    partners = dict.fromkeys(alarm.partner for alarm in alarms if alarm.partner)
    return f"{title} ({place}{', as in ' if partners else ''}{', '.join(partners)})"


def fault_text(row: GroupRow) -> str:
    """Why data or claim could not be used."""
    return " ".join(fault for fault in (row.finding.data_fault, row.finding.claim_fault) if fault)


FILE_COLUMNS: tuple[FileColumn, ...] = (
    FileColumn("group", lambda row: row.label),
    FileColumn("verdict", lambda row: VERDICT_WORDS[row.finding.verdict]),
    FileColumn("h_data_J_s", lambda row: _data(row, "planck_J_s")),
    FileColumn("u_data_J_s", lambda row: _data(row, "standard_uncertainty_J_s")),
    FileColumn("U_data_J_s", lambda row: _data(row, "expanded_uncertainty_J_s")),
    FileColumn("k_data", lambda row: _data(row, "coverage_factor")),
    FileColumn("E_n_data", lambda row: _data(row, "E_n")),
    FileColumn("h_claim_J_s", lambda row: _claim(row, "claimed_J_s")),
    FileColumn("u_claim_J_s", lambda row: _claim(row, "claimed_u_J_s")),
    FileColumn("claim_over_data_minus_1", lambda row: _claim(row, "relative_difference")),
    FileColumn("claim_over_SI_minus_1", lambda row: _claim(row, "relative_deviation")),
    FileColumn("E_n_claim", lambda row: _claim(row, "E_n")),
    FileColumn("u_claim_over_u_data", lambda row: _claim(row, "uncertainty_ratio")),
    FileColumn("slips", slip_text),
    FileColumn("screening", alarm_text),
    FileColumn("scans_used", lambda row: _used(row)),
    FileColumn("not_usable", fault_text),
    FileColumn("feedback", lambda row: feedback_name(row)),
)
"""In the order in which they stand."""


def _used(row: GroupRow) -> str | None:
    found = row.finding.reanalysis
    return None if found is None else f"{found.used} of {found.scans}"


def feedback_name(row: GroupRow, suffix: str = "html") -> str:
    """Path of a group's page below the output folder."""
    return f"feedback/{row.stem}.{suffix}"


def count_verdicts(finding: ClassFinding) -> dict[str, int]:
    """How many groups have each verdict, in the order of the verdicts."""
    verdicts = [row.finding.verdict for row in finding.rows]
    return {
        words: verdicts.count(verdict)
        for verdict, words in VERDICT_WORDS.items()
        if verdict in verdicts
    }
