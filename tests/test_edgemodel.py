"""Expected counts around an edge: their values, derivatives, maximum and its two sides."""

import math
from itertools import pairwise

import numpy as np
import pytest
from edge_specimens import (
    EDGE_DEG,
    EDGED_LINE,
    LINE,
    OTHER_LINE,
    counted,
    given,
    parameters,
    window,
)
from scipy.integrate import quad
from scipy.optimize import brentq

from hdetermine.inference.edgemodel import (
    background_rate,
    continuum_rate,
    expected_counts,
    fit_edge,
    likelihood_sides,
)
from hdetermine.inference.likelihood import poisson_deviance
from hdetermine.inference.smearing import Kernel

CASES = {
    "plain": (2, (), {}),
    "bent background": (3, (), {}),
    "no dead time": (2, (), {"dead_time_us": 0.0}),
    "long dead time": (2, (), {"dead_time_us": 900.0}),
    "paralysable": (2, (), {"dead_time_model": "paralysable", "dead_time_us": 300.0}),
    "one line": (2, (LINE,), {}),
    "two lines": (3, (LINE, OTHER_LINE), {}),
    "Gaussian": (2, (LINE,), {"triangular_fraction": 0.0}),
    "triangular": (2, (LINE,), {"triangular_fraction": 1.0}),
    "trapezium": (2, (), {"triangular_fraction": 1.4}),
    "box": (2, (), {"triangular_fraction": 2.0}),
    "own edge": (2, (EDGED_LINE,), {}),
    "narrow": (2, (), {"resolution_deg": 0.06}),
    "no excess": (2, (), {"excess": 0.0}),
}


def by_the_book(readings, p, surroundings):
    """Smeared continuum as the module states it, by adaptive quadrature, 1/s."""
    width, mix = surroundings.kernel.fwhm_deg, surroundings.kernel.triangular_fraction
    sigma = width / math.sqrt(8.0 * math.log(2.0))
    limit = p[0] - surroundings.zero_deg

    def integrand(angle, centre):
        distance = angle - centre
        kernel = max(1.0 - mix, 0.0) * math.exp(-0.5 * (distance / sigma) ** 2)
        kernel /= sigma * math.sqrt(2.0 * math.pi)
        kernel += (1.0 - abs(mix - 1.0)) * max(1.0 - abs(distance) / width, 0.0) / width
        kernel += max(mix - 1.0, 0.0) * (abs(distance) < 0.5 * width) / width
        ratio = math.sin(math.radians(angle)) / math.sin(math.radians(limit))
        x, log_ratio = ratio - 1.0, math.log(ratio)
        missing_keV = surroundings.energy_keV * (1.0 - 1.0 / ratio)
        shape = x / ratio**2
        shape *= 1.0 + surroundings.excess * math.exp(-missing_keV / surroundings.excess_energy_keV)
        bend = (ratio**3 - 1.0) / 3.0 - log_ratio
        smooth = math.exp(p[1] + p[2] * log_ratio + p[3] * bend)
        return kernel * smooth * math.cos(math.radians(angle)) * shape

    rates = []
    for centre in readings - surroundings.zero_deg:
        places = [centre + k * width for k in (-2.2, -1.0, -0.5, 0.0, 0.5, 1.0, 2.2)]
        ends = [max(place, limit) for place in places]
        rates.append(
            sum(
                quad(integrand, low, high, args=(centre,), epsabs=1e-9)[0]
                for low, high in pairwise(ends)
            )
        )
    return np.array(rates)


@pytest.mark.parametrize(
    "changes",
    [{}, {"excess": 0.0}, *({"triangular_fraction": form} for form in (0.0, 1.0, 1.6, 2.0))],
    ids=str,
)
def test_continuum_is_the_integral_of_the_docstring(changes):
    sketch = window(step=0.2)
    p = parameters(smooth=(2.0, -1.0))
    rate, _ = continuum_rate(sketch.reading_deg, p, given(**changes))
    exact = by_the_book(sketch.reading_deg, p, given(**changes))
    np.testing.assert_allclose(rate, exact, atol=1e-5 * exact.max())
    assert exact.max() > 100.0


def test_counts_are_dwell_times_recorded_rate():
    """rec = n/(1 + n tau): Knoll, Radiation Detection and Measurement (2010), ch. 4 (memory)."""
    sketch, p, around = window(), parameters(), given(dead_time_us=400.0)
    continuum, _ = continuum_rate(sketch.reading_deg, p, around)
    background, _ = background_rate(sketch, p)
    true = continuum + background
    expected, _ = expected_counts(sketch, p, around)
    np.testing.assert_allclose(expected, 10.0 * true / (1.0 + true * 400e-6), rtol=1e-12)


