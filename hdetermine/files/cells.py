"""Cells of a table that people open in a spreadsheet: numbers exact, text inert."""

from __future__ import annotations

import csv
import io
import math
from collections.abc import Iterable, Sequence

from hdetermine.files.plaintext import plain_text

Value = str | float | int | bool | None

# Characters that make a spreadsheet take a cell for a formula, with their full-width twins.
_FORMULA = "=+-@\uff1d\uff0b\uff0d\uff20"


def inert_text(text: str) -> str:
    """Text that no spreadsheet takes for a formula and no terminal for a command.

    Control characters go, and an apostrophe comes before a leading ``=``, ``+``, ``-`` or ``@``.
    """
    plain = plain_text(text)
    return f"'{plain}" if plain[:1] and plain[0] in _FORMULA else plain


def cell_text(value: Value) -> str:
    """A value as a cell: the shortest text that gives a float back exactly; nan and None empty."""
    if value is None:
        return ""
    if isinstance(value, str):
        return inert_text(value)
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, int):
        return str(value)
    return "" if math.isnan(value) else repr(float(value))


def csv_bytes(header: Sequence[str], rows: Iterable[Sequence[Value]]) -> bytes:
    """A comma-separated table in UTF-8, lines ended by a line feed."""
    stream = io.StringIO()
    writer = csv.writer(stream, lineterminator="\n")
    writer.writerow(header)
    writer.writerows([cell_text(value) for value in row] for row in rows)
    return stream.getvalue().encode("utf-8")
