"""Features of the spectrum: where lines and absorption edges should stand."""

import math

import pytest
from simulated import TRUTH, simulated, voltages

from hdetermine.inference.features import absorption_angles_deg, covered, features
from hdetermine.inference.linesearch import scan_features

SPACING = {"NaCl": 282.01, "LiF": 201.35}

# Bragg angles of K-L3 (computed for these checks from NIST SRD 128): orders 1, 2, 3.
BRAGG = {
    ("Mo", "NaCl"): (7.2247, 14.5676, 22.1655),
    ("Mo", "LiF"): (10.1450, 20.6269, 31.8988),
    ("Cu", "NaCl"): (15.8515, 33.1129, 55.0283),
    ("Cu", "LiF"): (22.4927, 49.9187),
}


@pytest.mark.parametrize("case", BRAGG, ids=" ".join)
def test_features_stand_where_bragg_puts_them(case):
    anode, crystal = case
    every = features(anode, 35_000.0, SPACING[crystal], 0.0)
    found = [feature for feature in every if feature.group.name == "K-L2,3"]
    assert [feature.order for feature in found] == list(range(1, len(found) + 1))
    angles = [feature.angle_deg for feature in found]
    assert angles == pytest.approx(BRAGG[case], abs=1e-4)
    for feature in found:
        # K-L2 stands above K-L3 and is 0.52 as strong (common practice, no source).
        assert feature.components[1][0] > feature.components[0][0]
        assert [strength for _, _, strength in feature.components] == [1.0, 0.52]
    labels = [feature.label for feature in found]
    assert labels[0] == f"{anode} K-L2,3"
    assert labels[1] == f"{anode} K-L2,3 (n = 2)"
    assert [f.angle_deg for f in every] == sorted(f.angle_deg for f in every)


@pytest.mark.parametrize(
    ("anode", "energy_eV", "groups"),
    [
        ("Mo", 19_990.0, set()),
        ("Mo", 20_010.0, {"K-L2,3", "K-M2,3"}),
        ("Cu", 8_000.0, set()),
        ("W", 11_000.0, {"L3-M4,5", "L3-N5"}),
        ("W", 35_000.0, {"L3-M4,5", "L2-M4", "L3-N5", "L2-N4", "L1-M3"}),
        ("Xx", 35_000.0, set()),
    ],
)
def test_only_excited_lines_are_expected(anode, energy_eV, groups):
    """K edge of Mo 20 000 eV, of Cu 8979 eV; L3 of W 10 207, L2 11 544, L1 12 100 eV (xraydb)."""
    found = features(anode, energy_eV, 201.35, 0.0)
    assert {feature.group.name for feature in found} == groups


def test_refraction_and_derivatives():
    for feature in features("Cu", 35_000.0, 201.35, 1e-4):
        step = 1e-6
        for changed, derivative in (
            (features("Cu", 35_000.0, 201.35 * (1 + step), 1e-4), feature.by_spacing),
            (features("Cu", 35_000.0, 201.35 / (1 + step), 1e-4), feature.by_wavelength),
        ):
            (other,) = [f for f in changed if f.label == feature.label]
            slope = (other.angle_deg - feature.angle_deg) / step
            assert slope == pytest.approx(derivative, rel=1e-3)
        bare = next(f for f in features("Cu", 35_000.0, 201.35, 0.0) if f.label == feature.label)
        # The refraction makes the spacing look smaller, the less the higher the order.
        smaller = 1e-4 / feature.order**2
        assert feature.angle_deg - bare.angle_deg == pytest.approx(
            -feature.by_spacing * smaller, rel=1e-2
        )


def test_natural_width_in_angle():
    """Cu K-L3: 2.10 eV of 8047.8 eV (xraylib) times tan(theta)."""
    feature = next(f for f in features("Cu", 35_000.0, 201.35, 0.0) if f.group.name == "K-L2,3")
    expected = math.degrees(2.10 / 8047.8 * math.tan(math.radians(22.4927)))
    assert feature.components[0][1] == pytest.approx(expected, rel=0.02)


def test_absorption_angles():
    """K edges of Zr 68.888 pm and of Br 92.017 pm (xraydb); Na and Cl are not tabulated."""
    (zirconium,) = absorption_angles_deg(("Na", "Cl", "Zr"), 282.01, 0.0)
    assert zirconium == pytest.approx(math.degrees(math.asin(68.888 / 564.02)), abs=1e-3)
    (bromine,) = absorption_angles_deg(("K", "Br"), 329.5, 0.0)
    assert bromine == pytest.approx(math.degrees(math.asin(92.017 / 659.0)), abs=1e-3)
    assert absorption_angles_deg(("Ca",), 100.0, 0.0) == ()  # out of reach


def test_covered():
    run, _ = simulated(voltages(35), {**TRUTH, "from_deg": 18.0, "to_deg": 54.0}, 1, "Cu", "LiF")
    (scan,) = run.scans
    every = scan_features(run, scan)
    inside = covered(scan, every, 0.0, 0.3)
    assert [feature.label for feature in inside] == [
        "Cu K-M2,3", "Cu K-L2,3", "Cu K-M2,3 (n = 2)", "Cu K-L2,3 (n = 2)",
    ]  # fmt: skip
    # A zero that moves a line over the end of the scan takes it out.
    assert covered(scan, every, -4.0, 0.3)[0].label == "Cu K-L2,3"
    assert len(covered(scan, every, 5.0, 0.3)) == 3
