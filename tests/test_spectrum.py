"""True spectra: the published laws they are made from."""

import ast
from pathlib import Path

import numpy as np
import pytest

from hdetermine.planning.spectrum import K_JUMP, Absorber, HC_PER_E_pm_kV, TubeSpectrum


def bare(energy_keV=30.0, **changes):
    """Kramers' law alone."""
    values = {
        "energy_keV": energy_keV,
        "current_mA": 1.0,
        "atomic_number": 29,
        "scale_per_s": 300.0,
        "near_limit_excess": 0.0,
        "near_limit_energy_keV": 0.4,
    }
    return TubeSpectrum(**{**values, **changes})


@pytest.mark.parametrize(
    ("voltage_kV", "limit_pm"), [(15, 82.65613), (20, 61.99210), (30, 41.32807), (40, 30.99605)]
)
def test_limit(voltage_kV, limit_pm):
    # hc/(e U) with the exact constants of the SI (BIPM, The International System of Units, 9th
    # ed., 2019).
    assert bare(voltage_kV).limit_pm == pytest.approx(limit_pm, abs=1e-5)


def test_kramers_law_peaks_at_twice_the_limit():
    # Photons per wavelength of Kramers' law (Phil. Mag. 46, 836 (1923)) peak at 2 lambda_min.
    spectrum = bare(30.0)
    wavelength = np.linspace(30.0, 200.0, 200_001)
    rate = spectrum.continuum_per_s(wavelength)
    assert wavelength[rate.argmax()] == pytest.approx(2.0 * spectrum.limit_pm, rel=1e-4)
    # The scale is the rate there, for copper at 30 keV and 1 mA.
    assert rate.max() == pytest.approx(300.0, rel=1e-9)
    assert not rate[wavelength < spectrum.limit_pm].any()


def test_kramers_law_per_energy_is_linear_below_the_limit():
    # dN/dE goes like Z i (E0 - E)/E (Kramers 1923): times E it is a straight line in E.
    energy = np.array([10.0, 15.0, 20.0, 25.0])
    wavelength = HC_PER_E_pm_kV / energy
    per_energy = bare(30.0).continuum_per_s(wavelength) * wavelength**2
    assert per_energy * energy / (30.0 - energy) == pytest.approx(np.full(4, per_energy[0] / 2))
    heavier = bare(30.0, atomic_number=58, current_mA=0.5).continuum_per_s(wavelength)
    assert heavier == pytest.approx(bare(30.0).continuum_per_s(wavelength))


def test_near_limit_rise():
    wavelength = HC_PER_E_pm_kV / np.array([29.9999, 29.6, 20.0])
    ratio = bare(near_limit_excess=0.8).continuum_per_s(wavelength) / bare().continuum_per_s(
        wavelength
    )
    assert ratio == pytest.approx([1.8, 1 + 0.8 / np.e, 1.0], rel=1e-3)


def test_kulenkampff_step_at_the_limit():
    # Kulenkampff, Ann. Phys. 69, 548 (1922): a linear term plus a small step at the limit.
    spectrum = bare(limit_step_keV=0.2)
    energy = np.array([30.0 - 1e-9, 29.8])
    rate = spectrum.continuum_per_s(HC_PER_E_pm_kV / energy) * energy / energy**2
    assert rate[1] / rate[0] == pytest.approx(2.0, rel=1e-6)


def test_absorption_falls_beyond_an_edge_by_its_jump():
    absorber = Absorber(1.5, 68.888, is_edge=True)
    below, above = absorber.optical_depth(np.array([68.888 * (1 - 1e-9), 68.888 * (1 + 1e-9)]))
    assert below == pytest.approx(1.5)
    assert below / above == pytest.approx(K_JUMP)
    ratio = bare(absorbers=(absorber,)).continuum_per_s(np.array([50.0])) / bare().continuum_per_s(
        np.array([50.0])
    )
    assert ratio == pytest.approx(np.exp(-1.5 * (50.0 / 68.888) ** 2.8))


def test_counter_takes_few_of_the_hard_photons():
    spectrum = bare(counter_depth=0.5)
    passed = spectrum.transmission(np.array([40.0, 100.0, 300.0]))
    assert passed == pytest.approx(1 - np.exp(-0.5 * np.array([0.4, 1.0, 3.0]) ** 2.8))


def test_lines_need_their_excitation_and_grow_with_overvoltage():
    # Intensity like (U/U_K - 1)^1.63: Compton and Allison (1935), from memory.
    emitted = ((70.93, 6.2, 20.0, 600.0),)
    assert bare(19.999, emitted=emitted).lines() == ()
    (weak,) = bare(25.0, emitted=emitted).lines()
    (strong,) = bare(40.0, emitted=emitted).lines()
    assert strong.area_deg_per_s == pytest.approx(600.0)
    assert weak.area_deg_per_s == pytest.approx(600.0 * 0.25**1.63)
    # The width keeps its ratio to the energy: d(lambda)/lambda = dE/E.
    energy_eV = HC_PER_E_pm_kV / 70.93 * 1e3
    assert weak.width_pm / weak.wavelength_pm == pytest.approx(6.2 / energy_eV)


def test_nothing_is_shared_with_the_fit():
    """No module of the simulator imports the inference or the shape that is fitted."""
    folder = Path(__file__).parents[1] / "hdetermine" / "planning"
    modules = sorted(folder.glob("*.py"))
    assert len(modules) > 5
    for module in modules:
        for node in ast.walk(ast.parse(module.read_text("utf-8"))):
            names = []
            if isinstance(node, ast.ImportFrom):
                names = [f"{node.module}.{alias.name}" for alias in node.names]
            elif isinstance(node, ast.Import):
                names = [alias.name for alias in node.names]
            for name in names:
                assert "inference" not in name.split("."), module.name
                assert not name.startswith("hdetermine.physics.continuum"), module.name
                assert not name.startswith("hdetermine.physics.counting"), module.name
