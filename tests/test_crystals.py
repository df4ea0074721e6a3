"""Crystals against published spacings, Bragg angles and refraction."""

from __future__ import annotations

import pytest

from hdetermine.files import defaults
from hdetermine.inference import measurement
from hdetermine.physics.bragg import glancing_angle_deg
from hdetermine.physics.crystals import KINDS, find_kind, find_planes, refraction_shift
from hdetermine.physics.elements import ATOMIC_NUMBER, SYMBOLS, formula_parts

# Spacings, pm. Si: CODATA 2022. NaCl, LiF, KCl: NBS Circular 539; Ge: Baker and Hart (1975);
# KBr, quartz, topaz: values in use; calcite: Effenberger et al. (1981) (all from memory but Si).
SPACINGS = [
    ("Si", "111", 313.5601154, 1e-6),
    ("Si", "220", 192.0155716, 1e-6),
    ("Ge", "111", 326.6594, 1e-4),
    ("NaCl", "200", 282.01, 1e-9),
    ("LiF", "200", 201.35, 1e-9),
    ("KCl", "200", 314.655, 1e-9),
    ("KBr", "200", 330.03, 0.01),
    ("calcite", "104", 303.555, 1e-9),
    ("quartz", "101", 334.31, 1e-9),
    ("topaz", "303", 135.61, 1e-9),
]


def planes_of(material: str, reflection: str):
    kind = find_kind(material)
    assert kind is not None
    return find_planes(kind, reflection)


@pytest.mark.parametrize(("material", "reflection", "spacing_pm", "tolerance"), SPACINGS)
def test_spacing(material, reflection, spacing_pm, tolerance):
    assert planes_of(material, reflection).spacing_pm == pytest.approx(spacing_pm, abs=tolerance)


def test_hexagonal_spacings_follow_from_the_cells():
    """1/d^2 = 4/3 (h^2 + hk + k^2)/a^2 + l^2/c^2, from the cells named in the sources."""
    for a, c, (h, k, l_), material in (
        (498.96, 1706.10, (1, 0, 4), "calcite"),
        (491.30, 540.47, (1, 0, 1), "quartz"),
    ):
        inverse = 4.0 / 3.0 * (h * h + h * k + k * k) / a**2 + l_**2 / c**2
        kind = find_kind(material)
        assert next(iter(kind.spacings_pm.values())) == pytest.approx(inverse**-0.5, rel=2e-5)


def test_topaz_spacing_follows_from_the_cell():
    assert planes_of("topaz", "303").spacing_pm == pytest.approx(
        (9 / 465.0**2 + 9 / 840.0**2) ** -0.5, rel=2e-4
    )


# Bragg angles, orders 1 to 3, computed in the list of check values from d(NaCl) = 282.01 and
# d(LiF) = 201.35 pm with the NIST SRD 128 wavelengths; no refraction.
ANGLES = [
    ("NaCl", 70.931724, (7.2247, 14.5676, 22.1655)),
    ("LiF", 70.931724, (10.1450, 20.6269, 31.8988)),
    ("NaCl", 154.059307, (15.8515, 33.1129, 55.0283)),
    ("LiF", 154.059307, (22.4927, 49.9187)),
    ("NaCl", 63.230339, (6.4368, 12.9566, 19.6528)),
    ("LiF", 139.223412, (20.2261, 43.7450)),
]


@pytest.mark.parametrize(("material", "wavelength_pm", "angles"), ANGLES)
def test_bragg_angles_of_lines(material, wavelength_pm, angles):
    spacing = planes_of(material, "200").spacing_pm
    for order, angle in enumerate(angles, start=1):
        found = float(glancing_angle_deg(wavelength_pm, spacing, 0.0, order))
        assert found == pytest.approx(angle, abs=6e-5)


# delta/sin^2(theta) at Mo K-L3 in first order: xraydb 4.5.8, delta = 1.42e-6 (NaCl) and 1.66e-6
# (LiF), at the angles above: 90 and 53 ppm.
@pytest.mark.parametrize(("material", "ppm"), [("NaCl", 90.0), ("LiF", 53.0)])
def test_refraction_shift(material, ppm):
    planes = planes_of(material, "200")
    assert planes.refraction * 1e6 == pytest.approx(ppm, abs=1.5)
    assert abs(planes.refraction * 1e6 - ppm) < planes.refraction_u * 1e6


