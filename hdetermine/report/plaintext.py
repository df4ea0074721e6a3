"""Plain text from strangers: what a run sheet says, made fit to be shown."""

from __future__ import annotations

import unicodedata

MAXIMUM_LENGTH = 300
REPLACEMENT = "\N{REPLACEMENT CHARACTER}"
# Joiners that Persian and Indic scripts cannot do without; they change no direction.
KEPT = frozenset("\N{ZERO WIDTH NON-JOINER}\N{ZERO WIDTH JOINER}")


def plain(text: str, maximum_length: int = MAXIMUM_LENGTH) -> str:
    """Return text on one line without anything that steers a page or a terminal.

    Control characters (so every terminal escape), direction overrides and isolates, lone
    surrogates, private-use and unassigned code points become U+FFFD; runs of white space become
    one space; text longer than `maximum_length` ends in an ellipsis. Markup characters stay:
    escaping them is the business of whoever writes the page.

    Parameters
    ----------
    text : str
        Anything.
    maximum_length : int
        Longest text returned, characters.

    Returns
    -------
    str
        Safe to print, and to hand to a template as data.

    References
    ----------
    Unicode Standard Annex 9 (bidirectional controls, category Cf) and chapter 4.5 (general
    categories).
    """
    line = " ".join(text[: 4 * maximum_length].split())
    shown = "".join(
        REPLACEMENT if unicodedata.category(one)[0] == "C" and one not in KEPT else one
        for one in line
    )
    if len(shown) > maximum_length or len(text) > 4 * maximum_length:
        return shown[: maximum_length - 1].rstrip() + "…"
    return shown
