"""Slips: each named where it was made, none where none was; the rule that decides."""

from __future__ import annotations

import math

import numpy as np
import pytest
from closure.class_study import honest_answers, make_cases, slip_answers

from hdetermine.classcheck.alignment import align
from hdetermine.classcheck.arithmetic import (
    PROPER,
    RIGHT,
    Rows,
    Variant,
    line_with_intercept,
    predict,
    together,
)
from hdetermine.classcheck.claim import Claim, ClaimedCutoff
from hdetermine.classcheck.claimalone import check_alone, explain_number_alone
from hdetermine.classcheck.evidence import Evidence
from hdetermine.classcheck.explanation import WORDINGS, explain
from hdetermine.classcheck.numeral import Numeral, read_numeral
from hdetermine.classcheck.statement import statement_slips
from hdetermine.records.apparatus import Crystal
from hdetermine.records.quantity import Quantity

# SI, BIPM, The International System of Units, 9th ed. (2019): exact.
H, E, C = 6.62607015e-34, 1.602176634e-19, 299792458.0
VOLTAGE = np.array([20.0, 23.0, 26.0, 29.0, 32.0, 35.0])
SPACING = 201.35  # LiF (200), pm: lattice parameter 402.70 pm, NBS Circular 539 (from memory)
WAVELENGTH = H * C / E * 1e9 / VOLTAGE
ANGLE = np.degrees(np.arcsin(WAVELENGTH / 2.0 / SPACING))
ZERO = 0.4


def evidence(**changes):
    fields = {
        "displayed_kV": VOLTAGE,
        "supplied_kV": VOLTAGE,
        "angle_deg": ANGLE,
        "own_u": np.full(6, 0.002),
        "zero_deg": ZERO,
        "zero_u_deg": 0.005,
        "spacing_pm": SPACING,
        "lattice_parameter_pm": 2.0 * SPACING,
        "material": "LiF",
        "planck_J_s": H,
        "planck_u_J_s": 0.004 * H,
        "shifts_deg": {"dead_time": np.full(6, 1e-4)},
        "shortcuts_deg": {
            "crossing": (ANGLE - 0.14,),
            "first_rise": (ANGLE - 0.30,),
            "maximum": (1.6 * ANGLE,),
            "line": (np.full(6, 22.5),),
        },
        "last_deg": np.full(6, 25.0),
    }
    return Evidence(**{**fields, **changes})


def h_of(wavelength, voltage=VOLTAGE):
    return float(np.mean(wavelength * voltage)) * E / C * 1e-9


def claim(h=None, unit="J s", angles=None, wavelengths=None, u=None):
    cutoffs = [
        ClaimedCutoff(
            float(kV),
            None if wavelengths is None else read_numeral(f"{wavelengths[i]:.4g}", ""),
            None if angles is None else read_numeral(f"{angles[i]:.2f}", ""),
        )
        for i, kV in enumerate(VOLTAGE)
        if angles is not None or wavelengths is not None
    ]
    numeral = None if h is None else read_numeral(f"{h:.3e}", "")
    standard = None if u is None else read_numeral(f"{u:.1e}", "")
    return Claim("alder", "here", numeral, unit, standard, None, 2.0, tuple(cutoffs))


def first(one, data=None):
    found = explain(align(one, data or evidence()), one.unit)
    return found.slips[0].codes if found.slips else ()


def bragg(angles, spacing=SPACING):
    return np.abs(2.0 * spacing * np.sin(np.radians(angles)))


def with_angles(angles, wavelength, factor=1.0):
    return claim(h_of(wavelength) * factor, angles=angles)


# a flat maximum is read to a few percent
FLAT = 1.6 * ANGLE * np.array([1.05, 0.94, 1.03, 0.98, 1.06, 0.95])
SINGLE = {
    "double_angle": with_angles(2.0 * ANGLE, bragg(2.0 * ANGLE)),
    "half_angle": with_angles(ANGLE / 2.0, bragg(ANGLE / 2.0)),
    "degrees_as_radians": with_angles(
        np.round(ANGLE, 2), np.abs(2.0 * SPACING * np.sin(np.round(ANGLE, 2)))
    ),
    "factor_two": with_angles(ANGLE, WAVELENGTH / 2.0),
    "lattice_parameter": with_angles(ANGLE, 2.0 * WAVELENGTH),
    "other_crystal": with_angles(ANGLE, bragg(ANGLE, 282.01)),
    "second_order": with_angles(
        np.degrees(np.arcsin(2.0 * np.sin(np.radians(ANGLE)))), 2.0 * WAVELENGTH
    ),
    "zero_offset": with_angles(ANGLE + ZERO, bragg(ANGLE + ZERO)),
    "straight_line_crossing": with_angles(ANGLE - 0.14, bragg(ANGLE - 0.14)),
    "first_rising_point": with_angles(ANGLE - 0.30, bragg(ANGLE - 0.30)),
    "maximum": with_angles(FLAT, bragg(FLAT)),
    "characteristic_line": with_angles(np.full(6, 22.5), bragg(np.full(6, 22.5))),
    "shifted_voltages": claim(h_of(WAVELENGTH[1:], VOLTAGE[:-1]), wavelengths=WAVELENGTH),
    "wavelength_against_voltage": claim(
        -np.polyfit(VOLTAGE, WAVELENGTH, 1)[0] * 1e-15 * E / C, wavelengths=WAVELENGTH
    ),
    "inverted_slope": claim(E / C / (H * C / E)),
    "power_of_ten": claim(1000.0 * H),
    "electronvolt_or_joule": claim(H / E),
    "charge": claim(H * E),
    "light_speed": claim(H * C),
}


