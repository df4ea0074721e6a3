"""Names of groups, made safe to show, and codes in their place."""

from __future__ import annotations

import base64
import hashlib
import hmac
import re
from collections.abc import Sequence

from hdetermine.classcheck.groups import CLAIM_NAME, SHEET_NAME, Group
from hdetermine.report.plaintext import plain

LONGEST_NAME = 60
_LONGEST_STEM = 40
_SAFE = re.compile(r"[a-z0-9][a-z0-9_-]*")
_DEVICES = re.compile(r"(con|prn|aux|nul|com[0-9]|lpt[0-9])")
HIDDEN_FILE = "[file]"
_SHORT = 4
"""Shorter words are replaced only where they stand alone."""


def group_codes(names: Sequence[str], key: int) -> list[str]:
    """Make a code for every name that stays when groups are added.

    The codes are digests of the names under the key, the seed of the command: without it they
    cannot be recomputed from a list of names.

    Parameters
    ----------
    names : sequence of str
        Names of the groups, all different.
    key : int
        Seed.

    Returns
    -------
    list of str
        ``G-`` and six or more characters.
    """
    digests = [
        base64.b32encode(
            hmac.new(str(key).encode(), name.encode("utf-8", "surrogatepass"), hashlib.sha256)
            .digest()
        ).decode()
        for name in names
    ]  # fmt: skip
    length = 6
    while len({digest[:length] for digest in digests}) < len(set(names)):
        length += 1
    return [f"G-{digest[:length]}" for digest in digests]


def shown_names(names: Sequence[str], codes: Sequence[str]) -> list[str]:
    """Make names safe to show on a page or a terminal, and tell them apart.

    An empty one becomes words; those that look the same once they are shortened get their code.
    """
    labels = [plain(name, LONGEST_NAME) or "(no name)" for name in names]
    return [
        label if labels.count(label) == 1 else f"{plain(label, LONGEST_NAME // 2)} ({code})"
        for label, code in zip(labels, codes, strict=True)
    ]


def file_stems(names: Sequence[str], codes: Sequence[str]) -> list[str]:
    """Make names of files that stay in their folder on every system, all different.

    A plain short name is kept, in lower case; any other is shortened to its plain characters
    and followed by its code.
    """
    stems: list[str] = []
    for name, code in zip(names, codes, strict=True):
        lower = name.lower()
        kept = _SAFE.fullmatch(lower) and len(lower) <= _LONGEST_STEM
        stem = lower
        if not kept or _DEVICES.fullmatch(lower) or stem in stems:
            plain_part = re.sub(r"[^a-z0-9]+", "-", lower[:_LONGEST_STEM]).strip("-")
            stem = f"{plain_part}-{code.lower()}".strip("-")
        stems.append(stem)
    return stems


def words_to_hide(group: Group) -> tuple[list[str], list[str]]:
    """List what could name a group in a message: its name and folder, and its files."""
    names = {group.name, plain(group.name, 10_000)}
    files: set[str] = set()
    if group.folder is not None:
        names.add(str(group.folder))
        try:
            paths = sorted(group.folder.iterdir())[:1000]
        except OSError:
            paths = []
        for path in paths:
            if path.name not in (SHEET_NAME, CLAIM_NAME):
                files |= {word for word in (path.name, path.stem) if len(word) >= _SHORT}
    return _longest_first(names), _longest_first(files)


def _longest_first(words: set[str]) -> list[str]:
    return sorted((word for word in words if word.strip()), key=lambda word: (-len(word), word))


def hide(text: str, names: Sequence[str], files: Sequence[str], code: str) -> str:
    """Put the code in place of every name, and a mark in place of every file."""
    for words, mark in ((names, code), (files, HIDDEN_FILE)):
        for word in words:
            pattern = re.escape(word)
            if len(word) < _SHORT:
                pattern = rf"(?<!\w){pattern}(?!\w)"
            text = re.sub(pattern, mark.replace("\\", ""), text, flags=re.IGNORECASE)
    return text
