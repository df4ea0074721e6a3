"""A slip: a hypothesis about the arithmetic that predicts numbers."""

from __future__ import annotations

from dataclasses import dataclass

from hdetermine.classcheck.arithmetic import Variant


@dataclass(frozen=True, slots=True)
class Wording:
    """What is said about a slip.

    Attributes
    ----------
    title : str
        A few words for the table.
    sentence : str
        What would produce the number, complete sentence; never an accusation.
    remedy : str
        What to look at, complete sentence.
    """

    title: str
    sentence: str
    remedy: str


@dataclass(frozen=True, slots=True, eq=False)
class Slip:
    """One entry of the catalogue, made for one group's data.

    Attributes
    ----------
    code : str
        Stable identifier.
    weight : float
        How common it is among slips, relative (common practice, no source).
    variants : tuple of Variant
        Ways in which it is done, each equally likely.
    """

    code: str
    weight: float
    variants: tuple[Variant, ...]


@dataclass(frozen=True, slots=True)
class NamedSlip:
    """A slip that explains a claim, or two that do so together.

    Attributes
    ----------
    codes : tuple of str
        One code, or two.
    title, sentence, remedy : str
        As in `Wording`; joined for two.
    note : str
        The variant that fits best.
    predicted_J_s : float
        h that it predicts from the claimed cutoffs, or else from the group's own data; nan if h
        is not part of it.
    fit_probability : float
        Chance of a worse agreement if it is so (from chi squared).
    odds : float
        How many times more probable the claim is with it than with ordinary scatter, the
        catalogue's length allowed for; infinite if it follows by arithmetic alone.
    """

    codes: tuple[str, ...]
    title: str
    sentence: str
    remedy: str
    note: str = ""
    predicted_J_s: float = float("nan")
    fit_probability: float = 1.0
    odds: float = float("inf")
