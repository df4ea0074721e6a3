"""Analysing crystals: spacing, expansion and refraction of the ones in use.

Lattice parameters and expansion coefficients near 20-25 degrees Celsius. "From memory" marks a
figure whose source was named but not at hand when it was written down.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass

from hdetermine.physics.constants import CLASSICAL_ELECTRON_RADIUS_PM
from hdetermine.physics.elements import ATOMIC_NUMBER

REFRACTION_RELATIVE_U = 0.05
"""Anomalous dispersion moves delta off the free-electron figure by a few percent between 8 and
40 keV (away from edges); common practice, no source."""


@dataclass(frozen=True, slots=True)
class CrystalKind:
    """A crystal species.

    Attributes
    ----------
    material : str
        Name as in the run sheet.
    other_names : tuple of str
        Accepted too, lower case.
    cell : dict of str to int
        Atoms in the unit cell.
    cell_volume_pm3 : float
        Volume of the unit cell, pm^3.
    cubic_parameter_pm : float or None
        Lattice parameter of a cubic crystal, pm: any of its reflections can be worked out.
    centring : str
        ``"F"`` (rock salt: indices all even or all odd), ``"D"`` (diamond: besides, all-even
        ones sum to a multiple of four) or empty.
    spacings_pm : dict of str to float
        Spacings of the reflections in use, pm.
    half_width_relative : float
        Rectangular half-width of the spacing in use, relative.
    reference_temperature_C : float
        For which the spacing holds.
    expansion_per_K, expansion_half_width_per_K : float
        Linear expansion along the plane normal and its rectangular half-width, 1/K.
    source : str
        Where spacing and expansion come from.
    """

    material: str
    other_names: tuple[str, ...]
    cell: dict[str, int]
    cell_volume_pm3: float
    cubic_parameter_pm: float | None
    centring: str
    spacings_pm: dict[str, float]
    half_width_relative: float
    reference_temperature_C: float
    expansion_per_K: float
    expansion_half_width_per_K: float
    source: str

    @property
    def elements(self) -> tuple[str, ...]:
        """Elements of the crystal."""
        return tuple(self.cell)

    @property
    def electrons_per_pm3(self) -> float:
        """Electron density, 1/pm^3."""
        electrons = sum(ATOMIC_NUMBER[symbol] * n for symbol, n in self.cell.items())
        return electrons / self.cell_volume_pm3


@dataclass(frozen=True, slots=True)
class Planes:
    """One set of reflecting planes of a known crystal.

    Attributes
    ----------
    kind : CrystalKind
        The crystal.
    reflection : str
        Miller indices in the table's spelling.
    spacing_pm : float
        Spacing at the reference temperature, pm.
    spacing_half_width_pm : float
        Rectangular half-width of the spacings in use, pm.
    refraction, refraction_u : float
        delta/sin^2(theta) in first order and its standard uncertainty, unit 1.
    """

    kind: CrystalKind
    reflection: str
    spacing_pm: float
    spacing_half_width_pm: float
    refraction: float
    refraction_u: float


def refraction_shift(spacing_pm: float, electrons_per_pm3: float) -> float:
    """Relative shift of the Bragg condition by refraction, first order.

    delta = r_e lambda^2 n_e/(2 pi) for free electrons, and lambda = 2 d sin(theta), so that
    delta/sin^2(theta) = 2 r_e d^2 n_e/pi does not depend on the wavelength (Compton and
    Allison, X-Rays in Theory and Experiment, 1935, ch. IX; from memory).

    Parameters
    ----------
    spacing_pm : float
        Spacing of the planes, pm.
    electrons_per_pm3 : float
        Electron density, 1/pm^3.

    Returns
    -------
    float
        delta/sin^2(theta), unit 1.
    """
    return 2.0 * CLASSICAL_ELECTRON_RADIUS_PM * spacing_pm**2 * electrons_per_pm3 / math.pi


def _cubic(
    material: str,
    names: tuple[str, ...],
    cell: dict[str, int],
    parameter_pm: float,
    centring: str,
    reflections: tuple[str, ...],
    half_width_relative: float,
    temperature_C: float,
    expansion: tuple[float, float],
    source: str,
) -> CrystalKind:
    spacings = {hkl: _cubic_spacing(parameter_pm, hkl) for hkl in reflections}
    return CrystalKind(
        material,
        names,
        cell,
        parameter_pm**3,
        parameter_pm,
        centring,
        spacings,
        half_width_relative,
        temperature_C,
        expansion[0],
        expansion[1],
        source,
    )


def _cubic_spacing(parameter_pm: float, hkl: str) -> float:
    return parameter_pm / math.sqrt(sum(int(index) ** 2 for index in hkl))


_HEXAGONAL = math.sqrt(3.0) / 2.0

KINDS: tuple[CrystalKind, ...] = (
    _cubic(
        "Si",
        ("silicon",),
        {"Si": 8},
        543.1020511,
        "D",
        ("111", "220"),
        1e-5,  # impurities and rounded values; the ideal lattice is known to 2e-8
        22.5,
        (2.56e-6, 0.05e-6),
        "lattice parameter CODATA 2022; expansion Okada and Tokumaru, J. Appl. Phys. 56, 314 "
        "(1984), from memory",
    ),
    _cubic(
        "Ge",
        ("germanium",),
        {"Ge": 8},
        565.7906,
        "D",
        ("111", "220"),
        2.0e-4,  # analyser tables print 2d = 653.2 pm, 0.02 % less (from memory)
        25.0,
        (5.9e-6, 0.15e-6),
        "Baker and Hart, Acta Cryst. A31, 364 (1975), from memory; expansion 5.75 to 6.0e-6, "
        "from memory",
    ),
    _cubic(
        "NaCl",
        ("sodium chloride", "rock salt", "rocksalt", "halite"),
        {"Na": 4, "Cl": 4},
        564.02,
        "F",
        ("200",),
        1.5e-4,  # 282.0, 282.01 and 282.05 pm (2d = 564.1) are in circulation
        26.0,
        (39.8e-6, 0.8e-6),
        "Swanson and Fuyat, NBS Circular 539, vol. II, p. 41 (1953), from memory; expansion 39 "
        "to 40.5e-6, from memory",
    ),
    _cubic(
        "LiF",
        ("lithium fluoride",),
        {"Li": 4, "F": 4},
        402.70,
        "F",
        ("200",),
        2.5e-4,  # covers 201.31 (Thewlis, Acta Cryst. 8, 36 (1955), from memory) and 201.4 pm
        25.0,
        (33.5e-6, 1.5e-6),
        "NBS Circular 539, vol. I, p. 61 (1953), from memory; expansion 32 to 34.5e-6, from memory",
    ),
    _cubic(
        "KCl",
        ("potassium chloride", "sylvite"),
        {"K": 4, "Cl": 4},
        629.31,
        "F",
        ("200",),
        5.5e-4,  # analyser tables print 2d = 629 pm (from memory)
        25.0,
        (36.6e-6, 0.6e-6),
        "NBS Circular 539, vol. I, p. 65 (1953), from memory; expansion 36 to 37e-6, from memory",
    ),
    _cubic(
        "KBr",
        ("potassium bromide",),
        {"K": 4, "Br": 4},
        660.05,
        "F",
        ("200",),
        2.6e-3,  # 2d = 660.05, 660.0, 659 and 658.4 pm are all in circulation: cover them
        25.0,
        (38.7e-6, 1.0e-6),
        "NBS Circular 539, vol. I, p. 66 (1953) and later values, from memory; expansion 38 to "
        "40e-6, from memory",
    ),
    CrystalKind(
        "calcite",
        ("caco3", "iceland spar"),
        {"Ca": 6, "C": 6, "O": 18},
        _HEXAGONAL * 498.96**2 * 1706.10,
        None,
        "",
        {"104": 303.555},
        1.0e-4,  # structure data and X-ray metrology (303.567, 303.574 pm) differ by 65 ppm
        22.0,
        10.4e-6,
        0.6e-6,
        "a 498.96(2), c 1706.10(11) pm, Effenberger, Mereiter and Zemann, Z. Krist. 156, 233 "
        "(1981), from memory; expansion along the cleavage normal from 26e-6 (along c) and "
        "-5.6e-6 (across)",
    ),
    CrystalKind(
        "quartz",
        ("sio2", "alpha quartz"),
        {"Si": 3, "O": 6},
        _HEXAGONAL * 491.30**2 * 540.47,
        None,
        "",
        {"101": 334.31},
        1.5e-4,  # 334.27 to 334.34 pm in use
        25.0,
        11.3e-6,
        0.5e-6,
        "a 491.30, c 540.47 pm, Brice, Rev. Mod. Phys. 57, 105 (1985), from memory; expansion "
        "along the normal from 13.7e-6 (across) and 7.5e-6 (along c), from memory",
    ),
    CrystalKind(
        "topaz",
        ("al2sio4f2",),
        {"Al": 8, "Si": 4, "O": 16, "F": 8},
        465.0 * 879.7 * 840.0,
        None,
        "",
        {"303": 135.61},
        3.5e-4,  # 135.57 pm in use too
        25.0,
        6.0e-6,
        1.0e-6,
        "a 465.0, b 879.7, c 840.0 pm, from memory; expansion 5 to 7e-6, from memory",
    ),
)
"""The crystals that are known by name."""

_OTHER_INDICES = {
    # calcite cleavage: four indices, and the old morphological cell; quartz: four indices
    ("calcite", "1014"): "104",
    ("calcite", "211"): "104",
    ("quartz", "1011"): "101",
}

EXAMPLES = ", ".join(kind.material for kind in KINDS)
"""Names of the known crystals, for messages."""


def find_kind(material: str) -> CrystalKind | None:
    """Look up a crystal by name or formula, whatever the case; None if it is not known."""
    wanted = " ".join(material.split()).casefold()
    for kind in KINDS:
        if wanted == kind.material.casefold() or wanted in kind.other_names:
            return kind
    return None


def find_planes(kind: CrystalKind, reflection: str) -> Planes | None:
    """Look up a set of planes of a known crystal.

    Parameters
    ----------
    kind : CrystalKind
        The crystal.
    reflection : str
        Miller indices in any usual spelling: ``"200"``, ``"(2 0 0)"``, ``"10-14"``.

    Returns
    -------
    Planes or None
        None if the crystal has no such reflection (extinction), or it is neither in the table
        nor to be worked out.
    """
    indices = re.sub(r"[\s()\[\]{},.-]|\u2212|\u0305|\u0304", "", reflection)
    indices = _OTHER_INDICES.get((kind.material, indices), indices)
    spacing = kind.spacings_pm.get(indices)
    if spacing is None and kind.cubic_parameter_pm is not None and _reflects(kind, indices):
        spacing = _cubic_spacing(kind.cubic_parameter_pm, indices)
    if spacing is None:
        return None
    refraction = refraction_shift(spacing, kind.electrons_per_pm3)
    return Planes(
        kind=kind,
        reflection=indices,
        spacing_pm=spacing,
        spacing_half_width_pm=spacing * kind.half_width_relative,
        refraction=refraction,
        refraction_u=refraction * REFRACTION_RELATIVE_U,
    )


def _reflects(kind: CrystalKind, indices: str) -> bool:
    """Whether a cubic crystal of this kind has the reflection (rules of extinction)."""
    if not re.fullmatch(r"[0-9]{3}", indices) or indices == "000":
        return False
    parities = {int(index) % 2 for index in indices}
    if len(parities) != 1:
        return False
    return kind.centring != "D" or parities == {1} or sum(map(int, indices)) % 4 == 0
