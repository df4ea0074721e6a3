"""Slips in the number itself: powers of ten, units, a constant left out or squared."""

from __future__ import annotations

from hdetermine.classcheck.arithmetic import Variant
from hdetermine.classcheck.claim import PlanckUnit
from hdetermine.classcheck.slip import Slip, Wording
from hdetermine.physics.constants import ELEMENTARY_CHARGE_C, SPEED_OF_LIGHT_M_PER_S

WORDINGS: dict[str, Wording] = {
    "power_of_ten": Wording(
        "power of ten",
        "The right digits with another power of ten give this number.",
        "Carry the units through: pm, Å and nm, kV and V.",
    ),
    "electronvolt_or_joule": Wording(
        "eV s against J s",
        "The value in the other unit, eV s or J s, or a factor e left out (or put in), gives "
        "this number.",
        "1 eV = 1.602 176 634 × 10⁻¹⁹ J; compare the number with the unit beside it.",
    ),
    "charge": Wording(
        "elementary charge squared or divided out twice",
        "One factor of the elementary charge e too many gives this number.",
        "h = (e/c) λ U holds e once in J s, and not at all in eV s.",
    ),
    "light_speed": Wording(
        "speed of light left out or squared",
        "One factor of the speed of light c too many or too few gives this number.",
        "h = (e/c) λ U holds 1/c once.",
    ),
}

POWERS: dict[int, str] = {
    1: "Å and nm differ by 10",
    2: "pm and Å differ by 100",
    3: "kV and V, pm and nm differ by 1000",
    6: "two prefixes by 1000 each",
    9: "nm and m differ by 10⁹",
    10: "Å and m differ by 10¹⁰",
    12: "pm and m differ by 10¹²",
}
"""Powers of ten that a unit explains."""


def number_slips(unit: PlanckUnit) -> list[Slip]:
    """Make the slips of the number for a claim in the given unit."""
    e, c = ELEMENTARY_CHARGE_C, SPEED_OF_LIGHT_M_PER_S
    # In J s: a value in eV s labelled J s is h/e; one in J s labelled eV s is h e.
    mistaken, repeated = (1.0 / e, e) if unit == "J s" else (e, 1.0 / e)
    plain = list(POWERS)
    rare = [4, 5, 7, 8, 11, 13, 14, 15]
    return [
        Slip("power_of_ten", 4.0, _powers(plain)),
        Slip("power_of_ten", 0.3, _powers(rare)),
        Slip("electronvolt_or_joule", 2.0, (Variant(planck_factor=mistaken),)),
        Slip("charge", 0.5, (Variant("one factor e too many", planck_factor=repeated),)),
        Slip(
            "light_speed",
            1.0,
            (
                Variant("c left out", planck_factor=c),
                Variant("c squared", planck_factor=1.0 / c),
            ),
        ),
    ]


def _powers(exponents: list[int]) -> tuple[Variant, ...]:
    """Both signs, in the wavelengths and in h, or in h alone."""
    variants = []
    for size in exponents:
        for exponent in (size, -size):
            factor = float(f"1e{exponent}")
            way = "large" if exponent > 0 else "small"
            reason = f": {POWERS[size]}" if size in POWERS else ""
            note = f"10 to the power {size} too {way}{reason}"
            variants.append(Variant(note, wavelength_factor=factor))
            variants.append(Variant(note, planck_factor=factor))
    return tuple(variants)
