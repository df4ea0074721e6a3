"""Rounding: the uncertainty to two significant digits, the value to the same place.

JCGM 100:2008, 7.2.6 (at most two significant digits) and 7.2.2 (the forms of writing). All
rounding is done in decimal arithmetic on the shortest decimal that names the float, half to
even, so that a table and a sentence cannot disagree.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from decimal import ROUND_HALF_EVEN, Context, Decimal

NOT_AVAILABLE = "n/a"
MINUS = "\N{MINUS SIGN}"
THIN = "\N{NARROW NO-BREAK SPACE}"

_SUPERSCRIPT = str.maketrans("0123456789-", "⁰¹²³⁴⁵⁶⁷⁸⁹⁻")
# Without a power of ten, numbers of this size are still read at a glance.
_PLAIN_FROM, _PLAIN_BELOW = -4, 6

# A double has a decimal exponent between -324 and 308: nothing is ever lost in these digits.
_DECIMAL = Context(prec=700, rounding=ROUND_HALF_EVEN)


@dataclass(frozen=True, slots=True)
class Rounded:
    """A value and its uncertainty, rounded together.

    Attributes
    ----------
    value, uncertainty : str
        Plain digits with a point, both times ``10**exponent``; the uncertainty is ``"0"`` for
        an exact value.
    last_digits : str
        The uncertainty in units of the last place of the value; empty for an exact value.
    exponent : int
        Common power of ten; 0 if none is needed.
    """

    value: str
    uncertainty: str
    last_digits: str
    exponent: int


def _round(number: float, place: int) -> Decimal:
    """Round to a multiple of 10**place."""
    rounded = Decimal(repr(float(number))).quantize(_shift(Decimal(1), place), context=_DECIMAL)
    return _DECIMAL.abs(rounded) if rounded == 0 else rounded


def _shift(number: Decimal, places: int) -> Decimal:
    """Multiply by 10**places, exactly."""
    return number.scaleb(places, _DECIMAL)


def _place_of(number: float, digits: int) -> int:
    """Place of the last of `digits` significant digits once the number is rounded."""
    place = Decimal(repr(abs(float(number)))).adjusted() - digits + 1
    # 9.96 becomes 10, not 10.0: one digit more in front, one less behind.
    return _round(abs(number), place).adjusted() - digits + 1


def _needs_power(leading: int, place: int) -> bool:
    return place > 0 or not _PLAIN_FROM <= leading < _PLAIN_BELOW


def two_digits(
    value: float, uncertainty: float, digits: int = 2, exponent: int | None = None
) -> Rounded:
    """Round an uncertainty to two significant digits and its value to the same place.

    Parameters
    ----------
    value, uncertainty : float
        In the same unit; the uncertainty standard or expanded, not negative.
    digits : int
        Significant digits of the uncertainty.
    exponent : int or None
        Power of ten to write both with, for columns; by default one is used only where the
        plain number would be hard to read or would show digits that are not significant.

    Returns
    -------
    Rounded
        "n/a" where either number is not finite.

    Raises
    ------
    ValueError
        If the uncertainty is negative.

    Examples
    --------
    >>> two_digits(6.62607e-34, 2.96e-36)
    Rounded(value='6.626', uncertainty='0.030', last_digits='30', exponent=-34)
    """
    if not (math.isfinite(value) and math.isfinite(uncertainty)):
        return Rounded(NOT_AVAILABLE, NOT_AVAILABLE, "", 0)
    if uncertainty < 0.0:
        raise ValueError("an uncertainty is never negative")
    if uncertainty == 0.0:
        exact = Decimal(repr(float(value))).normalize(_DECIMAL)
        if exponent is None:
            # An integer may end in zeros without a power of ten: all its digits are exact.
            leading = exact.adjusted() if exact else 0
            exponent = leading if _needs_power(leading, 0) else 0
        return Rounded(f"{_shift(exact, -exponent):f}", "0", "", exponent)
    place = _place_of(uncertainty, digits)
    rounded_u = _round(uncertainty, place)
    rounded = _round(value, place)
    if exponent is None:
        leading = max(rounded.adjusted() if rounded else place, rounded_u.adjusted())
        exponent = leading if _needs_power(leading, place) else 0
    return Rounded(
        f"{_shift(rounded, -exponent):f}",
        f"{_shift(rounded_u, -exponent):f}",
        str(int(_shift(rounded_u, -place))),
        exponent,
    )


def shorthand(value: float, uncertainty: float, digits: int = 2) -> str:
    """Write value and uncertainty as ``6.626(30)e-34``.

    The number in parentheses is the uncertainty in units of the last place of the value
    (JCGM 100:2008, 7.2.2, form 2).
    """
    parts = two_digits(value, uncertainty, digits)
    power = f"e{parts.exponent}" if parts.exponent else ""
    return f"{parts.value}{_parenthesis(parts)}{power}"


def plus_minus(value: float, uncertainty: float, digits: int = 2) -> str:
    """Write ``(6.626 +/- 0.030)e-34`` in plain characters."""
    parts = two_digits(value, uncertainty, digits)
    text = f"{parts.value} +/- {parts.uncertainty}"
    return f"({text})e{parts.exponent}" if parts.exponent else text


def figure(number: float, digits: int = 2) -> str:
    """Write a single number with so many significant digits, ``2.1e-36`` or ``0.10``.

    For uncertainties, sensitivities and contributions in tables.
    """
    mantissa, exponent = _figure_parts(number, digits)
    return f"{mantissa}e{exponent}" if exponent else mantissa


def _figure_parts(number: float, digits: int) -> tuple[str, int]:
    if not math.isfinite(number):
        return (NOT_AVAILABLE if math.isnan(number) else ("-inf", "inf")[number > 0]), 0
    if number == 0.0:
        return "0", 0
    place = _place_of(number, digits)
    leading = place + digits - 1
    exponent = leading if _needs_power(leading, place) else 0
    return f"{_shift(_round(number, place), -exponent):f}", exponent


def _parenthesis(parts: Rounded) -> str:
    return f"({parts.last_digits})" if parts.last_digits else ""


# --- typography -------------------------------------------------------------------------------


def unbroken(text: str) -> str:
    """Keep every number with its per cent sign, so that no line ends between them."""
    return re.sub(r"(?<=\d) (?=%)", THIN, text)


def grouped(digits: str) -> str:
    """Set a plain decimal with a true minus and thin spaces.

    Groups of three on both sides of the point, where a side has more than four digits (The
    International System of Units, 9th ed. (2019), 5.4.4); text that is no number stays.
    """
    sign, body = (MINUS, digits[1:]) if digits.startswith("-") else ("", digits)
    whole, point, fraction = body.partition(".")
    if not (whole + fraction).isdigit():
        return digits
    if len(whole) > 4:
        head = len(whole) % 3
        groups = [whole[:head]] if head else []
        groups += [whole[i : i + 3] for i in range(head, len(whole), 3)]
        whole = THIN.join(groups)
    if len(fraction) > 4:
        fraction = THIN.join(fraction[i : i + 3] for i in range(0, len(fraction), 3))
    return sign + whole + point + fraction


def power_of_ten(exponent: int) -> str:
    """Set ``× 10⁻³⁴`` with its leading space; empty for exponent 0."""
    return f" × 10{str(exponent).translate(_SUPERSCRIPT)}" if exponent else ""


def typeset_shorthand(value: float, uncertainty: float, digits: int = 2) -> str:
    """Write ``6.626(30) × 10⁻³⁴`` with true minus and thin spaces."""
    parts = two_digits(value, uncertainty, digits)
    return grouped(parts.value) + _parenthesis(parts) + power_of_ten(parts.exponent)


def typeset_plus_minus(value: float, uncertainty: float, digits: int = 2) -> str:
    """Write ``(6.626 ± 0.030) × 10⁻³⁴`` with true minus and thin spaces."""
    parts = two_digits(value, uncertainty, digits)
    text = f"{grouped(parts.value)} ± {grouped(parts.uncertainty)}"
    return f"({text}){power_of_ten(parts.exponent)}" if parts.exponent else text


def typeset_figure(number: float, digits: int = 2) -> str:
    """`figure` with true minus, thin spaces and a set power of ten."""
    mantissa, exponent = _figure_parts(number, digits)
    return grouped(mantissa) + power_of_ten(exponent)


def latex_figure(number: float, digits: int = 2) -> str:
    r"""`figure` for LaTeX, ``$2.1\times10^{-36}$``."""
    mantissa, exponent = _figure_parts(number, digits)
    return _latex(mantissa, exponent)


def latex_shorthand(value: float, uncertainty: float, digits: int = 2) -> str:
    r"""`shorthand` for LaTeX, ``$6.626(30)\times10^{-34}$``."""
    parts = two_digits(value, uncertainty, digits)
    return _latex(parts.value + _parenthesis(parts), parts.exponent)


def _latex(mantissa: str, exponent: int) -> str:
    if mantissa == NOT_AVAILABLE:
        return mantissa
    body = mantissa.replace("inf", r"\infty ").strip()
    power = rf"\times10^{{{exponent}}}" if exponent else ""
    return f"${body}{power}$"
