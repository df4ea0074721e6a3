"""Text from the run as both reports show it: plain, on one line, of bounded length."""

from __future__ import annotations

from hdetermine.files.plaintext import plain_text

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
