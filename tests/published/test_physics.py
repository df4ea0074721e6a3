"""Constants, lines, angles and counting against published figures."""

from __future__ import annotations

import csv
import math
from pathlib import Path

import numpy as np
import pytest
from scipy import constants as codata

from hdetermine.inference.likelihood import deviance_terms, poisson_deviance
from hdetermine.physics import bragg, constants, counting, crystals, lines, reference

HC_OVER_E_pm_kV = 1239.841984332


class TestConstants:
    """BIPM, The International System of Units, 9th ed. (2019), as scipy carries it."""

    def test_exact_values(self):
        assert reference.PLANCK_CONSTANT_J_S == 6.62607015e-34 == codata.h
        assert constants.ELEMENTARY_CHARGE_C == 1.602176634e-19 == codata.e
        assert constants.SPEED_OF_LIGHT_M_PER_S == 299792458.0 == codata.c

    def test_conversion_of_a_slope(self):
        """hc/e = 1239.841984332 pm kV, so this slope is the Planck constant."""
        assert HC_OVER_E_pm_kV * constants.PLANCK_PER_SLOPE == pytest.approx(
            reference.PLANCK_CONSTANT_J_S, rel=1e-12
        )

    def test_electron_radius(self):
        """CODATA 2018 and 2022, as older and newer scipy carry them, differ by 2e-9."""
        radius_pm = codata.physical_constants["classical electron radius"][0] * 1e12
        assert pytest.approx(radius_pm, rel=5e-9) == constants.CLASSICAL_ELECTRON_RADIUS_PM


# Computed for these checks from the exact constants (no publication behind it), pm.
LIMITS = {15: 82.65613, 20: 61.99210, 25: 49.59368, 30: 41.32807, 35: 35.42406, 40: 30.99605}


@pytest.mark.parametrize("voltage_kV", LIMITS)
def test_short_wavelength_limit(voltage_kV):
    """W. Duane and F. L. Hunt, Phys. Rev. 6, 166 (1915): lambda_min = hc/(e U)."""
    limit = reference.PLANCK_CONSTANT_J_S / constants.PLANCK_PER_SLOPE / voltage_kV
    assert limit == pytest.approx(LIMITS[voltage_kV], abs=5.1e-6)


# Glancing angles in degrees for orders 1, 2, 3; NIST SRD 128 wavelengths, d(NaCl) = 282.01 pm,
# d(LiF) = 201.35 pm (computed for these checks).
BRAGG = {
    ("Mo", "K-L3", 282.01): (7.2247, 14.5676, 22.1655),
    ("Mo", "K-L3", 201.35): (10.1450, 20.6269, 31.8988),
    ("Mo", "K-L2", 282.01): (7.2686, 14.6577, 22.3067),
    ("Mo", "K-L2", 201.35): (10.2070, 20.7574, 32.1148),
    ("Mo", "K-M3", 282.01): (6.4368, 12.9566, 19.6528),
    ("Mo", "K-M3", 201.35): (9.0337, 18.3024, 28.1023),
    ("Cu", "K-L3", 282.01): (15.8515, 33.1129, 55.0283),
    ("Cu", "K-L3", 201.35): (22.4927, 49.9187),
    ("Cu", "K-M3", 282.01): (14.2907, 29.5829, 47.7760),
    ("Cu", "K-M3", 201.35): (20.2261, 43.7450),
}


@pytest.mark.parametrize("case", BRAGG, ids=lambda case: " ".join(map(str, case)))
def test_bragg_angles(case):
    element, transition, spacing_pm = case
    (line,) = [
        line for line in lines.LINES if (line.element, line.transition) == (element, transition)
    ]
    for order, angle in enumerate(BRAGG[case], start=1):
        found = float(bragg.glancing_angle_deg(line.wavelength_pm, spacing_pm, order=order))
        assert found == pytest.approx(angle, abs=1e-4)
        back = float(bragg.wavelength_pm(found, spacing_pm, order=order))
        assert back == pytest.approx(line.wavelength_pm, rel=1e-14)


CUTOFF_ANGLES = {
    20: (6.3102, 8.8554),
    25: (5.0445, 7.0741),
    30: (4.2021, 5.8905),
    35: (3.6009, 5.0466),
    40: (3.1503, 4.4145),
}


