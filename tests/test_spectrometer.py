"""The simulated spectrometer against quadrature and published angles."""

import numpy as np
import pytest
from scipy.integrate import quad

from hdetermine.physics.bragg import wavelength_pm
from hdetermine.planning import spectrometer as module
from hdetermine.planning.spectrometer import Spectrometer
from hdetermine.planning.spectrum import TubeSpectrum

NACL_pm = 282.01


def spectrum(energy_keV=25.0, **changes):
    values = {
        "energy_keV": energy_keV,
        "current_mA": 1.0,
        "atomic_number": 29,
        "scale_per_s": 300.0,
        "near_limit_excess": 0.8,
        "near_limit_energy_keV": 0.4,
    }
    return TubeSpectrum(**{**values, **changes})


def instrument(**changes):
    values = {
        "spacing_pm": NACL_pm,
        "refraction": 9e-5,
        "zero_deg": 0.13,
        "resolution_deg": 0.25,
    }
    return Spectrometer(**{**values, **changes})


def density(offset, width, triangular, box):
    """The kernel as a formula, per degree."""
    if box:
        return (abs(offset) <= width / 2) / width
    sigma = width / 2.354820045
    gaussian = np.exp(-0.5 * (offset / sigma) ** 2) / (sigma * np.sqrt(2 * np.pi))
    return (1 - triangular) * gaussian + triangular * max(0.0, 1 - abs(offset) / width) / width


@pytest.mark.parametrize(
    ("triangular", "box"), [(0.0, False), (1.0, False), (0.4, False), (0.0, True)]
)
@pytest.mark.parametrize("step_deg", [0.05, 0.2])
@pytest.mark.parametrize("limit_step_keV", [0.0, 0.2])
def test_smeared_continuum_against_quadrature(triangular, box, step_deg, limit_step_keV):
    """Every rate near the limit to 2e-4 of the rate one width above it."""
    setup = instrument(triangular_fraction=triangular, box=box)
    emitted = spectrum(limit_step_keV=limit_step_keV)
    limit = setup.reading_of(emitted.limit_pm)
    reading = 4.5 + step_deg * np.arange(int(1.6 / step_deg))
    rate = setup.reflected_per_s(emitted, reading)

    def exact(at):
        def integrand(true_deg):
            wave = wavelength_pm(np.array([true_deg]), NACL_pm, 9e-5)
            lit = emitted.continuum_per_s(wave)[0] * np.cos(np.radians(true_deg))
            return lit * density(at - 0.13 - true_deg, 0.25, triangular, box)

        middle, reach = at - 0.13, 0.55
        corners = {
            limit - 0.13,
            middle,
            middle - 0.25,
            middle + 0.25,
            middle - 0.125,
            middle + 0.125,
        }
        low = max(middle - reach, limit - 0.13)
        if low >= middle + reach:
            return 0.0
        inside = sorted(c for c in corners if low < c < middle + reach)
        return quad(integrand, low, middle + reach, points=inside, limit=200)[0]

    expected = np.array([exact(at) for at in reading])
    scale = exact(limit + 0.25)
    assert np.abs(rate - expected).max() < (6e-4 if limit_step_keV or box else 1e-4) * scale
    assert rate[reading < limit - 0.6] == pytest.approx(0.0, abs=1e-9)


@pytest.mark.parametrize(
    ("triangular", "box"), [(0.0, False), (1.0, False), (0.5, False), (0.0, True)]
)
def test_kernel_keeps_its_width_and_sum(triangular, box):
    setup = instrument(triangular_fraction=triangular, box=box)
    cell = 0.25 / 101
    kernel = setup.kernel(cell)
    assert kernel.sum() == pytest.approx(1.0, abs=1e-12)
    assert kernel == pytest.approx(kernel[::-1])
    half = np.flatnonzero(kernel >= kernel.max() / 2 * (1 + 1e-9))
    assert (half[-1] - half[0] + 1) * cell == pytest.approx(0.25, abs=2.1 * cell)


