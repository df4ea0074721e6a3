"""How each slip is made by a student; names are those of the truth table, not of the program."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from .students import (
    BOOK_LATTICE_PM,
    BOOK_SPACING_PM,
    E_CHARGE,
    KALPHA_PM,
    KBETA_PM,
    LIGHT,
    Bench,
    Work,
    do_work,
)

Maker = Callable[[Bench, np.random.Generator, str], Work]


def _after(step: str, hook: Callable[[Work], None]) -> Maker:
    def make(bench: Bench, rng: np.random.Generator, shows: str) -> Work:
        single, common = rng.uniform(0.002, 0.01), 0.003
        return do_work(bench, rng, {step: hook}, single=single, common=common, shows=shows)

    return make


# --- reading ----------------------------------------------------------------------------------


def straight_line(work: Work) -> None:
    """Lay a line through the rise with a ruler's eye and follow it down to the axis."""
    to_axis = work.rng.random() < 0.5
    points = int(work.rng.integers(4, 8))
    for row, scan in enumerate(work.bench.run.scans):
        rate = scan.counts / scan.dwell_s
        floor = rate[:8].mean()
        rise = next(
            i
            for i in range(8, rate.size - points)
            if np.all(rate[i : i + 3] > floor + 3.0 * np.sqrt(max(floor, 0.1) / scan.dwell_s[0]))
        )
        slope, intercept = np.polyfit(
            scan.reading_deg[rise : rise + points], rate[rise : rise + points], 1
        )
        work.reading[row] = ((0.0 if to_axis else floor) - intercept) / slope
    work.notes["places"] = 2
    work.notes["relative_u"] = 0.003


def first_rise(work: Work) -> None:
    """Take the last point before two rising ones that clearly stand out."""
    for row, scan in enumerate(work.bench.run.scans):
        floor = scan.counts[:8].mean()
        high = floor + 4.0 * np.sqrt(max(floor, 1.0))
        rise = next(
            i for i in range(8, scan.counts.size - 1) if np.all(scan.counts[i : i + 2] > high)
        )
        work.reading[row] = scan.reading_deg[rise - 1]
    work.notes["relative_u"] = 0.003


def maximum(work: Work) -> None:
    """Read where the continuum, short of the lines, is highest in a lightly smoothed curve."""
    beta = KBETA_PM[work.bench.anode] / 2.0 / BOOK_SPACING_PM[work.bench.crystal]
    line_deg = np.degrees(np.arcsin(beta)) + work.bench.simulated.truth.zero_deg
    for row, scan in enumerate(work.bench.run.scans):
        limit = work.reading[row]
        smooth = np.array(
            [scan.counts[max(0, i - 2) : i + 3].mean() for i in range(scan.counts.size)]
        )
        window = (scan.reading_deg > limit) & (scan.reading_deg < line_deg - 0.8)
        place = np.argmax(np.where(window, smooth, -1.0))
        work.reading[row] = scan.reading_deg[place]


def line(work: Work) -> None:
    """Read a characteristic line, the same at every voltage."""
    length = (KALPHA_PM if work.rng.random() < 0.6 else KBETA_PM)[work.bench.anode]
    spacing = BOOK_SPACING_PM[work.bench.crystal]
    angle = np.degrees(np.arcsin(length / 2.0 / spacing))
    zero = work.bench.simulated.truth.zero_deg
    work.reading = angle + zero + work.rng.normal(0.0, 0.02, work.reading.size)


def second_order(work: Work) -> None:
    """Take the kink where the second order sets in for the limit."""
    zero = work.bench.simulated.truth.zero_deg
    sine = 2.0 * np.sin(np.radians(work.reading - zero))
    work.reading = zero + np.degrees(np.arcsin(sine))


def no_zero(work: Work) -> None:
    """Use the readings as they are."""
    work.angle = work.reading.copy()


# --- angles and Bragg's law -------------------------------------------------------------------