def test_background_is_a_polynomial_of_the_half_span():
    sketch, p = window(3), parameters(3, level=2.0)
    rate, _ = background_rate(sketch, p)
    middle = rate.size // 2
    assert rate[0] == pytest.approx(2.0 * math.exp(0.3 + 0.15))
    assert rate[middle] == pytest.approx(2.0)
    assert rate[-1] == pytest.approx(2.0 * math.exp(-0.3 + 0.15))


def test_a_modelled_line_has_its_area_and_its_place():
    around = given(dead_time_us=0.0)
    with_line, without = window(lines=(LINE,), step=0.01), window(step=0.01)
    p = parameters(lines=1)
    extra = expected_counts(with_line, p, around)[0] - expected_counts(without, p[:6], around)[0]
    rate = extra / 10.0
    # Amplitude 120 for components 1 and 0.5; the natural tails reach a little further.
    assert np.sum(rate) * 0.01 == pytest.approx(180.0, rel=0.02)
    centre = np.sum(rate * with_line.reading_deg) / np.sum(rate)
    assert centre == pytest.approx((6.35 + 0.5 * 6.41) / 1.5 + 0.08 + 0.006, abs=2e-3)


def test_the_continuum_steps_up_beyond_the_own_edge():
    around = given(dead_time_us=0.0)
    lines = parameters(lines=1, level=1e-9)
    lines[-2] = -60.0
    flat = expected_counts(window(lines=(LINE,)), lines, around)[0]
    stepped = expected_counts(window(lines=(EDGED_LINE,)), np.array([*lines, 0.1]), around)[0]
    readings = window().reading_deg
    past = readings > 6.22 + 0.08 + 0.4
    before = (readings > EDGE_DEG + 0.3) & (readings < 6.22 + 0.08 - 0.4)
    np.testing.assert_allclose(stepped[past], 1.1 * flat[past], rtol=1e-3)
    np.testing.assert_allclose(stepped[before], flat[before], rtol=1e-3)
    at = int(np.argmin(np.abs(readings - 6.3)))
    assert stepped[at] == pytest.approx(1.05 * flat[at], rel=1e-3)


@pytest.mark.parametrize("case", CASES)
def test_jacobian(case):
    terms, lines, changes = CASES[case]
    sketch = window(terms, lines)
    around = given(**changes)
    p = parameters(terms, len(lines), smooth=(1.4, -0.6), jumps=[0.1] * len(sketch.absorption_deg))
    _, jacobian = expected_counts(sketch, p, around)
    assert jacobian.shape == (sketch.counts.size, sketch.parameters)
    for column in range(p.size):
        step = np.zeros(p.size)
        step[column] = 1e-5
        ahead, behind = (expected_counts(sketch, p + s, around)[0] for s in (step, -step))
        numerical = (ahead - behind) / 2e-5
        scale = np.abs(numerical).max()
        assert scale > 0.0
        np.testing.assert_allclose(jacobian[:, column], numerical, atol=2e-3 * scale)


@pytest.mark.parametrize(("edge", "seen"), [(0.1, False), (5.0, True), (90.0, False)])
def test_a_limit_out_of_reach_gives_no_continuum(edge, seen):
    sketch = window(low=0.0)
    rate, derivatives = continuum_rate(sketch.reading_deg, parameters(edge=edge), given())
    assert bool(rate.any()) is seen
    assert bool(derivatives.any()) is seen
    assert np.all(np.isfinite(rate))


@pytest.mark.parametrize("case", CASES)
def test_mean_counts_give_back_their_parameters(case):
    terms, lines, changes = CASES[case]
    jumps = [0.06] * len(window(terms, lines).absorption_deg)
    around, true = given(**changes), parameters(terms, len(lines), jumps=jumps)
    # Priors at the truth where they can be, and lines where they are expected.
    shifts = slice(2 + 2 + terms + 1, 2 + 2 + terms + 2 * len(lines), 2)
    true[shifts] = 0.0
    full = counted(window(terms, lines), true, around)
    start = true + 0.1 * np.where(np.arange(true.size) == 0, 1.0, 0.5)
    start[shifts] = 0.0
    found = fit_edge(full, around, start)
    assert found.maximum.converged
    # The priors of slope and bend pull a little, far below the uncertainty.
    assert found.reading_deg == pytest.approx(EDGE_DEG, abs=0.1 * found.reading_u_deg)
    assert found.maximum.deviance < 0.1
    assert found.degrees_of_freedom == full.counts.size - true.size


