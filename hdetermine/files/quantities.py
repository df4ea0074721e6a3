"""Quantities as a run sheet states them: a number, or a table with its uncertainty."""

from __future__ import annotations

import difflib
import math
from collections.abc import Mapping
from dataclasses import dataclass, replace

from hdetermine.errors import InputError
from hdetermine.files.defaults import InputRule
from hdetermine.files.limits import MAX_TEXT_CHARACTERS
from hdetermine.files.plaintext import plain_text, quoted
from hdetermine.records.quantity import HALF_WIDTH_DIVISOR, Distribution, Evaluation, Quantity

_FORMS = ("u", "half_width", "expanded")
_KEYS = ("value", *_FORMS, "distribution", "k", "dof", "source", "note")
_SHAPE = (
    "a number, or a table with value and one of u, half_width or expanded (with k), for "
    "instance { value = 1.0, u = 0.01 }"
)
_BOUNDED: dict[str, Distribution] = {
    "rectangular": "rectangular",
    "triangular": "triangular",
    "arcsine": "arcsine",
}
_SUPPORT_IN_U = 3.0
"""How far a normal distribution is taken to reach, in standard uncertainties."""


@dataclass(frozen=True, slots=True)
class StatedQuantity:
    """A quantity as stated; `u` is None for a plain number, whose uncertainty is the default."""

    value: float
    u: float | None = None
    distribution: Distribution = "normal"
    evaluation: Evaluation = "B"
    dof: float = math.inf
    source: str = ""
    note: str = ""


def finite_number(found: object, what: str = "a number") -> float:
    """Take a TOML number as a float.

    Raises
    ------
    ValueError
        With a message fragment, if it is not a finite number.
    """
    if isinstance(found, bool) or not isinstance(found, int | float):
        raise ValueError(f"found {quoted(found)}; allowed is {what}")
    try:
        number = float(found)
    except OverflowError:
        number = math.inf
    if not math.isfinite(number):
        raise ValueError(f"found {quoted(found)}; allowed is {what} that is finite")
    return number


def parse_stated(found: object) -> StatedQuantity:
    """Read one quantity of a run sheet.

    Parameters
    ----------
    found : object
        What the TOML reader returned.

    Returns
    -------
    StatedQuantity

    Raises
    ------
    ValueError
        With a message fragment that says what was found and what is allowed.
    """
    if not isinstance(found, Mapping):
        return StatedQuantity(finite_number(found, _SHAPE))
    for key in found:
        if key not in _KEYS:
            raise ValueError(f"found the key {quoted(key)} in it{nearest(str(key), _KEYS)}")
    if "value" not in found:
        raise ValueError(f"found a table without value; allowed is {_SHAPE}")
    value = finite_number(found["value"], "a value that is a number")
    forms = [form for form in _FORMS if form in found]
    if len(forms) != 1:
        raise ValueError(
            f"found {' and '.join(forms) or 'no uncertainty'} in it; allowed is exactly one of u, "
            "half_width or expanded (a plain number if the default uncertainty is meant)"
        )
    form = forms[0]
    size = finite_number(found[form], f"a {form} that is a number")
    if size < 0 or (size == 0 and form != "u"):
        raise ValueError(f"found {form} = {size:g}; allowed is a number above zero")
    for key, owner in (("distribution", "half_width"), ("k", "expanded")):
        if key in found and form != owner:
            raise ValueError(f"found {key} beside {form}; it belongs to {owner}")
    stated = StatedQuantity(value, size, dof=_dof(found), source=_text(found, "source"))
    stated = replace(stated, note=_text(found, "note"))
    if form == "half_width":
        distribution = found.get("distribution", "rectangular")
        if not isinstance(distribution, str) or distribution not in _BOUNDED:
            allowed = ", ".join(_BOUNDED)
            hint = nearest(str(distribution), tuple(_BOUNDED))
            raise ValueError(
                f"found distribution {quoted(distribution)}{hint}; allowed are {allowed}"
            )
        u = size / HALF_WIDTH_DIVISOR[distribution]
        return replace(stated, u=u, distribution=_BOUNDED[distribution])
    if form == "expanded":
        if "k" not in found:
            raise ValueError("found expanded without k; state the coverage factor k too")
        factor = finite_number(found["k"], "a k that is a number")
        if not 0.1 <= factor <= 100:
            raise ValueError(f"found k = {factor:g}; allowed is a coverage factor from 0.1 to 100")
        stated = replace(stated, u=size / factor)
    if math.isfinite(stated.dof):
        # JCGM 101:2008, 6.4.9: a mean, or an expanded uncertainty with its effective degrees
        # of freedom, follows a scaled and shifted t-distribution.
        return replace(stated, distribution="t", evaluation="A")
    return stated


def _dof(found: Mapping[str, object]) -> float:
    if "dof" not in found:
        return math.inf
    if found["dof"] == math.inf:
        return math.inf
    dof = finite_number(found["dof"], "a dof that is a number")
    if dof < 1:
        raise ValueError(f"found dof = {dof:g}; allowed are degrees of freedom from 1 up")
    return dof


