"""The apparatus: tube, crystal, goniometer and counter, each input with its uncertainty."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, fields
from typing import Literal

from hdetermine.records.quantity import Quantity

DeadTimeModel = Literal["nonparalysable", "paralysable"]


@dataclass(frozen=True, slots=True)
class Tube:
    """X-ray tube and high-voltage supply.

    The voltage that accelerates the electrons is
    ``gain * displayed + offset_kV + repeatability_kV``, times ``1 + ripple`` at its peak.

    Attributes
    ----------
    anode : str
        Chemical symbol of the target, for instance ``"Mo"``.
    gain : Quantity
        True over displayed voltage, unit 1.
    offset_kV : Quantity
        True voltage at display zero, kV.
    repeatability_kV : Quantity
        Estimate zero; its standard uncertainty is independent from scan to scan, kV.
    ripple : Quantity
        (peak - displayed)/displayed, unit 1.
    cathode_work_function_eV : Quantity
        Work function of the filament, eV.
    filter : str
        Chemical symbol of a filter foil in the beam, or empty.
    """

    anode: str
    gain: Quantity
    offset_kV: Quantity
    repeatability_kV: Quantity
    ripple: Quantity
    cathode_work_function_eV: Quantity
    filter: str = ""


@dataclass(frozen=True, slots=True)
class Crystal:
    """Analysing crystal.

    Attributes
    ----------
    material : str
        Chemical formula, for instance ``"LiF"``.
    reflection : str
        Miller indices of the reflecting planes, for instance ``"200"``.
    spacing_pm : Quantity
        Spacing d of the planes at `reference_temperature_C`, pm.
    temperature_C : Quantity
        Temperature during the run, degrees Celsius.
    reference_temperature_C : float
        Temperature for which `spacing_pm` holds.
    expansion_per_K : Quantity
        Linear expansion coefficient along the plane normal, 1/K.
    refraction : Quantity
        delta/sin^2(theta) in first order: the relative shift of the Bragg condition, unit 1.
    elements : tuple of str
        Elements of the crystal (their absorption edges matter).
    """

    material: str
    reflection: str
    spacing_pm: Quantity
    temperature_C: Quantity
    reference_temperature_C: float
    expansion_per_K: Quantity
    refraction: Quantity
    elements: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Goniometer:
    """Goniometer and collimation.

    Attributes
    ----------
    zero_deg : Quantity
        Reading minus true glancing angle, degrees; what is known before the lines are used.
    resolution_deg : Quantity or None
        Full width at half maximum of the angular smearing, degrees; None if nobody stated it
        (then it comes from the lines or from the edges themselves).
    kernel_triangular_fraction : Quantity
        0 for a Gaussian, 1 for a triangular, 2 for a box-shaped smearing kernel, between them a
        mixture of the neighbours, unit 1.
    step_deg : float
        Nominal step of the scans, degrees.
    """

    zero_deg: Quantity
    resolution_deg: Quantity | None
    kernel_triangular_fraction: Quantity
    step_deg: float


@dataclass(frozen=True, slots=True)
class Counter:
    """Counter with its dead time.

    Attributes
    ----------
    dead_time_us : Quantity
        Dead time, microseconds.
    dead_time_model : {"nonparalysable", "paralysable"}
        Which of the two idealised models (Knoll, ch. 4) the counter follows.
    """

    dead_time_us: Quantity
    dead_time_model: DeadTimeModel


@dataclass(frozen=True, slots=True)
class Continuum:
    """What is known of the thick-target continuum close to its limit.

    The photon number per unit wavelength is taken as
    ``(lambda - lambda_min)/lambda**2 * (1 + excess*exp(-(E0 - E)/energy))`` times a smooth
    factor.

    Attributes
    ----------
    near_limit_excess : Quantity
        Relative excess over Kramers' law at the limit, unit 1.
    near_limit_energy_keV : Quantity
        Energy over which the excess fades, keV.
    """

    near_limit_excess: Quantity
    near_limit_energy_keV: Quantity


@dataclass(frozen=True, slots=True)
class Apparatus:
    """Everything about the instrument that the analysis takes as an input."""

    tube: Tube
    crystal: Crystal
    goniometer: Goniometer
    counter: Counter
    continuum: Continuum

    def quantities(self) -> Iterator[Quantity]:
        """Yield every quantity of the apparatus, in the order of the run sheet."""
        for part in (self.tube, self.crystal, self.goniometer, self.counter, self.continuum):
            for field in fields(part):
                value = getattr(part, field.name)
                if isinstance(value, Quantity):
                    yield value
