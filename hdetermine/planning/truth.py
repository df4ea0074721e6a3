"""The truth of a simulated run: one number for every input, stated or drawn."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from hdetermine.errors import InputError
from hdetermine.planning.truthtable import TruthTable
from hdetermine.records.apparatus import Apparatus
from hdetermine.records.quantity import Quantity

DEFAULT_RESOLUTION_DEG = 0.25
"""Resolution where neither the run sheet nor the truth states one (common practice, no source)."""

_TRIES = 1000


@dataclass(frozen=True, slots=True)
class ScanTruth:
    """Where the limit of one scan truly is.

    Attributes
    ----------
    scan : str
        Name of the scan.
    displacement_kV : float
        The supply's own displacement in this scan (its repeatability).
    peak_voltage_kV : float
        Voltage that accelerates the fastest electrons, kV.
    energy_keV : float
        Their energy with the cathode's work function, keV.
    wavelength_pm : float
        Short-wavelength limit, pm.
    reading_deg : float
        Reading at which it stands, degrees.
    """

    scan: str
    displacement_kV: float
    peak_voltage_kV: float
    energy_keV: float
    wavelength_pm: float
    reading_deg: float


@dataclass(frozen=True, slots=True)
class Truth:
    """True inputs; names and units as in the ``[truth]`` table.

    `spacing_pm` holds at the crystal's reference temperature, `spacing_in_use_pm` at
    `temperature_C`. `triangular_fraction` is nan for a box.
    """

    voltage_gain: float
    voltage_offset_kV: float
    ripple: float
    cathode_work_function_eV: float
    near_limit_excess: float
    near_limit_energy_keV: float
    limit_step_keV: float
    spacing_pm: float
    spacing_in_use_pm: float
    temperature_C: float
    expansion_per_K: float
    refraction: float
    zero_deg: float
    resolution_deg: float
    triangular_fraction: float
    dead_time_us: float
    displacements_kV: tuple[float, ...]


def draw_from(quantity: Quantity, rng: np.random.Generator, low: float = -math.inf) -> float:
    """Draw from the distribution of a quantity, again as long as it is not above `low`.

    Parameters
    ----------
    quantity : Quantity
        What is known.
    rng : Generator
        Source of randomness.
    low : float
        Bound below which the quantity has no meaning.

    Returns
    -------
    float

    Raises
    ------
    InputError
        If the distribution lies as good as wholly below the bound.

    References
    ----------
    JCGM 101:2008, 6.4 (the distributions).
    """
    u, half = quantity.standard_uncertainty, quantity.half_width or 0.0
    for _ in range(_TRIES):
        if quantity.distribution == "rectangular":
            shift = half * rng.uniform(-1.0, 1.0)
        elif quantity.distribution == "triangular":
            shift = half * (rng.uniform(-0.5, 0.5) + rng.uniform(-0.5, 0.5))
        elif quantity.distribution == "arcsine":
            shift = half * math.sin(math.pi * rng.uniform(-0.5, 0.5))
        elif quantity.distribution == "t":
            shift = u * rng.standard_t(quantity.degrees_of_freedom)
        else:
            shift = u * rng.standard_normal()
        if quantity.value + shift > low or u == 0.0:
            return quantity.value + float(shift)
    raise InputError(
        f"key {quantity.name}: its distribution lies as good as wholly below {low:g}, where it "
        "has no meaning; state a smaller uncertainty."
    )


def settle_truth(
    table: TruthTable, apparatus: Apparatus, scans: int, rng: np.random.Generator
) -> Truth:
    """Give every input its true value.

    Parameters
    ----------
    table : TruthTable
        What is stated.
    apparatus : Apparatus
        What the run sheet knows: its estimates, or its distributions if ``draw = true``.
    scans : int
        Number of scans.
    rng : Generator
        For the draws; always asked in the same order.

    Returns
    -------
    Truth
    """

    def value(stated: float | None, quantity: Quantity, low: float = -math.inf) -> float:
        drawn = draw_from(quantity, rng, low) if table.draw else quantity.value
        return drawn if stated is None else stated

    tube, crystal, goniometer = apparatus.tube, apparatus.crystal, apparatus.goniometer
    gain = value(table.voltage_gain, tube.gain, 0.0)
    offset = value(table.voltage_offset_kV, tube.offset_kV)
    ripple = value(table.ripple, tube.ripple, -0.5)
    work_function = value(table.cathode_work_function_eV, tube.cathode_work_function_eV, 0.0)
    spacing = value(table.spacing_pm, crystal.spacing_pm, 0.0)
    temperature = value(table.temperature_C, crystal.temperature_C)
    expansion = value(table.expansion_per_K, crystal.expansion_per_K)
    refraction = value(table.refraction, crystal.refraction)
    zero = value(table.zero_deg, goniometer.zero_deg)
    triangular = value(None, goniometer.kernel_triangular_fraction, -1e-9)
    if isinstance(table.kernel, float):
        triangular = table.kernel
    elif table.kernel is not None:
        triangular = {"gaussian": 0.0, "triangular": 1.0, "box": math.nan}[table.kernel]
    resolution = table.resolution_deg or DEFAULT_RESOLUTION_DEG
    if goniometer.resolution_deg is not None:
        resolution = value(table.resolution_deg, goniometer.resolution_deg, 0.01)
    return Truth(
        voltage_gain=gain,
        voltage_offset_kV=offset,
        ripple=ripple,
        cathode_work_function_eV=work_function,
        near_limit_excess=value(
            table.near_limit_excess, apparatus.continuum.near_limit_excess, -0.99
        ),
        near_limit_energy_keV=value(
            table.near_limit_energy_keV, apparatus.continuum.near_limit_energy_keV, 0.005
        ),
        limit_step_keV=table.limit_step_keV if table.shape == "kulenkampff" else 0.0,
        spacing_pm=spacing,
        spacing_in_use_pm=spacing
        * (1.0 + expansion * (temperature - crystal.reference_temperature_C)),
        temperature_C=temperature,
        expansion_per_K=expansion,
        refraction=refraction,
        zero_deg=zero,
        resolution_deg=resolution,
        triangular_fraction=triangular,
        dead_time_us=value(table.dead_time_us, apparatus.counter.dead_time_us, -1e-12),
        displacements_kV=_displacements(table, tube.repeatability_kV, scans, rng),
    )


def _displacements(
    table: TruthTable, known: Quantity, scans: int, rng: np.random.Generator
) -> tuple[float, ...]:
    """The supply's displacement in each scan: listed, or drawn."""
    stated = table.voltage_repeatability_kV
    if isinstance(stated, tuple):
        if len(stated) != scans:
            raise InputError(
                f"key truth.voltage_repeatability_kV: found {len(stated)} displacements for "
                f"{scans} scans; list one a scan, or state one standard deviation."
            )
        return stated
    spread = stated
    if spread is None:
        spread = known.standard_uncertainty if table.draw else 0.0
    return tuple(spread * float(x) for x in rng.standard_normal(scans))