def doubled(work: Work) -> None:
    work.angle = 2.0 * work.angle


def halved(work: Work) -> None:
    work.angle = work.angle / 2.0


def radians(work: Work) -> None:
    work.notes["places"] = 2
    work.notes["sine_of"] = np.round(work.angle, 2)


def no_factor_two(work: Work) -> None:
    work.notes["spacing"] = BOOK_SPACING_PM[work.bench.crystal] / 2.0


def lattice(work: Work) -> None:
    work.notes["spacing"] = BOOK_LATTICE_PM[work.bench.crystal]


def other_crystal(work: Work) -> None:
    others = [name for name in BOOK_SPACING_PM if name != work.bench.crystal]
    work.notes["spacing"] = BOOK_SPACING_PM[str(work.rng.choice(others))]


# --- relation ---------------------------------------------------------------------------------


def shifted_rows(work: Work) -> None:
    """Copy the cutoffs into the table one row too low or too high."""
    step = 1 if work.rng.random() < 0.5 else -1
    if work.rng.random() < 0.5:
        work.voltage = np.roll(work.voltage, step)  # only in the column of the fit
    else:
        work.wavelength = np.roll(work.wavelength, step)
        work.angle = np.roll(work.angle, step)
    work.kept[0 if step == 1 else -1] = False  # the row that has lost its partner
    work.notes["ways"] = 2  # a free intercept takes up the shift, and nothing is to be seen


def against_voltage(work: Work) -> None:
    slope = abs(np.polyfit(work.voltage[work.kept], work.wavelength[work.kept], 1)[0])
    work.slope_pm_kV = slope if work.rng.random() < 0.5 else slope * 1e-6


def inverted(work: Work) -> None:
    if work.rng.random() < 0.5:
        work.slope_pm_kV = 1.0 / work.slope_pm_kV  # numbers in 1/(pm kV)
    else:
        work.slope_pm_kV = 1e9 / (work.slope_pm_kV * 1e-9)  # 1/(V m), as if V m, in pm kV


def origin_with_offset(work: Work) -> None:
    displayed = work.bench.voltage
    x = 1.0 / displayed
    work.slope_pm_kV = float((x * work.wavelength).sum() / (x * x).sum())


# --- the number -------------------------------------------------------------------------------


def _in_joules(work: Work) -> float:
    return work.h * (E_CHARGE if work.unit == "eV s" else 1.0)


def power(work: Work) -> None:
    work.h *= 10.0 ** float(work.rng.choice([-10, -9, -3, -2, -1, 1, 2, 3, 9, 10]))


def ten_in_wavelength(work: Work) -> None:
    work.wavelength = work.wavelength * 10.0 ** float(work.rng.choice([-3, -2, -1, 1, 2, 3]))


def wrong_unit(work: Work) -> None:
    if work.unit == "J s":
        work.h = work.h / E_CHARGE
    else:
        work.h = work.h * E_CHARGE


def charge_squared(work: Work) -> None:
    work.unit, work.h = "J s", _in_joules(work) * E_CHARGE


def light_left_out(work: Work) -> None:
    work.h *= LIGHT if work.rng.random() < 0.6 else 1.0 / LIGHT


# --- the statement ----------------------------------------------------------------------------


def expanded_as_standard(work: Work) -> None:
    """State both, the same figure twice; or k the wrong way round."""
    u = abs(work.h) * work.rng.choice([0.006, 0.01, 0.015])
    way = work.rng.integers(3)
    work.standard, work.expanded = [(u, u), (2.0 * u, u), (2.0 * u, 2.0 * u)][way]


def rounded_away(work: Work) -> None:
    """State an uncertainty far below the last place of the value."""
    place = 10.0 ** np.floor(np.log10(abs(work.h)))
    work.h = float(np.round(work.h / place, 1) * place)
    work.standard = place * work.rng.choice([0.0012, 0.0021, 0.0034])
    work.notes["value_digits"] = 1


