"""Rounding: JCGM 100:2008, 7.2.6 and 7.2.2 (clauses from memory)."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hdetermine.report import rounding

NNBSP = "\N{NARROW NO-BREAK SPACE}"


@pytest.mark.parametrize(
    ("value", "u", "expected"),
    [
        # 7.2.6: u to two digits, the value to the same place.
        (10.057_62, 0.027, ("10.058", "0.027", "27", 0)),
        (100.021_47, 0.000_35, ("100.02147", "0.00035", "35", 0)),
        # Rounding carries over: 9.96 -> 10. (no digit behind the point), 0.0998 -> 0.10.
        (123.4, 9.96, ("123", "10", "10", 0)),
        (1.2345, 0.0998, ("1.23", "0.10", "10", 0)),
        (1234.0, 99.6, ("1.23", "0.10", "10", 3)),
        # Far from one.
        (6.626_070_15e-34, 2.96e-36, ("6.626", "0.030", "30", -34)),
        (6.022_140_76e23, 1.2e17, ("6.0221408", "0.0000012", "12", 23)),
        (299_792_458.0, 1.2, ("2.997924580", "0.000000012", "12", 8)),
        # Negative, zero and swamped values; no "-0".
        (-0.171_204, 0.002_878, ("-0.1712", "0.0029", "29", 0)),
        (0.0, 0.05, ("0.000", "0.050", "50", 0)),
        (-1e-9, 0.05, ("0.000", "0.050", "50", 0)),
        (3.0, 120.0, ("0.0", "1.2", "12", 2)),
        # Exact.
        (6.626_070_15e-34, 0.0, ("6.62607015", "0", "", -34)),
        (1000.0, 0.0, ("1000", "0", "", 0)),
        (0.0, 0.0, ("0", "0", "", 0)),
        # A value as long as its uncertainty: half to even on the decimal digits.
        (2.345, 0.25, ("2.34", "0.25", "25", 0)),
        (math.nan, 1.0, ("n/a", "n/a", "", 0)),
        (1.0, math.inf, ("n/a", "n/a", "", 0)),
    ],
)
def test_two_digits(value, u, expected):
    rounded = rounding.two_digits(value, u)
    assert (rounded.value, rounded.uncertainty, rounded.last_digits, rounded.exponent) == expected


@pytest.mark.parametrize(
    ("value", "u", "digits", "expected"),
    [
        (6.634e-34, 0.03e-34, 1, "6.63(3)e-34"),
        (6.634e-34, 0.03e-34, 2, "6.634(30)e-34"),
        (50.000_838, 0.000_032, 2, "50.000838(32)"),
        (12.34, 1.5, 2, "12.3(15)"),
        (-5.0e-6, 9.96e-8, 2, "-5.00(10)e-6"),
        (6.626_070_15e-34, 0.0, 2, "6.62607015e-34"),
    ],
)
def test_shorthand(value, u, digits, expected):
    assert rounding.shorthand(value, u, digits) == expected


@pytest.mark.parametrize(
    ("number", "digits", "expected"),
    [
        (9.96, 2, "10"),
        (0.0998, 2, "0.10"),
        (99.6, 2, "1.0e2"),
        (-0.002_96, 2, "-0.0030"),
        (2.14e-36, 2, "2.1e-36"),
        (1.234_5e7, 3, "1.23e7"),
        (0.0, 2, "0"),
        (math.inf, 2, "inf"),
        (math.nan, 2, "n/a"),
    ],
)
def test_figure(number, digits, expected):
    assert rounding.figure(number, digits) == expected


def test_typography():
    assert rounding.typeset_shorthand(6.634e-34, 3e-36) == "6.634(30) × 10⁻³⁴"
    assert rounding.typeset_plus_minus(6.634e-34, 3e-36) == "(6.634 ± 0.030) × 10⁻³⁴"
    assert rounding.typeset_plus_minus(-0.1712, 0.0029) == "−0.1712 ± 0.0029"
    assert rounding.typeset_shorthand(12_345.678_91, 0.000_12) == (f"12{NNBSP}345.678{NNBSP}91(12)")
    assert rounding.typeset_figure(-2.14e-36) == "−2.1 × 10⁻³⁶"
    assert rounding.grouped("1234.5678") == "1234.5678"
    assert rounding.grouped("n/a") == "n/a"
    assert rounding.plus_minus(6.634e-34, 3e-36) == "(6.634 +/- 0.030)e-34"
    assert rounding.latex_shorthand(6.634e-34, 3e-36) == r"$6.634(30)\times10^{-34}$"
    assert rounding.latex_figure(-0.25) == "$-0.25$"
    assert rounding.latex_figure(math.inf) == r"$\infty$"


def test_a_column_can_share_its_power_of_ten():
    assert rounding.two_digits(6.6e-34, 3e-37, exponent=-34).uncertainty == "0.0030"


def test_negative_uncertainty_is_refused():
    with pytest.raises(ValueError, match="never negative"):
        rounding.two_digits(1.0, -0.1)


@given(
    st.floats(-1e40, 1e40, allow_nan=False),
    st.floats(1e-40, 1e40, allow_nan=False),
)
def test_reading_it_back_keeps_to_the_last_place(value, u):
    rounded = rounding.two_digits(value, u)
    scale = 10.0**rounded.exponent
    back_u = float(rounded.uncertainty) * scale
    assert len(rounded.last_digits) == 2
    assert abs(back_u - u) <= 0.0501 * u
    place = back_u / int(rounded.last_digits)
    assert abs(float(rounded.value) * scale - value) <= 0.5 * place * (1 + 1e-9) + 1e-12 * abs(
        value
    )
    assert rounded.value != "-0"
