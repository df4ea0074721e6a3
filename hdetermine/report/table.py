"""Tables as both reports and the terminal show them: text already set, raw numbers beside it."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from hdetermine.report.plaintext import plain
from hdetermine.report.rounding import (
    MINUS,
    THIN,
    grouped,
    two_digits,
    typeset_figure,
    typeset_plus_minus,
    typeset_shorthand,
    unbroken,
)

GREEK = {
    "alpha": "α", "beta": "β", "gamma": "γ", "delta": "δ", "epsilon": "ε", "kappa": "κ",
    "lambda": "λ", "mu": "μ", "phi": "φ", "rho": "ρ", "sigma": "σ", "tau": "τ", "theta": "θ",
}  # fmt: skip
NONE = "–"
"""What an empty cell shows."""


@dataclass(frozen=True, slots=True)
class Cell:
    """One cell: what is shown, and the number behind it.

    Attributes
    ----------
    text : str
        Set text, data and never markup.
    number : float or None
        The unrounded number as the record holds it (a ratio where the text is in per cent);
        None for words.
    detail : str
        More, in smaller type; may be empty.
    subscript : str
        Set below the end of `text`; may be empty.
    """

    text: str
    number: float | None = None
    detail: str = ""
    subscript: str = ""


@dataclass(frozen=True, slots=True)
class Column:
    """Heading of a column; `numeric` columns are set flush right."""

    heading: str
    numeric: bool = False


@dataclass(frozen=True, slots=True)
class Group:
    """Rows that belong together under one heading; an empty heading is not shown."""

    heading: str
    rows: tuple[tuple[Cell, ...], ...]


@dataclass(frozen=True, slots=True)
class Table:
    """A table with a caption; the first cell of a row is its heading.

    Attributes
    ----------
    key : str
        Name, fit for an identifier.
    caption : str
        What the table holds.
    columns : tuple of Column
        Headings, units included.
    groups : tuple of Group
        One group where nothing is grouped.
    note : str
        What a reader must know to read it; may be empty.
    """

    key: str
    caption: str
    columns: tuple[Column, ...]
    groups: tuple[Group, ...]
    note: str = ""

    @property
    def rows(self) -> tuple[tuple[Cell, ...], ...]:
        """All rows, in their order."""
        return tuple(row for group in self.groups for row in group.rows)


def table(
    key: str,
    caption: str,
    headings: Sequence[str],
    rows: Sequence[Sequence[Cell]],
    *,
    numeric: Sequence[int] = (),
    note: str = "",
) -> Table:
    """Make a table of one group; `numeric` lists the columns that hold numbers."""
    columns = tuple(Column(heading, i in numeric) for i, heading in enumerate(headings))
    return Table(key, caption, columns, (Group("", tuple(tuple(row) for row in rows)),),
                 unbroken(note))  # fmt: skip


# --- cells ------------------------------------------------------------------------------------


def words(text: str, detail: str = "", *, longest: int = 300) -> Cell:
    """Words, from the run or ours."""
    return Cell(plain(text, longest) or NONE, None, plain(detail, longest))


def symbol(text: str) -> Cell:
    """A symbol in plain characters, ``delta_r`` or ``t1``: Greek by name, one subscript."""
    name, mark, below = plain(text, 40).partition("_")
    if not mark:
        name = name.rstrip("0123456789") or name
        below = plain(text, 40).removeprefix(name)
    letter = GREEK.get(name, name) or NONE
    return Cell(letter, None, "", GREEK.get(below, below))


def with_uncertainty(value: float, uncertainty: float, unit: str = "") -> Cell:
    """Value with its uncertainty in parentheses, ``6.626(30) × 10⁻³⁴ J s``."""
    if not (math.isfinite(value) and math.isfinite(uncertainty)):
        return Cell(NONE)
    # Unbroken: a narrow column must not part a number from its power of ten.
    text = typeset_shorthand(value, uncertainty).replace(" ", "\N{NO-BREAK SPACE}")
    return Cell(united(text, unit), value)


def plus_minus(value: float, uncertainty: float, unit: str = "") -> Cell:
    """Value plus or minus an uncertainty, ``(6.626 ± 0.059) × 10⁻³⁴ J s``."""
    if not (math.isfinite(value) and math.isfinite(uncertainty)):
        return Cell(NONE)
    text = typeset_plus_minus(value, uncertainty).replace(" ", "\N{NO-BREAK SPACE}")
    if unit and not text.startswith("("):
        text = f"({text})"
    return Cell(united(text, unit), value)


def digits(number: float | None, significant: int = 2, unit: str = "") -> Cell:
    """A single number with so many significant digits; infinity as ∞."""
    if number is None or math.isnan(number):
        return Cell(NONE)
    if math.isinf(number):
        return Cell(f"{MINUS if number < 0 else ''}∞", number)
    text = typeset_figure(number, significant).replace(" ", "\N{NO-BREAK SPACE}")
    return Cell(united(text, unit), number)


def decimals(number: float | None, places: int, unit: str = "", *, signed: bool = False) -> Cell:
    """A single number with so many decimal places; `signed` shows a plus sign too."""
    if number is None or not math.isfinite(number):
        return digits(number)
    text = grouped(f"{number:.{places}f}")
    if float(f"{number:.{places}f}") == 0.0:
        text = text.removeprefix(MINUS)
    elif signed and number > 0.0:
        text = f"+{text}"
    return Cell(united(text, unit), number)


def percent(share: float, places: int = 2) -> Cell:
    """A signed ratio in per cent."""
    return Cell(decimals(100.0 * share, places, "%", signed=True).text, share)


def in_units(value: float, uncertainty: float, exponent: int) -> Cell:
    """Value with its uncertainty in parentheses, in units of a power of ten."""
    if not (math.isfinite(value) and math.isfinite(uncertainty)):
        return Cell(NONE)
    parts = two_digits(value, uncertainty, exponent=exponent)
    last = f"({parts.last_digits})" if parts.last_digits else ""
    return Cell(grouped(parts.value) + last, value)


def interval(ends: tuple[float, float], uncertainty: float, exponent: int) -> Cell:
    """Both ends of an interval, rounded as a value with that uncertainty would be."""
    low, high = (grouped(two_digits(end, uncertainty, exponent=exponent).value) for end in ends)
    return Cell(f"{low} to {high}", ends[0])


def united(text: str, unit: str) -> str:
    """Number and unit with a narrow no-break space; the unit 1 is not written.

    The degree of angle stands without a space (The International System of Units, 9th ed.
    (2019), 5.4.3).
    """
    if unit in ("", "1"):
        return text
    return f"{text}{'' if unit == 'deg' else THIN}{spelled(unit)}"


_SPELLED = {
    "deg": "°",
    "degC": "°C",
    "us": "µs",
    "1/K": "K⁻¹",
    "J s": "J\N{NO-BREAK SPACE}s",
    "eV s": "eV\N{NO-BREAK SPACE}s",
    "pm kV": "pm\N{NO-BREAK SPACE}kV",
    "1": "1",
}


def spelled(unit: str) -> str:
    """Unit as the SI brochure writes it."""
    return _SPELLED.get(unit, unit)
