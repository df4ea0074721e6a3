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
