"""Text from the run as both reports show it: plain, on one line, of bounded length."""

from __future__ import annotations

import re

from hdetermine.files.plaintext import plain_text
from hdetermine.report.rounding import MINUS

LONGEST = 300


def plain(text: str, longest: int = LONGEST) -> str:
    """Return text on one line that steers neither a page nor a terminal.

    Markup characters stay: escaping them is the business of whoever writes the page.

    Parameters
    ----------
    text : str
        Anything.
    longest : int
        Longest text returned, characters; a longer one ends in an ellipsis.

    Returns
    -------
    str
    """
    shown = plain_text(text)
    return shown if len(shown) <= longest else shown[: longest - 1].rstrip() + "…"


def sentence(text: str, longest: int = 500) -> str:
    """Return a sentence of the program's own, its negative numbers with a true minus."""
    return re.sub(r"(?<![\w.\-])-(?=\d)", MINUS, plain(text, longest))


def remark(text: str, longest: int = 500) -> str:
    """Return a remark as a sentence that can stand alone: a capital in front, a stop behind.

    A first word that is no plain word (a file, a scan) keeps its spelling.
    """
    said = sentence(text, longest).replace(" x ", " × ")
    first, _, rest = said.partition(" ")
    if rest and first.isalpha() and first.islower():
        said = said[0].upper() + said[1:]
    return said if not said or said[-1] in ".!?…" else f"{said}."
