"""What a column holds, from the words and units of its header.

English, German, French, Spanish and Portuguese words of the trade.
"""

from __future__ import annotations

import re
import unicodedata
from dataclasses import dataclass
from typing import Literal

Role = Literal[
    "theta", "two_theta", "angle", "wavelength", "counts", "rate", "intensity", "dwell", "other"
]


@dataclass(frozen=True, slots=True)
class Meaning:
    """What a header says.

    Attributes
    ----------
    role : str
        ``"angle"`` leaves open whether glancing angle or twice it; ``"intensity"`` whether
        counts or rate; ``"other"`` is nothing that is needed, or nothing known.
    unit : str
        ``"deg"``, ``"rad"``, ``"pm"``, ``"nm"``, ``"angstrom"``, another unit as written, or
        empty.
    voltage_kV : float or None
        A tube voltage named in the header.
    """

    role: Role
    unit: str = ""
    voltage_kV: float | None = None


_VOLTAGE = re.compile(
    r"(?<![\d.,])(\d{1,3}(?:[.,]\d{1,3})?)\s*kv(?![a-z])"
    r"|(?<![a-z])u[a-z]?\s*=\s*(\d{1,3}(?:[.,]\d{1,3})?)(?!\s*v)(?![\d.,])"
)
_TWO_THETA = re.compile(
    r"(?<!\d)2\s*[-*·x]?\s*(?:θ|theta\b|th\b|β|beta\b)|two[\s-]*theta|double\s+angle"
    r"|(?:counter|detector|scattering|deflection)\s+angle"
    r"|(?:detektor|streu|ablenk|zahlrohr|zaehlrohr)winkel"
    r"|angle\s+de\s+(?:diffusion|deviation)|angulo\s+de\s+(?:dispersion|dispersao|desviacion|desvio|espalhamento)"
)
_THETA = re.compile(
    r"θ|\btheta\b|\bth\b|glancing|\bbragg|glanzwinkel|braggwinkel|kristallwinkel|crystal\s+angle"
    r"|rasante?\b"
)
_ANGLE = re.compile(r"\bangles?\b|winkel\b|\bangulo\b|\bβ\b|\bbeta\b")
_WAVELENGTH = re.compile(
    r"λ|\blambda\b|wave\s*length|wellenlange|wellenlaenge|longueur\s+d.\s*onde"
    r"|longitud\s+de\s+onda|comprimento\s+de\s+onda"
)
_DWELL = re.compile(
    r"\bdwell|(?:gate|counting|count|measuring|measurement|integration|live)\s+time"
    r"|time\s+per\s+(?:step|point)|messzeit|torzeit|temps\s+de\s+(?:comptage|mesure|pose)"
    r"|tiempo\s+de\s+(?:conteo|medida|integracion)|tempo\s+de\s+(?:contagem|medida|integracao)"
)
_FUNCTION = re.compile(r"\b(?:sin|cos|tan|ln|log)\b|^\s*1\s*/\s*[a-zλθ]")
_PER_MINUTE = re.compile(r"(?:/|\bper\b|\bpro\b|\bpor\b|\bpar\b)\s*min|\bcpm\b|\bmin\s*\^?\s*-\s*1")
_SPREAD = re.compile(
    r"uncertaint|\berrors?\b|\bfehler|unsicherheit|incertitude|incertidumbre|incerteza|\berro\b"
    r"|sigma|σ|±|\+/?-|^\s*[δu]\s*\(|^\s*δ|std\.?\s*dev|\bsqrt|√"
)
_PER_SECOND = re.compile(
    r"(?:/|\bper\b|\bpro\b|\bpor\b|\bpar\b)\s*(?:s|sec|sek|seconds?|sekunde|segundo|seconde)\b"
    r"|\bs\s*\^?\s*\(?-\s*1|\bcps\b|\bhz\b"
)
_RATE = re.compile(
    r"\brates?\b|\bcountrate\b|zahlrate|zaehlrate|impulsrate|pulsrate|\btaux\b|\btasa\b|\btaxa\b"
)
_COUNTS = re.compile(
    r"\bcounts?\b|\bcts\b|\bimpuls(?:es?|os)?\b|\bimp\b|\bpulses?\b"
    r"|\bevents?\b|ereignisse|impulszahl|zahlimpulse"
    r"|\bcoups?\b|\bimpulsions?\b|\bcuentas?\b|\bconteos?\b|\bpulsos?\b|\bcontagens?\b"
    r"|\bcontagem\b|\bcontas\b|^\s*n\b(?!\s*[°o]\b)"
)
_INTENSITY = re.compile(r"\bintensit|\bintensidade?\b|^\s*[iry]\s*(?:$|[(\[/])|\bsignal\b")
_UNITS: tuple[tuple[str, re.Pattern[str]], ...] = (
    ("mrad", re.compile(r"\bmrad\b")),
    ("rad", re.compile(r"\brad(?:ians?)?\b|\bradianes\b")),
    ("deg", re.compile(r"°|\bdeg(?:rees?|res?)?\b|\bgrad(?:os?)?\b|\bgraus?\b")),
    ("pm", re.compile(r"\bpm\b|picomet")),
    ("nm", re.compile(r"\bnm\b|nanomet")),
    ("um", re.compile(r"[μu]m\b")),
    ("angstrom", re.compile(r"å|\bangstroms?\b|[\[(/]\s*a\s*[\])]?\s*$")),
    ("m", re.compile(r"[\[(/]\s*m\s*[\])]?\s*$|\bin\s+m\b|\bmet(?:er|re)s?\b")),
)


