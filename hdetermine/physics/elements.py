"""Chemical elements: symbols and atomic numbers."""

from __future__ import annotations

import re

_IN_ORDER = (
    "H He Li Be B C N O F Ne Na Mg Al Si P S Cl Ar K Ca Sc Ti V Cr Mn Fe Co Ni Cu Zn Ga Ge As "
    "Se Br Kr Rb Sr Y Zr Nb Mo Tc Ru Rh Pd Ag Cd In Sn Sb Te I Xe Cs Ba La Ce Pr Nd Pm Sm Eu "
    "Gd Tb Dy Ho Er Tm Yb Lu Hf Ta W Re Os Ir Pt Au Hg Tl Pb Bi Po At Rn Fr Ra Ac Th Pa U"
)

SYMBOLS: tuple[str, ...] = tuple(_IN_ORDER.split())
"""Symbols in the order of the periodic system, hydrogen to uranium."""

ATOMIC_NUMBER: dict[str, int] = {symbol: i for i, symbol in enumerate(SYMBOLS, start=1)}
"""Atomic number of each symbol."""

_PART = re.compile(r"([A-Z][a-z]?)(\d{0,3})")


def formula_parts(formula: str) -> dict[str, int] | None:
    """Split a plain chemical formula into elements and their numbers.

    Parameters
    ----------
    formula : str
        For instance ``"CaF2"``; no brackets.

    Returns
    -------
    dict or None
        ``{"Ca": 1, "F": 2}``, or None if the text is not a plain formula.
    """
    parts: dict[str, int] = {}
    position = 0
    for match in _PART.finditer(formula):
        symbol, number = match.groups()
        if match.start() != position or symbol not in ATOMIC_NUMBER:
            return None
        parts[symbol] = parts.get(symbol, 0) + int(number or 1)
        position = match.end()
    return parts if parts and position == len(formula) else None
