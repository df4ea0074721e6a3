"""Groups of a class: sub-folders with data, and claims, found without leaving the folder."""

from __future__ import annotations

import os
import stat
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path

from hdetermine.classcheck.claim import Claim
from hdetermine.classcheck.claims import read_claim
from hdetermine.classcheck.claimtable import ClaimEntry, read_claim_table
from hdetermine.errors import InputError
from hdetermine.files.limits import MAX_FOLDER_ENTRIES, MAX_GROUPS, check_limit
from hdetermine.files.plaintext import plain_text, quoted

SHEET_NAME = "run.toml"
CLAIM_NAME = "claim.toml"
CLAIM_TABLES = ("claims.csv", "claims.xlsx")
RESULT_NAME = "class.json"


@dataclass(frozen=True, slots=True)
class Group:
    """One group of the class, before anything is analysed.

    Attributes
    ----------
    name : str
        Name of the folder, or as written in the claim table.
    folder : Path or None
        Folder with its data; None for a claim without data.
    sheet : Path or None
        The shared run sheet; None if the folder has its own.
    claim : Claim or None
        What it claims.
    claim_fault : str
        Why its claim cannot be used, one sentence; empty if it can, or there is none.
    data_fault : str
        Why its data cannot be analysed, one sentence; empty if nothing is known against it yet.
    """

    name: str
    folder: Path | None
    sheet: Path | None = None
    claim: Claim | None = None
    claim_fault: str = ""
    data_fault: str = ""


def find_groups(top: Path, out: Path) -> tuple[list[Group], tuple[str, ...]]:
    """Find the groups of a class.

    Parameters
    ----------
    top : Path
        Folder of the class.
    out : Path
        Where results go; it is no group, nor is any folder that holds earlier results.

    Returns
    -------
    groups : list of Group
        By name.
    remarks : tuple of str
        What was noticed about the class as a whole.

    Raises
    ------
    InputError
        If the folder, or a claim table, cannot be read, or there is no group at all.
    """
    folders = _folders(top, out)
    shared = top / SHEET_NAME
    sheet = shared if _is_own_file(shared, top) else None
    entries, remarks = _table_entries(top)
    check_limit(len(folders), MAX_GROUPS, quoted(top.name), "groups")
    by_name: dict[str, list[ClaimEntry]] = {}
    for entry in entries:
        by_name.setdefault(_key(entry.group), []).append(entry)
    spellings = Counter(_key(folder.name) for folder in folders)
    groups = []
    for folder in folders:
        key = _key(folder.name)
        group = _group(folder, top, sheet, by_name.get(key, []))
        if spellings[key] > 1 and key in by_name:
            fault = "Several folders have this name but for its spelling; rename all but one."
            group = replace(group, claim=None, claim_fault=fault)
        groups.append(group)
    for key in spellings:
        by_name.pop(key, None)
    for rows in by_name.values():
        groups.append(_without_data(rows, sheet))
    check_limit(len(groups), MAX_GROUPS, quoted(top.name), "groups")
    if not groups:
        raise InputError(
            f"{quoted(top.name)}: there is no group in it; a class folder has one sub-folder a "
            f"group, or a table {' or '.join(CLAIM_TABLES)}."
        )
    return sorted(groups, key=lambda group: _sort_key(group.name)), remarks


def _key(name: str) -> str:
    """Spelling under which a folder and a row of the claim table meet."""
    return " ".join(plain_text(name).split()).casefold()


def _sort_key(name: str) -> tuple[list[tuple[int, int, str]], str]:
    """Group 2 before group 10."""
    parts: list[tuple[int, int, str]] = []
    text = _key(name)[:200]
    digits = ""
    for character in text + "\0":
        if character in "0123456789":
            digits += character
            continue
        if digits:
            parts.append((0, int(digits), ""))
            digits = ""
        parts.append((1, 0, character))
    return parts, name


def _folders(top: Path, out: Path) -> list[Path]:
    try:
        entries = sorted(os.scandir(top), key=lambda entry: entry.name)
    except OSError as error:
        reason = (error.strerror or "bad name").lower()
        raise InputError(f"{quoted(top.name or str(top))}: it cannot be read ({reason}).") from None
    check_limit(len(entries), MAX_FOLDER_ENTRIES, quoted(top.name), "entries of the folder")
    found = []
    for entry in entries:
        path = top / entry.name
        if entry.name.startswith((".", "__")) or not entry.is_dir():
            continue
        if _same(path, out) or (path / RESULT_NAME).is_file():
            continue
        found.append(path)
    return found


def _same(one: Path, other: Path) -> bool:
    return os.path.realpath(one) == os.path.realpath(other)


def _is_own_file(path: Path, top: Path) -> bool:
    """Whether a regular file is there and does not lead out of its folder.

    Raises
    ------
    InputError
        If it is a link out of the folder.
    """
    try:
        if not stat.S_ISREG(path.stat().st_mode):
            return False
    except (OSError, ValueError):
        return False
    if not Path(os.path.realpath(path)).is_relative_to(os.path.realpath(top)):
        raise InputError(
            f"{plain_text(path.name)} in {quoted(top.name)} is a link that leads out of the "
            "folder; copy the file into it."
        )
    return True


def _table_entries(top: Path) -> tuple[list[ClaimEntry], tuple[str, ...]]:
    present = [top / name for name in CLAIM_TABLES if _is_own_file(top / name, top)]
    if len(present) > 1:
        raise InputError(
            f"{quoted(top.name)}: there are {' and '.join(CLAIM_TABLES)}; leave one of them."
        )
    return read_claim_table(present[0]) if present else ([], ())


def _group(folder: Path, top: Path, shared: Path | None, rows: Sequence[ClaimEntry]) -> Group:
    name = folder.name
    if not Path(os.path.realpath(folder)).is_relative_to(os.path.realpath(top)):
        return Group(
            name, None, data_fault="The folder is a link that leads out of the class; copy it."
        )
    claim, fault = _claim_of(folder, name, rows)
    try:
        own = _is_own_file(folder / SHEET_NAME, folder)
    except InputError as error:
        return Group(name, None, None, claim, fault, str(error))
    return Group(name, folder, None if own else shared, claim, fault)


def _claim_of(folder: Path, name: str, rows: Sequence[ClaimEntry]) -> tuple[Claim | None, str]:
    """Choose the one claim of a group, or say why there is none."""
    try:
        has_sheet = _is_own_file(folder / CLAIM_NAME, folder)
        if has_sheet and rows:
            raise InputError(
                f"The group has a {CLAIM_NAME} and a row in the claim table; leave one of them."
            )
        if has_sheet:
            return read_claim(folder / CLAIM_NAME, name, CLAIM_NAME), ""
    except InputError as error:
        return None, str(error)
    return _one_row(rows)


def _one_row(rows: Sequence[ClaimEntry]) -> tuple[Claim | None, str]:
    if len(rows) > 1:
        return None, f"The claim table names the group {len(rows)} times; leave one row."
    if not rows:
        return None, ""
    return rows[0].claim, rows[0].fault


def _without_data(rows: Sequence[ClaimEntry], sheet: Path | None) -> Group:
    claim, fault = _one_row(rows)
    return Group(rows[0].group, None, sheet, claim, fault)
