"""Numbers as people write them, with the place of their last digit.

How far a number was rounded is evidence: a claim of 6.6e-34 says less than one of 6.60e-34.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from decimal import Decimal, InvalidOperation

from hdetermine.errors import InputError
from hdetermine.files.plaintext import quoted

_SUPERSCRIPT = str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻⁺", "0123456789-+")
_LOOKALIKE = str.maketrans({"−": "-", "–": "-", "\N{NO-BREAK SPACE}": " "})
_POWER = re.compile(r"\s*[x×·*]\s*10\s*(?:\^|\*\*)?\s*\(?\s*([-+]?[0-9]{1,4})\s*\)?$")
_PLAIN = re.compile(
    r"(?P<whole>[-+]?[0-9]{1,40})(?:[.,](?P<fraction>[0-9]{0,40}))?"
    r"(?:\((?P<last>[0-9]{1,6})\))?(?:[eE](?P<power>[-+]?[0-9]{1,4}))?"
)
_THOUSANDS = re.compile(r"[-+]?[1-9][0-9]{0,2}[.,][0-9]{3}")
LARGEST = 1e300
"""Beyond this no figure of a laboratory lies, and sums of squares stay finite below it."""


@dataclass(frozen=True, slots=True)
class Numeral:
    """A number as written.

    Attributes
    ----------
    value : float
        The number.
    step : float
        One unit of its last written place; zero if the writing does not show it (a number
        typed into a spreadsheet cell).
    uncertainty : float or None
        From the shorthand ``6.63(4)e-34``, if it was used.
    """

    value: float
    step: float
    uncertainty: float | None = None

    @property
    def rounding_u(self) -> float:
        """Standard uncertainty of rounding to the last place (rectangular, JCGM 100, 4.3.7)."""
        return self.step / math.sqrt(12.0)


def read_numeral(text: str, where: str) -> Numeral:
    """Read a number written by a person.

    Accepted are ``6.63e-34``, ``6,63E-34``, ``6.63(4)e-34``, ``6.63 x 10^-34`` and
    ``6.63·10⁻³⁴``. A comma or a point in front of exactly three last digits with nothing else
    to go by may separate thousands: that is asked, not guessed.

    Parameters
    ----------
    text : str
        What stands in the cell.
    where : str
        For the message: file, row and column.

    Returns
    -------
    Numeral

    Raises
    ------
    InputError
        If it is no number, not finite, or ambiguous.
    """
    bare = text.strip().translate(_LOOKALIKE)
    straight = re.sub(
        "[⁰¹²³⁴⁵⁶⁷⁸⁹⁻⁺]+", lambda match: "^" + match.group().translate(_SUPERSCRIPT), bare
    ).replace("^^", "^")
    straight = _POWER.sub(r"e\1", straight)
    match = _PLAIN.fullmatch(straight)
    if match is None or not straight.isascii():
        raise InputError(
            f"{where}: {quoted(text)} is not a number; write it like 6.63e-34, with a decimal "
            "point and no thousands separators."
        )
    if "," in straight and _THOUSANDS.fullmatch(straight):
        raise InputError(
            f"{where}: {quoted(text)} may mean a decimal fraction or thousands; write it with a "
            "decimal point."
        )
    return _numeral(match, text, where)


def _numeral(match: re.Match[str], text: str, where: str) -> Numeral:
    fraction = match["fraction"] or ""
    power = int(match["power"] or 0)
    try:
        value = float(Decimal(f"{match['whole']}.{fraction or '0'}e{power}"))
        step = float(Decimal(f"1e{power - len(fraction)}"))
    except (InvalidOperation, OverflowError) as error:
        raise InputError(f"{where}: {quoted(text)} is out of range; check its exponent.") from error
    last = match["last"]
    if abs(value) > LARGEST or (value == 0.0 and match["whole"].strip("+-0") + fraction.strip("0")):
        raise InputError(f"{where}: {quoted(text)} is out of range; check its exponent.")
    return Numeral(value, step, float(int(last)) * step if last else None)


def plain_numeral(value: float, where: str) -> Numeral:
    """Take a number that comes without its writing (a spreadsheet cell).

    Raises
    ------
    InputError
        If it is not finite or out of range.
    """
    if not math.isfinite(value) or abs(value) > LARGEST:
        raise InputError(f"{where}: {value!r} is not a usable number; check the cell.")
    return Numeral(float(value), 0.0)