@pytest.mark.parametrize("voltage_kV", CUTOFF_ANGLES)
def test_cutoff_angles(voltage_kV):
    """Glancing angles of the limit in NaCl and LiF (computed for these checks)."""
    for spacing_pm, angle in zip((282.01, 201.35), CUTOFF_ANGLES[voltage_kV], strict=True):
        found = bragg.glancing_angle_deg(HC_OVER_E_pm_kV / voltage_kV, spacing_pm)
        assert float(found) == pytest.approx(angle, abs=5.1e-5)


def test_a_wavelength_out_of_reach_has_no_angle():
    assert math.isnan(float(bragg.glancing_angle_deg(500.0, 201.35)))


class TestLines:
    def test_weighted_doublets(self):
        """(2 K-L3 + K-L2)/3 in pm, computed from NIST SRD 128: Cu 154.1871, Mo 71.0747."""
        for element, mean in (("Cu", 154.1871), ("Mo", 71.0747)):
            first, second = (
                line.wavelength_pm
                for name in ("K-L3", "K-L2")
                for line in lines.LINES
                if (line.element, line.transition) == (element, name)
            )
            assert (2 * first + second) / 3 == pytest.approx(mean, abs=5.1e-5)

    def test_international_tables(self):
        """International Tables for Crystallography C (2006), Table 4.2.2.6, in pm."""
        table = {"Cu": (154.059292, 4.5e-5), "Mo": (70.931713, 4.1e-5), "W": (20.901313, 1.8e-5)}
        for element, (wavelength, u) in table.items():
            (line,) = [
                line for line in lines.LINES if (line.element, line.transition) == (element, "K-L3")
            ]
            assert abs(line.wavelength_pm - wavelength) < u

    @pytest.mark.parametrize(
        "line", lines.LINES, ids=lambda line: f"{line.element} {line.transition}"
    )
    def test_against_xraydb(self, line):
        """xraydb carries Elam, Ravel and Sieber 2002: differences of edges, no standard.

        It lies within 200 ppm of direct measurement, but for Cu K-M2 (417 ppm) and W L3-N5
        (1308 ppm).
        """
        xraydb = pytest.importorskip("xraydb")
        siegbahn = {
            "K-L3": "Ka1", "K-L2": "Ka2", "K-M3": "Kb1", "K-M2": "Kb3", "K-N2,3": "Kb2",
            "L3-M5": "La1",
            "L3-M4": "La2", "L2-M4": "Lb1", "L3-N5": "Lb2,15", "L2-N4": "Lg1", "L1-M3": "Lb3",
        }  # fmt: skip
        energy = xraydb.xray_lines(line.element)[siegbahn[line.transition]].energy
        ppm = 1e6 * (energy * line.wavelength_pm / (HC_OVER_E_pm_kV * 1e3) - 1)
        allowed = {("Cu", "K-M2"): 420, ("W", "L3-N5"): 1310}
        assert abs(ppm) < allowed.get((line.element, line.transition), 200)

    def test_edges_against_xraydb(self):
        xraydb = pytest.importorskip("xraydb")
        for element, wavelength in lines.K_EDGE_pm.items():
            energy = 1e3 * HC_OVER_E_pm_kV / wavelength
            # As good as the module says: 0.02 %.
            assert energy == pytest.approx(xraydb.xray_edge(element, "K").energy, rel=2e-4)
        for line in lines.LINES:
            level = line.transition.split("-")[0]
            edge = xraydb.xray_edge(line.element, level).energy
            assert line.excitation_eV == pytest.approx(edge, rel=1e-5)

    def test_against_the_reference_table(self):
        """NIST SRD 128 in machine-readable form, where it lies beside the project."""
        table = Path(__file__).resolve().parents[3] / "shared" / "reference" / "lines.csv"
        if not table.exists():
            pytest.skip("no reference table beside the project")
        rows = list(csv.DictReader(table.read_text("utf-8").splitlines()))
        assert len(rows) == 38
        for row in rows:
            (line,) = [
                line
                for line in lines.LINES
                if (line.element, line.transition) == (row["element"], row["iupac"])
            ]
            assert line.wavelength_pm == pytest.approx(100 * float(row["lambda_A"]), abs=5.1e-7)
            assert line.wavelength_u_pm == pytest.approx(100 * float(row["u_lambda_A"]), abs=1e-6)
            assert line.width_eV == pytest.approx(float(row["width_xraylib_eV"]), abs=0.005)

    def test_a_line_above_the_voltage_is_not_excited(self):
        assert [group.name for group in lines.excited_groups("Mo", 19_999.0)] == []
        names = [group.name for group in lines.excited_groups("Mo", 20_001.0)]
        assert names == ["K-M2,3", "K-L2,3"]
        assert len(lines.excited_groups("W", 35_000.0)) == 5
        assert lines.excited_groups("Xx", 35_000.0) == ()