def _text(found: Mapping[str, object], key: str) -> str:
    text = found.get(key, "")
    if not isinstance(text, str):
        raise ValueError(f"found {key} = {quoted(text)}; allowed is a text in quotation marks")
    if len(text) > MAX_TEXT_CHARACTERS:
        raise ValueError(
            f"found a {key} of {len(text)} characters; allowed are up to {MAX_TEXT_CHARACTERS}"
        )
    return plain_text(text)


def nearest(word: str, known: tuple[str, ...]) -> str:
    """Suggest the nearest known word, as a piece of a sentence; empty if none is near."""
    close = difflib.get_close_matches(word[:80], known, n=1, cutoff=0.6)
    return f" (did you mean {close[0]}?)" if close else ""


def settle(rule: InputRule, stated: StatedQuantity | None, where: str) -> Quantity | None:
    """Make the quantity of a rule from what is stated, or from the default.

    Parameters
    ----------
    rule : InputRule
        The input's row in the table of defaults.
    stated : StatedQuantity or None
        What the run sheet says, if anything.
    where : str
        Name of the run sheet, for messages.

    Returns
    -------
    Quantity or None
        None if nothing is stated and the rule has no default.

    Raises
    ------
    InputError
        If the estimate cannot be right or its distribution reaches where the model is undefined.
    """
    if stated is None:
        if rule.value is None:
            return None
        stated = StatedQuantity(rule.value, note=rule.reason)
    low, high = rule.allowed
    if not low <= stated.value <= high:
        allowed = f"{low:g}" if low == high else f"{low:g} to {high:g}"
        unit = "" if rule.unit == "1" else f" {rule.unit}"
        hint = f" ({rule.hint})" if rule.hint else ""
        raise InputError(
            f"{where}: key {rule.key}: found {stated.value:g}; allowed is {allowed}{unit}{hint}."
        )
    is_default = stated.u is None
    if stated.u is None:
        stated = _with_default_spread(rule, stated)
    assert stated.u is not None
    _check_support(rule, stated, where)
    return Quantity(
        name=rule.key,
        symbol=rule.symbol,
        value=stated.value,
        standard_uncertainty=stated.u,
        unit=rule.unit,
        distribution=stated.distribution,
        evaluation=stated.evaluation,
        degrees_of_freedom=stated.dof,
        common=rule.common,
        source=stated.source,
        note=stated.note,
        is_default=is_default,
    )


def _check_support(rule: InputRule, stated: StatedQuantity, where: str) -> None:
    """Refuse a distribution that reaches where the model is undefined.

    A normal or t distribution has no ends; it is held against a limit at three standard
    uncertainties, and only where the estimate itself must stay off that limit or the uncertainty
    is wider than the limits.
    """
    assert stated.u is not None
    divisor = HALF_WIDTH_DIVISOR.get(stated.distribution)
    reach = stated.u * (_SUPPORT_IN_U if divisor is None else divisor)
    low, high = rule.support
    slack = 1e-12 * max(1.0, abs(stated.value))
    unit = "" if rule.unit == "1" else f" {rule.unit}"
    for end, limit, beyond, is_off in (
        (stated.value - reach, low, low - (stated.value - reach), rule.allowed[0] > low),
        (stated.value + reach, high, stated.value + reach - high, rule.allowed[1] < high),
    ):
        if divisor is None and not is_off and stated.u <= high - low:
            continue
        if beyond > slack or (divisor is None and beyond >= 0.0):
            raise InputError(
                f"{where}: key {rule.key}: its uncertainty lets it reach {end:.4g}{unit}, but "
                f"beyond {limit:g}{unit} it has no meaning; state a smaller uncertainty."
            )


def _with_default_spread(rule: InputRule, stated: StatedQuantity) -> StatedQuantity:
    """Give a plain number its default spread, shrunk where it would leave the support."""
    room = min(stated.value - rule.support[0], rule.support[1] - stated.value)
    if rule.u is not None:
        return replace(stated, u=rule.u, note=stated.note or rule.reason)
    half_width = min(rule.half_width or 0.0, room)
    return replace(
        stated,
        u=half_width / HALF_WIDTH_DIVISOR["rectangular"],
        distribution="rectangular" if half_width > 0 else "normal",
        note=stated.note or rule.reason,
    )


def describe(quantity: Quantity) -> str:
    """Say in one line how a quantity was understood, with its unit."""
    unit = "" if quantity.unit == "1" else f" {quantity.unit}"
    text = f"{quantity.value:.10g}{unit}, u = {quantity.standard_uncertainty:.3g}{unit}"
    half_width = quantity.half_width
    if half_width is not None:
        text += f", {quantity.distribution}, half-width {half_width:.3g}{unit}"
    else:
        text += f", {quantity.distribution}"
    if math.isfinite(quantity.degrees_of_freedom):
        text += f", {quantity.degrees_of_freedom:g} degrees of freedom"
    return text
