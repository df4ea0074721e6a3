"""What is assumed where the run sheet is silent: one row an input, each with its reason.

A row also says which estimates can be right at all, so that kilovolts given as volts or a
spacing given in angstroms are caught on reading.
"""

from __future__ import annotations

import math
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class InputRule:
    """One input of the run sheet.

    Attributes
    ----------
    key : str
        Dotted key, which is also the name of the quantity.
    symbol, unit : str
        Plain-text symbol and unit.
    allowed : (float, float)
        Estimates that can be right.
    support : (float, float)
        Limits within which a bounded distribution must stay; beyond them the model is undefined.
    hint : str
        The likely slip behind an estimate out of range.
    value : float or None
        Default estimate; None if there is none.
    half_width, u : float or None
        Default spread: rectangular half-width, or standard uncertainty of a normal distribution.
    reason : str
        Why this default.
    common : bool
        False if the input is independent from scan to scan.
    """

    key: str
    symbol: str
    unit: str
    allowed: tuple[float, float]
    support: tuple[float, float]
    hint: str = ""
    value: float | None = None
    half_width: float | None = None
    u: float | None = None
    reason: str = ""
    common: bool = True


_PRACTICE = "common practice, no source"

GAIN = InputRule(
    "tube.voltage.gain",
    "g",
    "1",
    (0.5, 2.0),
    (0.0, math.inf),
    "true over displayed voltage, close to 1",
    1.0,
    u=0.01,
    reason=f"displays of tube voltage are good to about 1 % ({_PRACTICE})",
)
OFFSET = InputRule(
    "tube.voltage.offset_kV",
    "U_0",
    "kV",
    (-10.0, 10.0),
    (-100.0, 100.0),
    "kilovolts, close to 0",
    0.0,
    half_width=0.1,
    reason=f"last digit of a display in steps of 0.1 kV ({_PRACTICE})",
)
REPEATABILITY = InputRule(
    "tube.voltage.repeatability_kV",
    "r",
    "kV",
    (0.0, 0.0),
    (-100.0, 100.0),
    "the estimate must be 0: a known shift belongs into offset_kV",
    0.0,
    u=0.02,
    reason=f"a regulated supply comes back to a fraction of its last digit ({_PRACTICE})",
    common=False,
)
RIPPLE = InputRule(
    "tube.voltage.ripple",
    "s",
    "1",
    (-0.01, 0.5),
    (-0.5, 1.0),
    "(peak - displayed)/displayed, a ratio and not percent",
    0.0,
    half_width=0.015,
    reason="a supply that does not state it may peak a percent or two off its display "
    f"({_PRACTICE})",
)
WORK_FUNCTION = InputRule(
    "tube.cathode_work_function_eV",
    "phi",
    "eV",
    (0.0, 10.0),
    (0.0, 100.0),
    "electronvolts; tungsten has about 4.5",
    4.5,
    half_width=0.3,
    reason="polycrystalline tungsten filament, 4.5 to 4.6 eV (from memory)",
)
SPACING = InputRule(
    "crystal.spacing_pm",
    "d",
    "pm",
    (50.0, 3000.0),
    (0.0, math.inf),
    "the spacing of the planes in picometres, not in angstroms or nanometres",
)
TEMPERATURE = InputRule(
    "crystal.temperature_C",
    "T",
    "degC",
    (-50.0, 150.0),
    (-273.15, math.inf),
    "degrees Celsius, not kelvin",
    22.0,
    u=2.0,
    reason=f"a room with people in it ({_PRACTICE})",
)
EXPANSION = InputRule(
    "crystal.expansion_per_K",
    "alpha",
    "1/K",
    (-1e-4, 1e-3),
    (-1e-3, 1e-2),
    "relative change per kelvin, for instance 33.5e-6",
    2e-5,
    half_width=2e-5,
    reason="unknown crystal: from nothing to the largest of the usual ones",
)
REFRACTION = InputRule(
    "crystal.refraction",
    "delta_r",
    "1",
    (-0.01, 0.01),
    (-0.1, 0.1),
    "delta/sin^2(theta), near 1e-4",
    0.0,
    half_width=3e-4,
    reason="unknown crystal: the usual ones lie between 0.4e-4 and 2e-4",
)
ZERO = InputRule(
    "goniometer.zero_deg",
    "z",
    "deg",
    (-10.0, 10.0),
    (-45.0, 45.0),
    "degrees, reading minus true angle",
    0.0,
    u=0.1,
    reason=f"goniometers are set to about a tenth of a degree ({_PRACTICE})",
)
RESOLUTION = InputRule(
    "goniometer.resolution_deg",
    "w",
    "deg",
    (0.001, 5.0),
    (0.0, math.inf),
    "full width at half maximum in degrees",
    u=None,
    half_width=None,
    reason="not assumed: it comes from the lines or from the edges",
)
KERNEL = InputRule(
    "goniometer.kernel_triangular_fraction",
    "kappa",
    "1",
    (0.0, 2.0),
    (0.0, 2.0),
    "a number from 0 (Gaussian) by 1 (triangular) to 2 (box)",
    0.5,
    half_width=0.5,
    reason="between a Gaussian and the triangle of two equal slits, nothing preferred",
)
DEAD_TIME = InputRule(
    "counter.dead_time_us",
    "tau",
    "us",
    (0.0, 10_000.0),
    (0.0, 1e6),
    "microseconds",
    90.0,
    half_width=60.0,
    reason=f"counter tubes have 50 to 150 us, faster counters less ({_PRACTICE})",
)
EXCESS = InputRule(
    "continuum.near_limit_excess",
    "a",
    "1",
    (-0.9, 10.0),
    (-0.99, math.inf),
    "a ratio, for instance 0.85",
    0.85,
    half_width=0.35,
    reason="ratio of three physics models of thick targets to Kramers' law, 0.5 to 1.2 "
    "(Mo, Rh, W; 20 to 40 kV)",
)
EXCESS_ENERGY = InputRule(
    "continuum.near_limit_energy_keV",
    "epsilon",
    "keV",
    (0.01, 20.0),
    (0.005, math.inf),
    "kiloelectronvolts, for instance 0.4",
    0.4,
    half_width=0.15,
    reason="the same models: the excess fades over about 0.4 keV",
)

RULES: tuple[InputRule, ...] = (
    GAIN,
    OFFSET,
    REPEATABILITY,
    RIPPLE,
    WORK_FUNCTION,
    SPACING,
    TEMPERATURE,
    EXPANSION,
    REFRACTION,
    ZERO,
    RESOLUTION,
    KERNEL,
    DEAD_TIME,
    EXCESS,
    EXCESS_ENERGY,
)
"""Every input that a run sheet may state."""

UNKNOWN_SPACING_RELATIVE = 1e-3
"""Relative half-width of a plain spacing of a crystal that is not in the table: such figures
are usually quoted to four digits."""

STATED_RESOLUTION_RELATIVE = 0.2
"""Relative standard uncertainty of a resolution stated as a plain number, as slit widths give
it (common practice, no source)."""
