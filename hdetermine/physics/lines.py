"""Characteristic lines of the usual anodes, and absorption edges.

Wavelengths: NIST Standard Reference Database 128 (Deslattes, Kessler, Indelicato, de Billy,
Lindroth and Anton, Rev. Mod. Phys. 75, 35 (2003)), directly measured values, converted with
hc/e of the 2019 SI; Cr, Fe, Co and Cu K-M2,3 are one unresolved value. Natural widths: sums of
the level widths of Campbell and Papp, At. Data Nucl. Data Tables 77, 1 (2001), as carried by
xraylib 4.3.0. Excitation thresholds and absorption edges: xraydb 4.5.8, good to 0.02 %.
The weak K-N2,3
line beside K-M2,3 of Mo, Rh and Ag is taken, with its strength, from xraydb 4.5.8 (2e-4).
Strengths within a group: 0.52 for K-L2 against K-L3 and for K-M2 against K-M3, 0.11 for L3-M4
against L3-M5 (common practice, no source).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache


@dataclass(frozen=True, slots=True)
class Line:
    """One characteristic line.

    Attributes
    ----------
    element : str
        Chemical symbol of the anode.
    transition : str
        IUPAC name, for instance ``K-L3``.
    group : str
        Lines of one group stand so close that a bench spectrometer sees them as one.
    wavelength_pm, wavelength_u_pm : float
        Wavelength and its standard uncertainty, pm.
    excitation_eV : float
        Energy an electron needs to excite it, eV.
    width_eV : float
        Natural width (FWHM), eV.
    strength : float
        Photon number relative to the strongest line of the group.
    """

    element: str
    transition: str
    group: str
    wavelength_pm: float
    wavelength_u_pm: float
    excitation_eV: float
    width_eV: float
    strength: float


# fmt: off
LINES: tuple[Line, ...] = (
    Line("Cr", "K-L3", "K-L2,3", 228.972622, 0.000300, 5989.0, 1.34, 1.0),
    Line("Cr", "K-L2", "K-L2,3", 229.365124, 0.000301, 5989.0, 1.78, 0.52),
    Line("Cr", "K-M3", "K-M2,3", 208.488126, 0.000386, 5989.0, 2.22, 1.0),
    Line("Cr", "K-M2", "K-M2,3", 208.488126, 0.000386, 5989.0, 2.22, 0.52),
    Line("Fe", "K-L3", "K-L2,3", 193.604120, 0.000299, 7112.0, 1.60, 1.0),
    Line("Fe", "K-L2", "K-L2,3", 193.997319, 0.000301, 7112.0, 2.33, 0.52),
    Line("Fe", "K-M3", "K-M2,3", 175.660420, 0.000398, 7112.0, 2.42, 1.0),
    Line("Fe", "K-M2", "K-M2,3", 175.660420, 0.000398, 7112.0, 2.42, 0.52),
    Line("Co", "K-L3", "K-L2,3", 178.899619, 0.000101, 7709.0, 1.75, 1.0),
    Line("Co", "K-L2", "K-L2,3", 179.283518, 0.000101, 7709.0, 2.41, 0.52),
    Line("Co", "K-M3", "K-M2,3", 162.082607, 0.000297, 7709.0, 2.55, 1.0),
    Line("Co", "K-M2", "K-M2,3", 162.082607, 0.000297, 7709.0, 2.53, 0.52),
    Line("Cu", "K-L3", "K-L2,3", 154.059307, 0.000050, 8979.0, 2.10, 1.0),
    Line("Cu", "K-L2", "K-L2,3", 154.442756, 0.000050, 8979.0, 2.53, 0.52),
    Line("Cu", "K-M3", "K-M2,3", 139.223412, 0.000594, 8979.0, 3.29, 1.0),
    Line("Cu", "K-M2", "K-M2,3", 139.223412, 0.000594, 8979.0, 3.39, 0.52),
    Line("Mo", "K-L3", "K-L2,3", 70.931724, 0.000041, 20000.0, 6.21, 1.0),
    Line("Mo", "K-L2", "K-L2,3", 71.360728, 0.001191, 20000.0, 6.35, 0.52),
    Line("Mo", "K-M3", "K-M2,3", 63.230339, 0.001354, 20000.0, 6.62, 1.0),
    Line("Mo", "K-M2", "K-M2,3", 63.288727, 0.001325, 20000.0, 6.62, 0.52),
    Line("Mo", "K-N2,3", "K-M2,3", 62.108864, 0.012422, 20000.0, 10.0, 0.252),
    Line("Rh", "K-L3", "K-L2,3", 61.329374, 0.000607, 23220.0, 7.73, 1.0),
    Line("Rh", "K-L2", "K-L2,3", 61.764589, 0.000615, 23220.0, 7.90, 0.52),
    Line("Rh", "K-M3", "K-M2,3", 54.561889, 0.000408, 23220.0, 8.02, 1.0),
    Line("Rh", "K-M2", "K-M2,3", 54.621405, 0.000409, 23220.0, 8.02, 0.52),
    Line("Rh", "K-N2,3", "K-M2,3", 53.511814, 0.010702, 23220.0, 10.0, 0.279),
    Line("Ag", "K-L3", "K-L2,3", 55.942184, 0.000076, 25514.0, 8.91, 1.0),
    Line("Ag", "K-L2", "K-L2,3", 56.381313, 0.000256, 25514.0, 9.08, 0.52),
    Line("Ag", "K-M3", "K-M2,3", 49.708167, 0.000598, 25514.0, 9.31, 1.0),
    Line("Ag", "K-M2", "K-M2,3", 49.769785, 0.000599, 25514.0, 9.21, 0.52),
    Line("Ag", "K-N2,3", "K-M2,3", 48.716203, 0.009743, 25514.0, 10.0, 0.298),
    Line("W", "K-L3", "K-L2,3", 20.901316, 0.000018, 69525.0, 44.91, 1.0),
    Line("W", "K-L2", "K-L2,3", 21.383307, 0.000052, 69525.0, 44.92, 0.52),
    Line("W", "K-M3", "K-M2,3", 18.437683, 0.000302, 69525.0, 46.50, 1.0),
    Line("W", "K-M2", "K-M2,3", 18.518319, 0.000069, 69525.0, 48.20, 0.52),
    Line("W", "L3-M5", "L3-M4,5", 147.631133, 0.000949, 10207.0, 6.51, 1.0),
    Line("W", "L3-M4", "L3-M4,5", 148.745220, 0.003034, 10207.0, 6.51, 0.11),
    Line("W", "L2-M4", "L2-M4", 128.181170, 0.001325, 11544.0, 6.52, 1.0),
    Line("W", "L3-N5", "L3-N5", 124.430493, 0.000974, 10207.0, 8.61, 1.0),
    Line("W", "L2-N4", "L2-N4", 109.856635, 0.004478, 11544.0, 8.92, 1.0),
    Line("W", "L1-M3", "L1-M3", 126.270837, 0.005916, 12100.0, 12.70, 1.0),
)
# fmt: on

# Wavelengths, not energies: turning one into the other takes h, and h is what is sought.
K_EDGE_pm: dict[str, float] = {
    "Ca": 307.044,
    "Ti": 249.666,
    "Cr": 207.020,
    "Fe": 174.331,
    "Co": 160.830,
    "Ni": 148.787,
    "Cu": 138.082,
    "Zn": 128.361,
    "Ge": 111.667,
    "Br": 92.017,
    "Zr": 68.888,
    "Nb": 65.303,
    "Mo": 61.992,
    "Rh": 53.395,
    "Pd": 50.918,
    "Ag": 48.595,
}
"""K absorption edges, pm (xraydb 4.5.8, after Elam, Ravel and Sieber 2002; good to 0.02 %)."""


@dataclass(frozen=True, slots=True)
class LineGroup:
    """Lines that are seen as one, strongest first."""

    element: str
    name: str
    lines: tuple[Line, ...]

    @property
    def label(self) -> str:
        """Element and group, for instance ``Mo K-L2,3``."""
        return f"{self.element} {self.name}"

    @property
    def excitation_eV(self) -> float:
        """Energy that excites the group, eV."""
        return self.lines[0].excitation_eV

    @property
    def wavelength_pm(self) -> float:
        """Wavelength of the strongest line, pm."""
        return self.lines[0].wavelength_pm


@cache
def anodes() -> tuple[str, ...]:
    """Elements whose lines are known."""
    return tuple(dict.fromkeys(line.element for line in LINES))


@cache
def line_groups(anode: str) -> tuple[LineGroup, ...]:
    """Groups of lines of an anode by rising wavelength; empty for an unknown anode."""
    names = dict.fromkeys(line.group for line in LINES if line.element == anode)
    groups = []
    for name in names:
        members = [line for line in LINES if line.element == anode and line.group == name]
        members.sort(key=lambda line: -line.strength)
        groups.append(LineGroup(anode, name, tuple(members)))
    return tuple(sorted(groups, key=lambda group: group.wavelength_pm))


def excited_groups(anode: str, energy_eV: float) -> tuple[LineGroup, ...]:
    """Groups that electrons of this energy (eV) can excite."""
    return tuple(group for group in line_groups(anode) if group.excitation_eV < energy_eV)