class TestDeadTime:
    """G. F. Knoll, Radiation Detection and Measurement, 4th ed. (2010), ch. 4, sect. VII.

    Formulas from memory; figures computed for these checks, dead time 100 us.
    """

    @pytest.mark.parametrize(
        ("rate", "stopped", "prolonged"),
        [
            (100, 99.00990, 99.00498),
            (1000, 909.09091, 904.83742),
            (5000, 3333.3333, 3032.6533),
            (10_000, 5000.0, 3678.7944),
            (20_000, 6666.6667, 2706.7057),
        ],
    )
    def test_recorded_rates(self, rate, stopped, prolonged):
        for model, figure in (("nonparalysable", stopped), ("paralysable", prolonged)):
            recorded = float(counting.recorded_rate(rate, 1e-4, model))
            assert recorded == pytest.approx(figure, abs=5.1e-5)

    def test_recorded_rates_of_a_usual_tube(self):
        """250/s at 100 us from 256.41026/s, 1000/s at 90 us from 1098.9011/s."""
        for true, dead_time_s, recorded in ((256.41026, 1e-4, 250), (1098.9011, 9e-5, 1000)):
            assert float(
                counting.recorded_rate(true, dead_time_s, "nonparalysable")
            ) == pytest.approx(recorded, rel=1e-7)

    def test_two_source_method_returns_the_dead_time(self):
        """Knoll's two-source formula (from memory) inverts the non-paralysable model."""
        background = 5.0
        m1, m2, m12, mb = (
            float(counting.recorded_rate(rate, 1e-4, "nonparalysable"))
            for rate in (2000 + background, 2500 + background, 4500 + background, background)
        )
        assert (m1, m2, m12, mb) == pytest.approx(
            (1670.137443, 2003.198721, 3105.825577, 4.997501249), rel=1e-9
        )
        x = m1 * m2 - mb * m12
        y = m1 * m2 * (m12 + mb) - mb * m12 * (m1 + m2)
        z = y * (m1 + m2 - m12 - mb) / x**2
        assert x * (1 - math.sqrt(1 - z)) / y == pytest.approx(1e-4, rel=1e-9)

    @pytest.mark.parametrize("model", ["nonparalysable", "paralysable"])
    def test_slope_is_the_derivative(self, model):
        rates = np.array([1.0, 500.0, 5000.0, 9000.0, 20_000.0])
        step = 1e-3 * rates
        rise = counting.recorded_rate(rates + step, 1e-4, model) - counting.recorded_rate(
            rates - step, 1e-4, model
        )
        slope = counting.recorded_slope(rates, 1e-4, model)
        assert slope == pytest.approx(rise / (2 * step), rel=1e-4, abs=1e-6)


# F. Garwood, Biometrika 28, 437 (1936); the 68.27 % bounds are also Tables 1 and 2 of N. Gehrels,
# Astrophys. J. 303, 336 (1986) (from memory). Computed with scipy's chi-squared quantiles.
GARWOOD = {
    0: (0.0, 1.8410, 0.0, 3.6889),
    1: (0.1728, 3.2995, 0.0253, 5.5716),
    2: (0.7082, 4.6379, 0.2422, 7.2247),
    3: (1.3673, 5.9182, 0.6187, 8.7673),
    4: (2.0857, 7.1628, 1.0899, 10.2416),
    5: (2.8403, 8.3825, 1.6235, 11.6683),
    6: (3.6201, 9.5836, 2.2019, 13.0595),
    7: (4.4185, 10.7703, 2.8144, 14.4227),
    8: (5.2316, 11.9451, 3.4538, 15.7632),
    9: (6.0565, 13.1102, 4.1154, 17.0848),
    10: (6.8913, 14.2669, 4.7954, 18.3904),
}


@pytest.mark.parametrize("counts", GARWOOD)
def test_garwood_intervals(counts):
    one_low, one_high, low, high = GARWOOD[counts]
    assert [float(bound) for bound in counting.garwood_interval(counts)] == pytest.approx(
        [one_low, one_high], abs=5.1e-5
    )
    assert [float(bound) for bound in counting.garwood_interval(counts, 0.95)] == pytest.approx(
        [low, high], abs=5.1e-5
    )


