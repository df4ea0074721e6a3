"""Records of the screening: what was looked at, and what was found.

Chance of a false alarm: every statistic belongs to a family, each family of the class may raise
a false alarm with a probability of at most `FAMILY_CHANCE`, all of them together with at most
1 %. Within a family the bar is divided by the number of looks (Bonferroni's inequality), so it
holds however the looks depend on each other.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

Family = Literal["scatter", "scan scatter", "digits", "voltage", "stretch"]

CLASS_CHANCE = 0.01
"""Probability of any false alarm in a class without a fault."""
FAMILIES: tuple[Family, ...] = ("scatter", "scan scatter", "digits", "voltage", "stretch")
FAMILY_CHANCE = CLASS_CHANCE / len(FAMILIES)


@dataclass(frozen=True, slots=True)
class Look:
    """One statistic of one group, before the size of the class is known.

    Attributes
    ----------
    family : str
        Looks of one kind.
    where : str
        Scan (by its voltage) or "all scans".
    statistic : float
        Figure that is compared.
    figure : str
        What the figure is, for instance "scatter over Poisson".
    probability : float
        Chance of a figure so far out in sound data.
    large : bool
        False if the departure is too small to matter, however significant.
    sentence : str
        What it means, complete sentence.
    """

    family: Family
    where: str
    statistic: float
    figure: str
    probability: float
    large: bool
    sentence: str


@dataclass(frozen=True, slots=True)
class Remark:
    """Something found in the data of a group.

    Attributes
    ----------
    where : str
        Scan or scans.
    title : str
        A few words for the table.
    sentence : str
        What it means.
    statistic : float or None
        Figure, if it is a matter of figures.
    figure : str
        What the figure is.
    threshold : str
        Where the bar lies.
    class_chance : float or None
        Probability that sound data raise this alarm anywhere in the class; None where chance
        plays no part.
    is_alarm : bool
        False for a note that questions nothing.
    partner : str
        Label of another group that it concerns; it belongs in the table of the class, not on a
        page that is handed back.
    """

    where: str
    title: str
    sentence: str
    statistic: float | None = None
    figure: str = ""
    threshold: str = ""
    class_chance: float | None = None
    is_alarm: bool = True
    partner: str = ""


def raise_alarms(looks: list[Look], number_of_looks: int) -> list[Remark]:
    """Turn looks of one family and one group into alarms.

    Parameters
    ----------
    looks : list of Look
        The group's looks.
    number_of_looks : int
        Looks of the family in the whole class.

    Returns
    -------
    list of Remark
    """
    bar = FAMILY_CHANCE / max(number_of_looks, 1)
    return [
        Remark(
            where=look.where,
            title=TITLES[look.family],
            sentence=look.sentence,
            statistic=look.statistic,
            figure=look.figure,
            threshold=f"chance below {bar:.1g} for one look, {number_of_looks} looks in the class",
            class_chance=min(1.0, look.probability * number_of_looks),
        )
        for look in looks
        if look.large and look.probability <= bar
    ]


TITLES: dict[Family, str] = {
    "scatter": "scatter is not Poisson's",
    "scan scatter": "scatter is not Poisson's",
    "digits": "last digits are uneven",
    "voltage": "voltage and cutoff disagree",
    "stretch": "identical counts",
}
