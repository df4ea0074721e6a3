"""Text from files, made safe to show: nothing that steers a terminal or reverses a line."""

from __future__ import annotations

import unicodedata

# Bidirectional controls, zero-width space and joiners, byte-order mark, annotation and tag
# characters: invisible, and able to make a text read as something else.
_INVISIBLE = (
    {0x061C, 0x180E, 0xFEFF}
    | set(range(0x200B, 0x2010))
    | set(range(0x202A, 0x202F))
    | set(range(0x2060, 0x2070))
    | set(range(0xFFF9, 0xFFFC))
    | set(range(0xE0000, 0xE0080))
)


def plain_text(text: str) -> str:
    """Remove control characters, bidirectional overrides and line breaks.

    Line breaks and tabs become single spaces; everything else that is not visible text goes.

    Parameters
    ----------
    text : str
        Any text.

    Returns
    -------
    str
        One line without leading or trailing blanks.
    """
    kept: list[str] = []
    for character in text:
        if character in "\t\n\r\v\f\x1c\x1d\x1e\x1f\x85\u2028\u2029":
            kept.append(" ")
        elif ord(character) not in _INVISIBLE and unicodedata.category(character) not in (
            "Cc",
            "Cs",
        ):
            kept.append(character)
    return "".join(kept).strip()


def quoted(value: object, longest: int = 60) -> str:
    """Show a piece of input inside an error message: plain, short, in quotation marks."""
    text = plain_text(str(value)[: 4 * longest])
    if len(text) > longest:
        text = text[: longest - 1] + "…"
    return f'"{text}"'
