"""Headers of a claim table: what each column holds.

``group`` · ``h [J s]`` (or ``h`` with a column ``unit``) · ``u`` standard and ``U`` expanded
uncertainty (or these words) · ``k`` · cutoffs as ``wavelength 20 kV [pm]``,
``theta 20 kV [deg]``, ``2theta 20 kV [deg]``. Spelling is free within that: underscores for
blanks, brackets or a slash before the unit.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Literal

from hdetermine.classcheck.claim import PlanckUnit
from hdetermine.classcheck.claims import parse_unit
from hdetermine.errors import InputError
from hdetermine.files.plaintext import quoted

Role = Literal["group", "value", "unit", "u", "expanded", "k", "cutoff", "other"]

_CUTOFF = re.compile(
    r"(?P<what>[^\W\d_][\w ]*?|2 ?theta|2 ?θ|)[ ,]*(?:at )?"
    r"(?P<voltage>[0-9]{1,4}(?:[.,][0-9]{1,4})?) ?kv[ ,]*"
    r"(?P<unit>[^\W\d]{1,10}|°|)"
)
_WHAT: dict[str, str] = {
    **dict.fromkeys(
        ("wavelength", "cutoff wavelength", "lambda", "lambda min", "λ", "λmin", "λ min"), "length"
    ),
    **dict.fromkeys(("theta", "θ", "glancing angle", "cutoff angle"), "theta"),
    **dict.fromkeys(("2theta", "2 theta", "2θ", "2 θ", "two theta", "counter angle"), "two theta"),
}
_LENGTH: dict[str, str] = {
    "pm": "wavelength_pm",
    "nm": "wavelength_nm",
    "å": "wavelength_angstrom",
    "a": "wavelength_angstrom",
    "angstrom": "wavelength_angstrom",
}
_DEGREES = ("deg", "°", "degree", "degrees")
_PLAIN: dict[str, Role] = {
    "group": "group",
    "k": "k",
    "coverage factor": "k",
    "unit": "unit",
    "h unit": "unit",
    "unit of h": "unit",
    "standard uncertainty": "u",
    "h standard uncertainty": "u",
    "expanded uncertainty": "expanded",
    "h expanded uncertainty": "expanded",
}
_CASED: dict[str, Role] = {
    "h": "value",
    "u": "u",
    "u(h)": "u",
    "uh": "u",
    "Uh": "expanded",
    "U": "expanded",
    "U(h)": "expanded",
}


@dataclass(frozen=True, slots=True)
class ClaimColumn:
    """What one column of a claim table holds.

    Attributes
    ----------
    role : str
        Kind of content.
    unit : {"J s", "eV s"} or None
        Unit stated in the header of h or of its uncertainty.
    voltage_kV : float
        Of a cutoff.
    key : str
        Key of a cutoff as in a claim sheet, for instance ``wavelength_pm``.
    """

    role: Role
    unit: PlanckUnit | None = None
    voltage_kV: float = 0.0
    key: str = ""


def understand_header(header: str, where: str) -> ClaimColumn:
    """Say what a column holds.

    Raises
    ------
    InputError
        If it is a cutoff or h without a usable unit.
    """
    text = " ".join(header.replace("_", " ").split())
    name, unit = _apart(text)
    cased = _CASED.get(name.replace(" ", ""))
    role = cased or _PLAIN.get(name.casefold())
    if role in ("value", "u", "expanded"):
        return ClaimColumn(role, parse_unit(unit, where) if unit else None)
    if role is not None:
        return ClaimColumn(role)
    for suffix in ("J s", "eV s"):
        start, found, _ = text.rpartition(f" {suffix}")
        if found and start in _CASED:
            return ClaimColumn(_CASED[start], parse_unit(suffix, where))
    return _cutoff(f"{name} {unit}".strip().casefold(), header, where)


def _apart(text: str) -> tuple[str, str]:
    """Split a unit in brackets, or after a slash, off a header."""
    match = re.fullmatch(r"(.*?)\s*(?:\[([^\]]*)\]|/\s*([^/]+))", text)
    if match is None:
        match = re.fullmatch(r"(.*\S)\s+\(([^()]*)\)()", text)
    if match is None:
        return text, ""
    return match[1].strip(), (match[2] or match[3] or "").strip()


def _cutoff(text: str, header: str, where: str) -> ClaimColumn:
    match = _CUTOFF.fullmatch(text)
    if match is None:
        return ClaimColumn("other")
    voltage = float(match["voltage"].replace(",", "."))
    what, unit = match["what"].strip(), match["unit"]
    kind = _WHAT.get(what)
    if what and kind is None:
        return ClaimColumn("other")
    if unit in _LENGTH and kind in (None, "length"):
        return ClaimColumn("cutoff", voltage_kV=voltage, key=_LENGTH[unit])
    if unit in _DEGREES and kind in ("theta", "two theta"):
        key = "glancing_angle_deg" if kind == "theta" else "two_theta_deg"
        return ClaimColumn("cutoff", voltage_kV=voltage, key=key)
    raise InputError(
        f"{where}: column {quoted(header)} has no unit that fits; write it like "
        '"wavelength 20 kV [pm]", "theta 20 kV [deg]" or "2theta 20 kV [deg]".'
    )