def test_refraction_from_delta_of_silicon():
    """Si: xraydb gives delta = 7.57e-6 at 8047.8 eV (154.06 pm)."""
    planes = planes_of("Si", "111")
    sine = 154.06 / (2.0 * planes.spacing_pm)
    assert planes.refraction == pytest.approx(7.57e-6 / sine**2, rel=0.03)
    assert refraction_shift(2.0, 1.0) == pytest.approx(4.0 * refraction_shift(1.0, 1.0))


@pytest.mark.parametrize(
    ("material", "in_circulation_pm"),
    [
        ("KBr", (330.025, 330.0, 329.5, 329.2)),
        ("LiF", (201.35, 201.31, 201.4)),
        ("NaCl", (282.01, 282.0, 282.05)),
        ("calcite", (303.555, 303.574, 303.567)),
        ("Ge", (326.66, 326.6)),
        ("KCl", (314.655, 314.5)),
        ("topaz", (135.61, 135.57)),
    ],
)
def test_default_half_width_covers_the_values_in_circulation(material, in_circulation_pm):
    kind = find_kind(material)
    planes = find_planes(kind, next(iter(kind.spacings_pm)))
    for value in in_circulation_pm:
        assert abs(value - planes.spacing_pm) <= planes.spacing_half_width_pm


@pytest.mark.parametrize(
    ("material", "spelling", "reflection"),
    [
        ("lif", "(200)", "200"),
        ("Lithium  fluoride", "2 0 0", "200"),
        ("calcite", "10-14", "104"),
        ("calcite", "211", "104"),
        ("quartz", "10-11", "101"),
        ("SiO2", "101", "101"),
        ("LiF", "220", "220"),
        ("NaCl", "111", "111"),
        ("Si", "400", "400"),
    ],
)
def test_spellings(material, spelling, reflection):
    assert planes_of(material, spelling).reflection == reflection


@pytest.mark.parametrize(
    ("material", "reflection"),
    [("LiF", "100"), ("NaCl", "210"), ("Si", "200"), ("Si", "222"), ("Ge", "000"),
     ("quartz", "999"), ("LiF", "abc"), ("LiF", ""), ("LiF", "２００")],
)  # fmt: skip
def test_reflections_that_do_not_exist(material, reflection):
    assert planes_of(material, reflection) is None


def test_unknown_material():
    assert find_kind("mica") is None


def test_every_kind_is_sound():
    for kind in KINDS:
        assert set(kind.cell) <= set(ATOMIC_NUMBER)
        assert kind.source
        for reflection in kind.spacings_pm:
            planes = find_planes(kind, reflection)
            assert 2e-5 < planes.refraction < 3e-4
            assert 0 < kind.expansion_half_width_per_K < kind.expansion_per_K


# Densities, g/cm^3 (common tables, from memory), hold the cells against the outside world.
@pytest.mark.parametrize(
    ("material", "density", "molar_mass_of_cell"),
    [
        ("Si", 2.329, 8 * 28.085),
        ("Ge", 5.323, 8 * 72.63),
        ("NaCl", 2.165, 4 * 58.44),
        ("LiF", 2.64, 4 * 25.94),
        ("KCl", 1.987, 4 * 74.55),
        ("KBr", 2.75, 4 * 119.0),
        ("calcite", 2.711, 6 * 100.09),
        ("quartz", 2.648, 3 * 60.08),
        ("topaz", 3.56, 4 * 184.04),
    ],
)
def test_density(material, density, molar_mass_of_cell):
    kind = find_kind(material)
    cubic_cm = kind.cell_volume_pm3 * 1e-30
    assert molar_mass_of_cell / 6.02214076e23 / cubic_cm == pytest.approx(density, rel=0.015)


def test_elements():
    assert (ATOMIC_NUMBER["Mo"], ATOMIC_NUMBER["W"], ATOMIC_NUMBER["U"]) == (42, 74, 92)
    assert len(set(SYMBOLS)) == 92
    assert formula_parts("CaF2") == {"Ca": 1, "F": 2}
    assert formula_parts("mica") is None
    assert formula_parts("") is None


def test_input_names_are_those_of_the_measurement():
    """Reading and measurement equation must speak of the same inputs."""
    ours = {rule.key for rule in defaults.RULES} - {defaults.REPEATABILITY.key}
    theirs = {
        value
        for name, value in vars(measurement).items()
        if name.isupper() and isinstance(value, str)
    }
    assert ours == theirs - {measurement.WAVELENGTH_SCALE}