@pytest.mark.parametrize("code", SINGLE)
def test_each_slip_is_named_first_where_it_was_made(code):
    assert first(SINGLE[code]) == (code,)


def test_offset_of_the_supply_with_a_line_through_the_origin():
    supplied = VOLTAGE + 1.5
    wavelength = H * C / E * 1e9 / supplied
    angle = np.degrees(np.arcsin(wavelength / 2.0 / SPACING))
    x = 1.0 / VOLTAGE
    slope = x @ wavelength / (x @ x)
    data = evidence(supplied_kV=supplied, angle_deg=angle, shortcuts_deg={})
    one = claim(slope * E / C * 1e-9, wavelengths=wavelength)
    assert first(one, data) == ("forced_origin",)


def test_dead_time_is_named_only_where_it_can_be_seen():
    small = with_angles(ANGLE, WAVELENGTH)
    assert first(small) == ()
    shift = np.full(6, 0.5)
    data = evidence(shifts_deg={"dead_time": shift}, shortcuts_deg={}, zero_deg=0.0)
    assert first(with_angles(ANGLE + shift, bragg(ANGLE + shift)), data) == ("dead_time",)


def test_electronvolts_the_other_way():
    assert first(claim(H, unit="eV s")) == ("electronvolt_or_joule",)
    assert first(claim(H / E / E, unit="eV s")) == ("charge",)


def test_slips_that_coincide_are_all_listed():
    codes = [slip.codes for slip in explain(align(claim(2.0 * H), evidence()), "J s").slips]
    assert {("double_angle",), ("lattice_parameter",), ("second_order",)} <= set(codes)


def test_two_slips_where_one_does_not_do():
    one = with_angles(2.0 * ANGLE, bragg(2.0 * ANGLE), 1.0 / E)
    assert first(one) == ("double_angle", "electronvolt_or_joule")
    # and not where one does
    found = explain(align(SINGLE["double_angle"], evidence()), "J s")
    assert all(len(slip.codes) == 1 for slip in found.slips)


@pytest.mark.parametrize("relative", [0.0, 0.004, -0.012, 0.02, -0.02, 0.03])
def test_ordinary_scatter_names_nothing(relative):
    assert first(claim(H * (1.0 + relative), u=0.002 * H)) == ()


def test_a_claim_within_its_own_uncertainty_names_nothing():
    found = explain(align(claim(1.05 * H, u=0.03 * H), evidence()), "J s")
    assert found.agrees
    assert found.slips == ()


def test_a_number_that_nothing_produces_stays_unexplained():
    found = explain(align(with_angles(ANGLE, WAVELENGTH, 1.31), evidence()), "J s")
    assert (found.comparable, found.agrees, found.ordinary, found.slips) == (
        True, False, False, (),
    )  # fmt: skip


def test_predicted_h_follows_from_the_claimed_cutoffs():
    one = SINGLE["lattice_parameter"]
    slip = explain(align(one, evidence()), "J s").slips[0]
    assert slip.predicted_J_s == pytest.approx(one.value_J_s, rel=2e-3)
    assert slip.fit_probability > 0.05


def test_a_claimed_voltage_without_a_scan_is_filled_in():
    data = evidence()
    cut = {name: getattr(data, name)[1:] for name in (
        "displayed_kV", "supplied_kV", "angle_deg", "own_u", "last_deg")}  # fmt: skip
    short = evidence(**cut, shifts_deg={"dead_time": np.full(5, 1e-4)}, shortcuts_deg={})
    alignment = align(SINGLE["lattice_parameter"], short)
    assert alignment.evidence.angle_deg == pytest.approx(ANGLE, rel=1e-3)
    assert list(alignment.filled) == [True] + [False] * 5
    assert first(SINGLE["lattice_parameter"], short) == ("lattice_parameter",)


# --- the arithmetic ---------------------------------------------------------------------------


