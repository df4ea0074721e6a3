"""Straight lines against published fits.

Each case names its source; "from memory" marks numbers whose text was not at hand when they
were collected, all of which were recomputed independently.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

from hdetermine.errors import InputError
from hdetermine.inference.birge import birge_ratio, modified_birge_factor, weighted_mean
from hdetermine.inference.line import fit_straight_line
from hdetermine.physics.constants import ELEMENTARY_CHARGE_C, SPEED_OF_LIGHT_M_PER_S
from hdetermine.physics.reference import PLANCK_CONSTANT_J_S


def squared(uncertainties):
    return np.diag(np.square(np.asarray(uncertainties, dtype=float)))


class TestPearsonYork:
    """K. Pearson, Phil. Mag. 2, 559 (1901), with the weights of D. York, Can. J. Phys. 44, 1079.

    Data as in M. Lybanon, Am. J. Phys. 52, 22 (1984). Results of York 1966 and York et al.,
    Am. J. Phys. 72, 367 (2004): from memory, recomputed to every digit.
    """

    x = (0.0, 0.9, 1.8, 2.6, 3.3, 4.4, 5.2, 6.1, 6.5, 7.4)
    y = (5.9, 5.4, 4.4, 4.6, 3.5, 3.7, 2.8, 2.8, 2.4, 1.5)
    weight_x = np.array([1000, 1000, 500, 800, 200, 80, 60, 20, 1.8, 1.0])
    weight_y = np.array([1.0, 1.8, 4.0, 8.0, 20, 20, 70, 70, 100, 500])

    def test_line_and_its_uncertainty(self):
        line = fit_straight_line(
            self.x, self.y, np.diag(1 / self.weight_x), np.diag(1 / self.weight_y)
        )
        assert line.slope == pytest.approx(-0.480533407, abs=5e-10)
        assert line.intercept == pytest.approx(5.47991022, abs=5e-9)
        assert line.chi2 == pytest.approx(11.866353194, rel=1e-9)
        assert line.chi2 / line.degrees_of_freedom == pytest.approx(1.483, abs=5e-4)
        # York 2004 convention: expected information at the adjusted points.
        assert line.slope_u == pytest.approx(0.057985009, rel=1e-7)
        assert line.intercept_u == pytest.approx(0.294970735, rel=1e-7)
        assert line.covariance[0, 1] == pytest.approx(-0.016472545, rel=1e-6)
        # Times the root of chi2 per degree of freedom: the values that are often printed.
        assert line.slope_u * line.scatter == pytest.approx(0.07062027, rel=1e-6)
        assert line.intercept_u * line.scatter == pytest.approx(0.3592465, rel=1e-6)

    def test_exchanging_the_axes_gives_the_same_line(self):
        """Maximum likelihood does not mind which variable is called x."""
        line = fit_straight_line(
            self.x, self.y, np.diag(1 / self.weight_x), np.diag(1 / self.weight_y)
        )
        turned = fit_straight_line(
            self.y, self.x, np.diag(1 / self.weight_y), np.diag(1 / self.weight_x)
        )
        assert turned.slope == pytest.approx(1 / line.slope, rel=1e-10)
        assert turned.intercept == pytest.approx(-line.intercept / line.slope, rel=1e-10)

    def test_orthogonal_and_ordinary_fits(self):
        """Pearson 1901 printed -0.546 and 5.784 (from memory) for equal errors in x and y."""
        one = np.eye(10)
        orthogonal = fit_straight_line(self.x, self.y, one, one)
        assert orthogonal.slope == pytest.approx(-0.546, abs=5e-4)
        assert orthogonal.intercept == pytest.approx(5.784, abs=5e-4)
        ordinary = fit_straight_line(self.x, self.y)
        assert ordinary.slope == pytest.approx(-0.53957727, abs=5e-9)
        assert ordinary.intercept == pytest.approx(5.76118519, abs=5e-9)


# ISO/TS 28037:2010, Determination and use of straight-line calibration functions: from memory,
# recomputed to every printed digit. (a, u(a), b, u(b), cov(a, b), chi-squared)
ISO_28037 = {
    "clause 6, equal weights": (
        [1, 2, 3, 4, 5, 6],
        [3.3, 5.6, 7.1, 9.3, 10.7, 12.1],
        None,
        [0.5] * 6,
        (1.867, 0.465, 1.757, 0.120, -0.050, 1.665),
    ),
    "clause 6, unequal weights": (
        [1, 2, 3, 4, 5, 6],
        [3.2, 4.3, 7.6, 8.6, 11.7, 12.8],
        None,
        [0.5, 0.5, 0.5, 1, 1, 1],
        (0.885, 0.530, 2.057, 0.178, -0.082, 4.131),
    ),
    "clause 7, both uncertain": (
        [1.2, 1.9, 2.9, 4.0, 4.7, 5.9],
        [3.4, 4.4, 7.2, 8.5, 10.8, 13.5],
        [0.2] * 6,
        [0.2, 0.2, 0.2, 0.4, 0.4, 0.4],
        (0.5788, 0.4764, 2.1597, 0.1355, -0.0577, 2.743),
    ),
}


@pytest.mark.parametrize("case", ISO_28037)
def test_iso_ts_28037(case):
    x, y, u_x, u_y, (a, u_a, b, u_b, covariance, chi2) = ISO_28037[case]
    line = fit_straight_line(x, y, None if u_x is None else squared(u_x), squared(u_y))
    last = 5e-4 if u_x is None else 5e-5
    assert line.intercept == pytest.approx(a, abs=last)
    assert line.intercept_u == pytest.approx(u_a, abs=last)
    assert line.slope == pytest.approx(b, abs=last)
    assert line.slope_u == pytest.approx(u_b, abs=last)
    assert line.covariance[0, 1] == pytest.approx(covariance, abs=last)
    assert line.chi2 == pytest.approx(chi2, abs=5e-4)
    assert line.degrees_of_freedom == 4


NORRIS = """
0.2 0.1  337.4 338.8  118.2 118.1  884.6 888.0  10.1 9.2  226.5 228.1  666.3 668.5  996.3 998.5
448.6 449.1  777.0 778.9  558.2 559.2  0.4 0.3  0.6 0.1  775.5 778.1  666.9 668.8  338.0 339.3
447.5 448.9  11.6 10.8  556.0 557.7  228.1 228.3  995.8 998.0  887.6 888.8  120.2 119.6  0.3 0.3
0.3 0.6  556.8 557.6  339.1 339.3  887.2 888.0  999.0 998.5  779.0 778.9  11.1 10.2  118.3 117.6
229.2 228.9  669.1 668.4  448.9 449.2  0.5 0.2
"""


def test_norris_certified_values():
    """NIST Statistical Reference Datasets, Norris (linear regression, lower difficulty)."""
    pairs = np.array(NORRIS.split(), dtype=float).reshape(-1, 2)
    line = fit_straight_line(pairs[:, 0], pairs[:, 1])
    assert line.intercept == pytest.approx(-0.262323073774029, rel=1e-11)
    assert line.slope == pytest.approx(1.00211681802045, rel=1e-13)
    assert line.intercept_u == pytest.approx(0.232818234301152, rel=1e-12)
    assert line.slope_u == pytest.approx(0.429796848199937e-3, rel=1e-12)
    assert line.scatter == pytest.approx(0.884796396144373, rel=1e-12)
    assert line.chi2 == pytest.approx(26.6173985294224, rel=1e-12)
    assert line.degrees_of_freedom == 34


class TestThermometer:
    """JCGM 100:2008, H.3 (from memory, recomputed)."""

    temperature = np.array(
        [21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.010, 26.511]
    )
    correction = np.array(
        [-0.171, -0.169, -0.166, -0.159, -0.164, -0.165, -0.156, -0.157, -0.159, -0.161, -0.160]
    )

    def test_printed_results(self):
        line = fit_straight_line(self.temperature - 20.0, self.correction)
        assert line.intercept == pytest.approx(-0.1712, abs=5e-5)
        assert line.intercept_u == pytest.approx(0.0029, abs=5e-5)
        assert line.slope == pytest.approx(0.00218, abs=5e-6)
        assert line.slope_u == pytest.approx(0.00067, abs=5e-6)
        correlation = line.covariance[0, 1] / (line.slope_u * line.intercept_u)
        assert correlation == pytest.approx(-0.930, abs=5e-4)
        assert line.scatter == pytest.approx(0.0035, abs=5e-5)
        value, u = line.value_at(10.0)
        assert value == pytest.approx(-0.1494, abs=5e-5)
        assert u == pytest.approx(0.0041, abs=5e-5)
        assert line.degrees_of_freedom == 9

    def test_reference_temperature_without_correlation(self):
        mean = float(self.temperature.mean())
        assert mean == pytest.approx(24.0085, abs=5.1e-5)
        line = fit_straight_line(self.temperature - mean, self.correction)
        assert abs(line.covariance[0, 1]) < 1e-12 * line.slope_u * line.intercept_u


class TestBevington:
    """Bevington and Robinson, Data Reduction and Error Analysis, 3rd ed. (2003), ch. 6.

    Results as quoted in a public comparison of regression methods; data from memory.
    """

    def test_table_6_1(self):
        x = np.arange(10.0, 91.0, 10.0)
        y = [0.37, 0.58, 0.83, 1.15, 1.36, 1.62, 1.90, 2.18, 2.45]
        line = fit_straight_line(x, y)
        assert line.slope == pytest.approx(0.02622, abs=5e-6)
        assert line.slope_u == pytest.approx(0.00034, abs=5e-6)
        assert line.intercept == pytest.approx(0.0714, abs=5e-5)
        assert line.intercept_u == pytest.approx(0.01917, abs=5e-6)

    def test_table_6_2(self):
        distance = np.array([0.20, 0.25, 0.30, 0.35, 0.40, 0.45, 0.50, 0.60, 0.75, 1.00])
        counts = np.array([901, 652, 443, 339, 283, 281, 240, 220, 180, 154], dtype=float)
        line = fit_straight_line(distance**-2, counts, None, np.diag(counts))
        assert line.slope == pytest.approx(30.6979, abs=5e-5)
        assert line.slope_u == pytest.approx(1.0341, abs=5e-5)
        assert line.intercept == pytest.approx(119.4963, abs=5.1e-4)
        assert line.intercept_u == pytest.approx(7.5676, abs=5e-5)


# Slope bias, ppm, and intercept, pm, where a work function of 4.5 eV is ignored (computed for
# these checks, no publication behind it; the need for the correction: Bearden and Schwarz,
# Phys. Rev. 79, 674 (1950), abstract).
WORK_FUNCTION = {
    "20 to 35 kV": ((20, 25, 30, 35), -186, -356, 8.35e-3),
    "15 to 40 kV": ((15, 20, 25, 30, 35, 40), -228, -412, 1.04e-2),
}


@pytest.mark.parametrize("case", WORK_FUNCTION)
def test_bias_of_an_ignored_work_function(case):
    voltages_kV, through_origin, with_intercept, offset_pm = WORK_FUNCTION[case]
    exact = PLANCK_CONSTANT_J_S * SPEED_OF_LIGHT_M_PER_S / ELEMENTARY_CHARGE_C * 1e9
    voltages = np.array(voltages_kV, dtype=float)
    wavelengths = exact / (voltages + 4.5e-3)
    held = fit_straight_line(1 / voltages, wavelengths, intercept=False)
    assert 1e6 * (held.slope / exact - 1) == pytest.approx(through_origin, abs=0.5)
    free = fit_straight_line(1 / voltages, wavelengths)
    assert 1e6 * (free.slope / exact - 1) == pytest.approx(with_intercept, abs=0.5)
    assert free.intercept == pytest.approx(offset_pm, abs=0.5e-4)
    corrected = fit_straight_line(1 / (voltages + 4.5e-3), wavelengths, intercept=False)
    assert corrected.slope == pytest.approx(exact, rel=1e-14)


class TestPlanckOverCharge:
    """Four published h/e values in 1e-17 erg s/esu, from the papers' abstracts.

    Bailey, thesis, California Institute of Technology (1941); Panofsky, Green and DuMond, Phys.
    Rev. 62, 214 (1942); Bearden and Schwarz, Phys. Rev. 79, 674 (1950); Bearden, Johnson and
    Watts, Phys. Rev. 81, 70 (1951). Ratio and mean computed for these checks.
    """

    values = (1.38054, 1.3786, 1.37938, 1.37928)
    uncertainties = (0.00115, 0.0002, 0.00008, 0.00004)

    def test_birge_ratio(self):
        """R. T. Birge, Phys. Rev. 40, 207 (1932)."""
        assert birge_ratio(self.values, self.uncertainties) == pytest.approx(2.185004, abs=5e-7)

    def test_weighted_mean(self):
        mean = weighted_mean(self.values, self.uncertainties)
        assert mean.value == pytest.approx(1.3792795, abs=5e-8)
        assert mean.standard_uncertainty == pytest.approx(0.0000352, abs=5e-8)
        assert mean.chi2 == pytest.approx(14.3, abs=0.05)
        assert mean.degrees_of_freedom == 3
        # 1 erg s/esu is 299.792458 V s.
        exact = PLANCK_CONSTANT_J_S / ELEMENTARY_CHARGE_C / 299.792458 * 1e17
        assert exact == pytest.approx(1.379510253, abs=5e-10)
        assert 1e6 * (mean.value / exact - 1) == pytest.approx(-167, abs=0.5)

    def test_the_unit_does_not_matter(self):
        small = 1e-17 * np.array(self.values)
        assert birge_ratio(small, 1e-17 * np.array(self.uncertainties)) == pytest.approx(
            2.185004, abs=5e-7
        )


GRAVITATION = """
6.67248 6.6729 6.67398 6.674255 6.67559 6.67422 6.67387 6.67222 6.67425 6.67349 6.67260 6.67554
6.67191 6.67435 6.674184 6.674484
"""


def test_gravitation_constant_of_codata_2018():
    """Tiesinga, Mohr, Newell and Taylor, Rev. Mod. Phys. 93, 025010 (2021).

    Values from memory, without the few small correlations; expansion factor 3.9 such that no
    normalised residual exceeds two.
    """
    values = np.array(GRAVITATION.split(), dtype=float)
    u = 1e-5 * np.array([43, 50, 70, 9.2, 27, 98, 27, 87, 12, 18, 25, 16, 99, 13, 7.8, 7.7])
    mean = weighted_mean(values, u)
    assert mean.value == pytest.approx(6.674290, abs=5e-7)
    assert mean.chi2 == pytest.approx(197.8, abs=0.05)
    assert mean.birge_ratio == pytest.approx(3.63, abs=0.005)
    assert np.max(np.abs(values - mean.value) / u) / 2 == pytest.approx(3.9, abs=0.05)


def test_modified_birge_factor():
    """O. Bodnar and C. Elster, Metrologia 51, 516 (2014), abstract: 73 % at n = 4, 13 % at 10."""
    assert modified_birge_factor(4) == pytest.approx(1.73, abs=0.005)
    assert modified_birge_factor(10) == pytest.approx(1.13, abs=0.005)
    with pytest.raises(InputError, match="four values"):
        modified_birge_factor(3)


def test_a_single_value_has_no_ratio():
    assert math.isnan(birge_ratio([6.6e-34], [1e-36]))
    with pytest.raises(InputError, match="positive"):
        birge_ratio([1.0, 2.0], [0.1, 0.0])