def normalise(text: str) -> str:
    """Bring a header to lower case with compatibility characters and blanks made plain."""
    text = text.replace("º", "°").replace("_", " ")
    text = unicodedata.normalize("NFKC", text).casefold().replace("\u2212", "-")
    return " ".join(text.split())


def _bare(text: str) -> str:
    """Drop accents, so that words are found with and without them."""
    decomposed = unicodedata.normalize("NFD", text.replace("å", "angstrom"))
    return "".join(c for c in decomposed if not unicodedata.combining(c))


def voltage_in(text: str) -> float | None:
    """Find a tube voltage in a header or file name.

    Parameters
    ----------
    text : str
        For instance ``"20 kV"``, ``"U=25,5"`` or ``"scan_20_kV.csv"``.

    Returns
    -------
    float or None
        kV; None if none or more than one is named.
    """
    found = {a or b for a, b in _VOLTAGE.findall(normalise(text))}
    values = {float(number.replace(",", ".")) for number in found}
    return values.pop() if len(values) == 1 else None


def meaning_of(header: str) -> Meaning:
    """Read a header.

    Parameters
    ----------
    header : str
        All header lines of the column, joined.

    Returns
    -------
    Meaning
    """
    text = _bare(normalise(header))
    voltage = voltage_in(header)
    if any(pattern.search(text) for pattern in (_SPREAD, _FUNCTION, _PER_MINUTE)):
        return Meaning("other")
    unit = next((name for name, pattern in _UNITS if pattern.search(text)), "")
    for role, pattern in _ABSCISSAE.items():
        if pattern.search(text):
            return Meaning(role, unit)
    if _DWELL.search(text):
        return Meaning("dwell")
    if _PER_SECOND.search(text) or _RATE.search(text):
        return Meaning("rate", voltage_kV=voltage)
    if _COUNTS.search(text):
        return Meaning("counts", voltage_kV=voltage)
    if _INTENSITY.search(text) or voltage is not None:
        return Meaning("intensity", voltage_kV=voltage)
    return Meaning("other")


_ABSCISSAE: dict[Role, re.Pattern[str]] = {
    "two_theta": _TWO_THETA,
    "theta": _THETA,
    "wavelength": _WAVELENGTH,
    "angle": _ANGLE,
}

ABSCISSA_ROLES: tuple[Role, ...] = ("theta", "angle", "two_theta", "wavelength")
"""Roles that make an abscissa, the most welcome first."""

ORDINATE_ROLES: tuple[Role, ...] = ("counts", "rate", "intensity")
"""Roles that make an ordinate."""