WITH_ANGLES = ("angle", "both")
CUTOFFS_SHOWN = ("angle", "wavelength", "both")
ANYTHING_SHOWN = ("h", "angle", "wavelength", "both")

SLIPS: dict[str, tuple[str, Maker, tuple[str, ...]]] = {
    # truth: code of the catalogue, how it is made, what such a claim shows
    "straight line": ("straight_line_crossing", _after("reading", straight_line), CUTOFFS_SHOWN),
    "first rise": ("first_rising_point", _after("reading", first_rise), CUTOFFS_SHOWN),
    "maximum": ("maximum", _after("reading", maximum), CUTOFFS_SHOWN),
    "line": ("characteristic_line", _after("reading", line), CUTOFFS_SHOWN),
    "second order": ("second_order", _after("reading", second_order), WITH_ANGLES),
    "n put to two": ("factor_two", _after("angle", no_factor_two), WITH_ANGLES),
    "no zero": ("zero_offset", _after("angle", no_zero), CUTOFFS_SHOWN),
    "doubled": ("double_angle", _after("angle", doubled), WITH_ANGLES),
    "halved": ("half_angle", _after("angle", halved), WITH_ANGLES),
    "radians": ("degrees_as_radians", _after("angle", radians), WITH_ANGLES),
    "no factor two": ("factor_two", _after("angle", no_factor_two), WITH_ANGLES),
    "lattice": ("lattice_parameter", _after("angle", lattice), WITH_ANGLES),
    "other crystal": ("other_crystal", _after("angle", other_crystal), ANYTHING_SHOWN),
    "shifted rows": ("shifted_voltages", _after("wavelength", shifted_rows), CUTOFFS_SHOWN),
    "against voltage": (
        "wavelength_against_voltage",
        _after("slope", against_voltage),
        ANYTHING_SHOWN,
    ),
    "inverted": ("inverted_slope", _after("slope", inverted), ANYTHING_SHOWN),
    "origin": ("forced_origin", _after("slope", origin_with_offset), CUTOFFS_SHOWN),
    "power": ("power_of_ten", _after("h", power), ANYTHING_SHOWN),
    "ten in wavelength": (
        "power_of_ten",
        _after("wavelength", ten_in_wavelength),
        ANYTHING_SHOWN,
    ),
    "unit": ("electronvolt_or_joule", _after("h", wrong_unit), ANYTHING_SHOWN),
    "charge": ("charge", _after("h", charge_squared), ANYTHING_SHOWN),
    "light": ("light_speed", _after("h", light_left_out), ANYTHING_SHOWN),
    "expanded": ("coverage", _after("h", expanded_as_standard), ANYTHING_SHOWN),
    "rounded away": ("rounded_away", _after("h", rounded_away), ANYTHING_SHOWN),
}
"""Every slip that can move a number by more than people scatter. Missing: dead time, which moves
a limit by 0.1 % on such benches and is therefore not to be seen in a claim. Where two slips give
the same number the claim shows what tells them apart (angles for 2 theta, half angles, radians,
factor 2, lattice parameter and second order); `class_study --h-alone` tells what happens when it
shows h alone."""


def honest(bench: Bench, rng: np.random.Generator) -> Work:
    """Work without a slip, with the ordinary scatter of 1 to 2 %."""
    shows = str(rng.choice(ANYTHING_SHOWN))
    if shows == "h":

        def scattered(work: Work) -> None:
            true = 6.62607015e-34 if work.unit == "J s" else 6.62607015e-34 / E_CHARGE
            work.h = true * (1.0 + rng.normal(0.0, rng.uniform(0.01, 0.02)))

        return do_work(bench, rng, {"h": scattered}, shows=shows)
    return do_work(
        bench, rng, single=rng.uniform(0.01, 0.02), common=rng.uniform(0.0, 0.01), shows=shows
    )