class TestPoissonDeviance:
    """S. Baker and R. D. Cousins, Nucl. Instrum. Methods 221, 437 (1984); computed examples."""

    counts = np.array([3.0, 0.0, 5.0, 2.0])
    expected = np.array([2.5, 0.7, 4.0, 3.0])

    def test_terms_and_sum(self):
        assert deviance_terms(self.counts, self.expected) == pytest.approx(
            [0.09392934, 1.4, 0.23143551, 0.37813957], abs=5e-9
        )
        assert poisson_deviance(self.counts, self.expected) == pytest.approx(2.103504421, abs=5e-10)

    def test_distance_to_the_cash_statistic(self):
        """W. Cash, Astrophys. J. 228, 939 (1979): 2 sum(m - d ln m) = -3.355137157 here."""
        for factor in (1.0, 1.3):
            model = factor * self.expected
            cash = 2 * float(np.sum(model - self.counts * np.log(model)))
            if factor == 1.0:
                assert cash == pytest.approx(-3.355137157, abs=5e-10)
            difference = poisson_deviance(self.counts, model) - cash
            assert difference == pytest.approx(5.458641579, abs=5e-10)

    def test_interval_of_a_constant(self):
        counts = np.array([12.0, 8.0, 15.0, 10.0, 9.0])
        least = poisson_deviance(counts, np.full(5, counts.mean()))
        assert counts.mean() == pytest.approx(10.8)
        assert least == pytest.approx(2.761092, abs=5e-7)
        for bound in (9.396203, 12.337103):
            assert poisson_deviance(counts, np.full(5, bound)) == pytest.approx(
                least + 1.0, abs=1e-6
            )


# Spacing in pm with its source; see the module for which of them are from memory.
SPACINGS = {
    ("Si", "111"): 313.5601154,  # CODATA 2022
    ("Si", "220"): 192.0155716,  # CODATA 2022
    ("Ge", "111"): 326.6594,  # Baker and Hart, Acta Cryst. A31, 364 (1975)
    ("NaCl", "200"): 282.01,  # Swanson and Fuyat, NBS Circular 539, vol. II (1953)
    ("LiF", "200"): 201.35,  # NBS Circular 539, vol. I (1953)
    ("KCl", "200"): 314.655,  # NBS Circular 539, vol. I (1953)
    ("KBr", "200"): 330.03,  # NBS Circular 539, vol. I (1953)
}


class TestCrystals:
    @pytest.mark.parametrize("case", SPACINGS, ids=" ".join)
    def test_spacings(self, case):
        planes = crystals.find_planes(crystals.find_kind(case[0]), case[1])
        assert abs(planes.spacing_pm - SPACINGS[case]) <= planes.spacing_half_width_pm

    def test_expansion_over_five_kelvin(self):
        """Computed for these checks, ppm: NaCl 199, LiF 168, KCl 183, KBr 194, Si 13, Ge 30."""
        for material, ppm in {
            "NaCl": 199, "LiF": 168, "KCl": 183, "KBr": 194, "Si": 13, "Ge": 30,
        }.items():  # fmt: skip
            kind = crystals.find_kind(material)
            spacing = bragg.spacing_at(1.0, 27.0, 22.0, kind.expansion_per_K)
            assert 1e6 * (spacing - 1) == pytest.approx(ppm, abs=0.6)

    # delta by xraydb, as read for these checks: energy eV, material, delta.
    deltas = (
        (8047.8, "NaCl", 6.76e-6), (17479.0, "NaCl", 1.42e-6), (30000.0, "NaCl", 4.8e-7),
        (8047.8, "LiF", 7.86e-6), (17479.0, "LiF", 1.66e-6), (30000.0, "LiF", 5.6e-7),
        (8047.8, "Si", 7.57e-6), (17479.0, "Si", 1.59e-6), (30000.0, "Si", 5.4e-7),
    )  # fmt: skip

    @pytest.mark.parametrize("case", deltas, ids=str)
    def test_refraction(self, case):
        """delta/sin^2(theta) does not depend on the energy, within the stated uncertainty."""
        energy, material, delta = case
        reflection = "111" if material == "Si" else "200"
        planes = crystals.find_planes(crystals.find_kind(material), reflection)
        sine = 1e3 * HC_OVER_E_pm_kV / energy / (2 * planes.spacing_pm)
        assert abs(planes.refraction - delta / sine**2) < 2 * planes.refraction_u
