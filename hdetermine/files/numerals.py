"""Numbers as people write them: decimal point or comma, and never a guess which."""

from __future__ import annotations

import re
from collections.abc import Iterable
from typing import Literal

from hdetermine.files.plaintext import quoted

Decimal = Literal["point", "comma"]

_EXPONENT = re.compile(r"[eE][+-]?[0-9]{1,4}$")
_SPACES = "'’ \u00a0\u2009\u202f"
_SPACED = re.compile(rf"[0-9]{{1,3}}(?:[{_SPACES}][0-9]{{3}})+(?![0-9])")
_SHAPE = re.compile(
    r"[+-]?(?:[0-9]+[.,]?[0-9]*|[.,][0-9]+"
    rf"|[0-9]{{1,3}}(?:[.,{_SPACES}][0-9]{{3}})+(?:[.,][0-9]*)?)(?:[eE][+-]?[0-9]{{1,4}})?"
)
_PLAIN = re.compile(r"[+-]?[0-9]{1,40}(?:\.[0-9]{0,40})?")
_LONGEST = 60


def tidy(text: str) -> str:
    """Strip blanks and a degree sign, and turn a true minus sign into a hyphen."""
    return text.strip().removesuffix("°").rstrip().replace("\u2212", "-")


def looks_numeric(text: str) -> bool:
    """Whether a cell has the shape of one number, whatever its decimal mark."""
    text = tidy(text)
    return len(text) <= _LONGEST and _SHAPE.fullmatch(text) is not None


class Marks:
    """What the cells of a table say about their decimal mark.

    Attributes
    ----------
    certain : dict of str to str
        A cell that settles it, by mark (``"point"``, ``"comma"``).
    unclear : dict of str to str
        A cell such as ``1,234`` that could be either, by the mark it carries.
    grouped : str
        A cell with a thousands separator, such as ``1,234.5``; empty if there is none.
    """

    def __init__(self) -> None:
        self.certain: dict[str, str] = {}
        self.unclear: dict[str, str] = {}
        self.grouped = ""

    def note(self, cells: Iterable[str], below_thousand: bool = False) -> None:
        """Look at cells; `below_thousand` if none of them can reach 1000 (an angle)."""
        for cell in cells:
            points, commas = cell.count("."), cell.count(",")
            if not points and not commas:
                continue
            if points + commas == 1 and ("point" if points else "comma") in self.certain:
                continue
            if not looks_numeric(cell):
                continue  # refused later, by its place
            text = tidy(cell).lstrip("+-")
            if points + commas > 1:
                self.grouped = self.grouped or cell
                continue
            mark = "point" if points else "comma"
            before, after = text.split("." if points else ",")
            could_group = len(after) == 3 and 1 <= len(before) <= 3 and before[0] != "0"
            if could_group and not below_thousand:
                self.unclear.setdefault(mark, cell)
            else:
                self.certain.setdefault(mark, cell)

    def settle(self) -> Decimal:
        """Decide on the decimal mark.

        Raises
        ------
        ValueError
            With a message fragment, if the cells leave it open or contradict each other.
        """
        if self.grouped:
            raise ValueError(f"{quoted(self.grouped)} has a thousands separator")
        if len(self.certain) == 2:
            raise ValueError(
                f"{quoted(self.certain['point'])} has a decimal point and "
                f"{quoted(self.certain['comma'])} a decimal comma"
            )
        for mark, cell in self.unclear.items():
            if mark not in self.certain:
                raise ValueError(f"{quoted(cell)} may be a thousand and more or a decimal number")
        return "comma" if "comma" in self.certain else "point"


def parse_numeral(text: str, decimal: Decimal) -> float:
    """Read one number.

    Parameters
    ----------
    text : str
        The cell.
    decimal : {"point", "comma"}
        Its decimal mark; the other mark may group thousands, as may spaces and apostrophes.

    Raises
    ------
    ValueError
        If it is not one number.
    """
    mark, other = (".", ",") if decimal == "point" else (",", ".")
    if other not in text and _PLAIN.fullmatch(plain := text.replace(mark, ".")):
        return float(plain)
    number = tidy(text)
    if not looks_numeric(number):
        raise ValueError("not a number")
    number = _SPACED.sub(lambda match: re.sub(rf"[{_SPACES}]", "", match[0]), number)
    whole, found, rest = number.partition(mark)
    if other in whole:
        if not re.fullmatch(rf"[+-]?[0-9]{{1,3}}(?:{re.escape(other)}[0-9]{{3}})+", whole):
            raise ValueError("not a number")
        whole = whole.replace(other, "")
    return float(whole + (f".{rest}" if found else ""))


def decimals_of(text: str, decimal: Decimal) -> int:
    """Digits after the decimal mark that are not trailing zeros."""
    mantissa = _EXPONENT.sub("", tidy(text))
    exponent = tidy(text)[len(mantissa) + 1 :]
    digits = mantissa.partition("." if decimal == "point" else ",")[2].rstrip("0")
    return max(0, len(digits) - int(exponent or 0))
