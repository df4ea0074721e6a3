"""Features of the spectrum: characteristic lines in each order, and absorption edges."""

from __future__ import annotations

import math
from dataclasses import dataclass

from hdetermine.physics.bragg import glancing_angle_deg
from hdetermine.physics.lines import K_EDGE_pm, LineGroup, excited_groups
from hdetermine.records.scan import Scan

ORDERS = (1, 2, 3)


@dataclass(frozen=True, slots=True)
class Feature:
    """A group of lines in one order, as it should stand on an ideal goniometer.

    `components` are (true angle in degrees, natural FWHM in degrees, strength), strongest
    first; `by_spacing` is the change of the angle with the relative spacing, `by_wavelength`
    with the relative wavelength, degrees.
    """

    group: LineGroup
    order: int
    components: tuple[tuple[float, float, float], ...]
    by_spacing: float
    by_wavelength: float

    @property
    def angle_deg(self) -> float:
        """True angle of the strongest line, degrees."""
        return self.components[0][0]

    @property
    def label(self) -> str:
        """Name with the order, for instance ``Mo K-L2,3 (n = 2)``."""
        suffix = "" if self.order == 1 else f" (n = {self.order})"
        return self.group.label + suffix


def features(
    anode: str, energy_eV: float, spacing_pm: float, refraction: float
) -> tuple[Feature, ...]:
    """Every line group of an anode that electrons of this energy excite, by angle.

    Parameters
    ----------
    anode : str
        Chemical symbol.
    energy_eV : float
        Energy of the electrons.
    spacing_pm : float
        Spacing at the temperature of the run.
    refraction : float
        delta/sin^2(theta) in first order.
    """
    found = []
    for group in excited_groups(anode, energy_eV):
        for order in ORDERS:
            components = []
            for line in group.lines:
                angle = float(glancing_angle_deg(line.wavelength_pm, spacing_pm, refraction, order))
                tangent = math.tan(math.radians(angle))
                # dE/E = dlambda/lambda, and the lines lie far above their widths.
                relative = line.width_eV / (line.excitation_eV * 0.9)
                components.append((angle, math.degrees(relative * tangent), line.strength))
            if not all(math.isfinite(angle) and angle < 80.0 for angle, _, _ in components):
                continue
            tangent = math.degrees(math.tan(math.radians(components[0][0])))
            found.append(Feature(group, order, tuple(components), -tangent, tangent))
    return tuple(sorted(found, key=lambda feature: feature.angle_deg))


def covered(
    scan: Scan, every: tuple[Feature, ...], zero_deg: float, fwhm_deg: float
) -> tuple[Feature, ...]:
    """Features whose core lies well inside a scan."""
    low = scan.reading_deg[0] + fwhm_deg
    high = scan.reading_deg[-1] - fwhm_deg
    return tuple(f for f in every if low < f.angle_deg + zero_deg < high)


def absorption_angles_deg(
    elements: tuple[str, ...], spacing_pm: float, refraction: float
) -> tuple[float, ...]:
    """True angles of the K absorption edges of some elements, first order, degrees.

    Unknown elements, and edges out of the crystal's reach, are passed over.
    """
    wavelengths = [K_EDGE_pm[element] for element in elements if element in K_EDGE_pm]
    angles = [float(glancing_angle_deg(one, spacing_pm, refraction)) for one in wavelengths]
    return tuple(angle for angle in angles if math.isfinite(angle))