def stated_penalty(p, terms, lines):
    """The priors in words.

    Smooth 2.5 +- 3 and -0.5 +- 2, slope 1.5, bend 1, line 0.02 deg, level^0.1, jump 0.06 +- 0.06.
    """
    penalty = ((p[2] - 2.5) / 3.0) ** 2 + ((p[3] + 0.5) / 2.0) ** 2
    penalty += sum((p[5 + i] / u) ** 2 for i, u in enumerate((1.5, 1.0)[: terms - 1]))
    for i in range(lines):
        penalty += (p[4 + terms + 2 * i + 1] / 0.02) ** 2
    penalty += sum(((jump - 0.06) / 0.06) ** 2 for jump in p[4 + terms + 2 * lines :])
    return penalty - 2.0 * 0.1 * p[4]


@pytest.mark.parametrize(
    "case", ["plain", "bent background", "two lines", "own edge", "long dead time"]
)
def test_the_maximum_is_one_of_likelihood_and_stated_priors(case):
    terms, lines, changes = CASES[case]
    around = given(**changes)
    true = parameters(terms, len(lines), jumps=[0.1] * len(window(terms, lines).absorption_deg))
    full = counted(window(terms, lines), true, around, seed=4)
    best = fit_edge(full, around, true).maximum
    assert best.penalty == pytest.approx(stated_penalty(best.parameters, terms, len(lines)))

    def objective(p):
        mean = expected_counts(full, p, around)[0]
        return poisson_deviance(full.counts, mean) + stated_penalty(p, terms, len(lines))

    u = np.sqrt(np.diag(best.covariance()))
    for column in range(u.size):
        for size in (-0.5, 0.5):
            step = np.zeros(u.size)
            step[column] = size * u[column]
            assert objective(best.parameters + step) > objective(best.parameters) - 2e-3


def test_a_background_without_counts_stays_defined():
    around, true = given(), parameters(level=1e-6)
    full = counted(window(), true, around, seed=1)
    assert full.counts[:10].sum() == 0.0
    found = fit_edge(full, around, parameters(level=0.1))
    assert found.maximum.converged
    assert abs(found.reading_deg - EDGE_DEG) < 4.0 * found.reading_u_deg
    assert np.all(np.isfinite(found.maximum.covariance()))
    # The prior level^0.1 is worth a tenth of a count, spread over the points without continuum.
    dark = background_rate(full, found.maximum.parameters)[0] * full.dwell_s
    assert 0.03 < dark[full.reading_deg < EDGE_DEG - 0.3].sum() < 0.2


def test_pulls_of_many_fits():
    """Sixty drawn spectra: the edges scatter about the truth as their uncertainty says."""
    around, true = given(), parameters(rate=1500.0)
    pulls = []
    for seed in range(60):
        found = fit_edge(counted(window(), true, around, seed), around, true)
        assert found.maximum.converged
        pulls.append((found.reading_deg - EDGE_DEG) / found.reading_u_deg)
    # Standard errors of mean and width of 60 pulls: 0.13 and 0.09.
    assert abs(np.mean(pulls)) < 0.45
    assert 0.72 < np.std(pulls) < 1.32


def profile_rise(found, shift):
    """Rise of the least objective with the cutoff held elsewhere."""
    start = found.maximum.parameters.copy()
    start[0] += shift
    held = fit_edge(found.window, found.given, start, hold=0).maximum
    best = found.maximum
    return held.deviance + held.penalty - best.deviance - best.penalty


@pytest.mark.parametrize(("rate", "seed"), [(6000.0, 1), (600.0, 2), (60.0, 3), (60.0, 8)])
def test_sides_against_a_direct_profile(rate, seed):
    around, true = given(), parameters(rate=rate)
    found = fit_edge(counted(window(), true, around, seed), around, true)
    lower, upper = likelihood_sides(found)
    direct = [
        sign * brentq(lambda s: profile_rise(found, s) - 1.0, 0.0, sign * 5.0 * found.reading_u_deg)
        for sign in (-1.0, 1.0)
    ]
    # One point of the profile, scaled as a parabola, against the profile itself.
    assert lower == pytest.approx(direct[0], rel=0.1)
    assert upper == pytest.approx(direct[1], rel=0.1)


def test_a_window_keeps_the_cutoff_inside():
    """Counts without an edge: the cutoff ends at an end of the window, never outside."""
    around = given()
    rng = np.random.default_rng(2)
    sketch = window()
    flat = counted(sketch, parameters(rate=1e-9), around)
    full = type(flat)(
        flat.reading_deg, rng.poisson(60.0, flat.counts.size).astype(float), flat.dwell_s, 2
    )
    found = fit_edge(full, around, parameters(rate=10.0))
    assert full.reading_deg[0] <= found.reading_deg <= full.reading_deg[-1]


def test_changed_surroundings():
    around = given()
    other = around.changed(zero_deg=0.2, resolution_deg=0.3, dead_time_us=10.0)
    assert (other.zero_deg, other.dead_time_us) == (0.2, 10.0)
    assert other.kernel == Kernel(0.3, around.kernel.triangular_fraction)
    assert other.excess == around.excess
    assert around.changed() == around