@pytest.mark.parametrize(
    ("wavelength", "spacing_pm", "order", "angle_deg"),
    [
        # Bragg angles of Mo K-L3 and Cu K-L3 (wavelengths of NIST SRD 128) with d(NaCl) =
        # 282.01 pm and d(LiF) = 201.35 pm; the angles are computed.
        (70.93172, 282.01, 1, 7.2245),
        (70.93172, 282.01, 2, 14.5663),
        (154.05931, 201.35, 1, 22.4937),
    ],
)
def test_line_stands_at_its_bragg_angle(wavelength, spacing_pm, order, angle_deg):
    emitted = spectrum(40.0, scale_per_s=0.0, emitted=((wavelength, 6.2, 9.0, 600.0),))
    setup = instrument(spacing_pm=spacing_pm, refraction=0.0, zero_deg=-0.2, second_order=0.3)
    reading = np.arange(angle_deg - 1.2, angle_deg + 0.8, 0.02)
    rate = setup.reflected_per_s(emitted, reading)
    centre = (rate * reading).sum() / rate.sum()
    assert centre == pytest.approx(angle_deg - 0.2, abs=2e-3)
    (line,) = emitted.lines()
    area = line.area_deg_per_s * (1.0 if order == 1 else 0.3)
    assert rate.sum() * 0.02 == pytest.approx(area, rel=0.02)


def test_refraction_moves_the_reading_up():
    # n lambda = 2 d sin(theta) (1 - delta/sin^2(theta)): Compton and Allison (1935), ch. IX.
    shift = instrument().reading_of(49.6) - instrument(refraction=0.0).reading_of(49.6)
    angle = np.radians(instrument(refraction=0.0).reading_of(49.6) - 0.13)
    assert np.radians(shift) == pytest.approx(9e-5 * np.tan(angle), rel=1e-3)


def test_second_order_begins_at_twice_the_limit():
    setup, emitted = instrument(second_order=0.2), spectrum(40.0)
    begin = instrument().reading_of(2.0 * emitted.limit_pm)
    reading = np.arange(begin - 1.0, begin + 1.0, 0.1)
    more = setup.reflected_per_s(emitted, reading) - instrument().reflected_per_s(emitted, reading)
    assert more[reading < begin - 0.6] == pytest.approx(0.0, abs=1e-9)
    assert (more[reading > begin + 0.3] > 1.0).all()


def test_finer_cells_change_nothing_that_matters(monkeypatch):
    emitted = spectrum(25.0, emitted=((70.93, 6.2, 20.0, 600.0),))
    reading = np.arange(3.0, 10.0, 0.1)
    coarse = instrument().reflected_per_s(emitted, reading)
    monkeypatch.setattr(module, "CELLS_PER_FWHM", 4 * module.CELLS_PER_FWHM)
    fine = instrument().reflected_per_s(emitted, reading)
    near = np.abs(reading - instrument().reading_of(emitted.limit_pm)) < 0.3
    assert np.abs(coarse - fine).max() < 1e-3 * fine.max()
    assert np.abs(coarse - fine)[near].max() < 1e-4 * fine[near].max()


@pytest.mark.parametrize(
    ("model", "expected"),
    # n/(1 + n tau) and n exp(-n tau) at n tau = 0.5: Knoll, Radiation Detection and Measurement,
    # 4th ed. (2010), ch. 4, sect. VII (formulas from memory).
    [("nonparalysable", 5000 / 1.5), ("paralysable", 5000 * 0.6065306597)],
)
def test_dead_time(model, expected):
    setup = instrument(background_per_s=5000.0, dead_time_us=100.0, dead_time_model=model)
    nothing = spectrum(scale_per_s=0.0)
    assert setup.recorded_per_s(nothing, np.array([5.0, 5.1, 5.2]))[0] == pytest.approx(expected)


def test_background_slopes_and_never_turns_negative():
    setup = instrument(background_per_s=2.0, background_slope_per_deg=-0.5, background_at_deg=5.0)
    reading = np.array([4.0, 5.0, 6.0, 20.0])
    assert setup.unreflected_per_s(reading) == pytest.approx([2.5, 2.0, 1.5, 0.4])
    beam = instrument(direct_beam_per_s=100.0, direct_beam_width_deg=0.5, zero_deg=0.0)
    assert beam.unreflected_per_s(np.array([0.5, 1.0])) == pytest.approx(
        [100 / np.e, 100 / np.e**2]
    )


def test_outside_the_quadrant():
    """Nothing is reflected at negative and beyond right angles; no warning either."""
    rate = instrument().reflected_per_s(spectrum(), np.arange(-2.0, 2.0, 0.1))
    assert np.isfinite(rate).all()
    high = instrument(second_order=0.1).reflected_per_s(spectrum(), np.arange(85.0, 92.0, 0.1))
    assert np.isfinite(high).all()