def test_proper_combinations_give_h_from_exact_cutoffs():
    rows = Rows(np.arange(0), np.arange(0), np.arange(6), True)
    for combine in PROPER:
        prediction = predict(evidence(), RIGHT, combine, rows)
        assert math.exp(prediction.log_values[0]) == pytest.approx(H, rel=1e-9)


def test_response_is_the_derivative():
    rows = Rows(np.arange(6), np.arange(6), np.arange(6), True)
    base = predict(evidence(), RIGHT, line_with_intercept, rows)
    moved = evidence(angle_deg=ANGLE * np.exp([0.0, 0.003, 0.0, 0.0, 0.0, 0.0]))
    other = predict(moved, RIGHT, line_with_intercept, rows)
    foreseen = base.log_values + base.response[:, 1] * 0.003
    assert other.log_values == pytest.approx(foreseen, abs=2e-5)


def test_two_variants_of_one_step_cannot_be_together():
    halves = Variant(called=lambda angle: angle / 2.0)
    assert together(halves, Variant(called=lambda angle: 2.0 * angle)) is None
    both = together(halves, Variant(planck_factor=E))
    assert both.planck_factor == E
    assert both.called is halves.called


# --- the statement of the uncertainty ---------------------------------------------------------


def stated(value, u=None, expanded=None, k=2.0):
    numerals = [None if text is None else read_numeral(text, "") for text in (value, u, expanded)]
    return Claim("a", "b", numerals[0], "J s", numerals[1], numerals[2], k)


@pytest.mark.parametrize(
    ("one", "codes"),
    [
        (stated("6.55e-34", "0.04e-34"), []),
        (stated("6.55e-34", "0.04e-34", "0.08e-34"), []),
        (stated("6.55e-34", "0.08e-34", "0.08e-34"), ["coverage"]),
        (stated("6.55e-34", "0.08e-34", "0.04e-34"), ["coverage"]),
        (stated("6.55e-34", "0.04e-34", "0.04e-34", 1.0), []),
        (stated("6.6e-34", "0.0031e-34"), ["rounded_away"]),
        (stated("6.6e-34", "0.03e-34"), []),  # a spreadsheet dropped a zero
        (stated("6.6e-34", None, "0.004e-34"), ["rounded_away"]),
        (stated("6.63e-34", "0.00e-34"), ["rounded_away"]),
        (stated("6.63(4)e-34"), []),
    ],
)
def test_statement_slips(one, codes):
    assert [slip.codes[0] for slip in statement_slips(one)] == codes


# --- claims without data ----------------------------------------------------------------------


def crystal():
    def quantity(value):
        return Quantity("q", "q", value, 0.0, "1")

    return Crystal("LiF", "200", quantity(SPACING), quantity(25.0), 25.0, quantity(0.0),
                   quantity(0.0))  # fmt: skip


def test_a_claim_is_checked_against_itself():
    good = claim(h_of(WAVELENGTH), wavelengths=WAVELENGTH)
    assert check_alone(good, None).agrees
    bad = claim(1.21 * h_of(WAVELENGTH), wavelengths=WAVELENGTH)
    found = check_alone(bad, None)
    assert found.comparable
    assert not found.agrees
    named = check_alone(claim(h_of(WAVELENGTH) / E, wavelengths=WAVELENGTH), None)
    assert named.slips[0].codes == ("electronvolt_or_joule",)


def test_a_consistent_claim_is_still_held_against_the_si_value():
    doubled = claim(h_of(bragg(2.0 * ANGLE)), angles=2.0 * ANGLE, wavelengths=bragg(2.0 * ANGLE))
    found = check_alone(doubled, crystal())
    assert found.agrees
    assert found.slips[0].codes == ("double_angle",)
    alone = explain_number_alone(claim(H / E), None)
    assert alone.slips[0].codes == ("electronvolt_or_joule",)


# --- closure, the quick part of the study -----------------------------------------------------


def test_students_with_and_without_slips():
    """Students of `closure.students` on two benches; the full study is a command."""
    cases = list(make_cases(2, 4))
    answers = slip_answers(cases, 48, 11)
    assert sum(one.listed for one in answers) >= 46
    assert sum(one.first for one in answers) >= 44
    assert [one.named for one in honest_answers(cases, 60, 12) if one.named] == []


def test_wordings_accuse_nobody():
    for words in WORDINGS.values():
        text = f"{words.title} {words.sentence} {words.remedy}".casefold()
        for word in ("mistake", "you ", "wrong", "careless", "forgot", "error"):
            assert word not in text
        assert words.sentence.endswith(".")
        assert words.remedy.endswith(".")


def test_numerals_carry_rounding():
    assert Numeral(6.6, 0.1).rounding_u == pytest.approx(0.1 / math.sqrt(12.0))
