"""What the edges share: its value, covariance and answers, against refits and a joint fit."""

import math
from dataclasses import replace

import numpy as np
import pytest
from edge_specimens import counted, given, parameters, window

from hdetermine.inference import measurement as names
from hdetermine.inference.edgemodel import expected_counts, fit_edge
from hdetermine.inference.shared import (
    OWN_FREEDOM,
    RESPONDING,
    SMOOTH_NAMES,
    by_input,
    edge_responses,
    edge_sine,
    fit_with,
    moved,
    share,
    smooth_map,
)
from hdetermine.records.quantity import Quantity

SHARED_TRUTH = np.array([2.8, 0.45, 0.02])
# Cutoff reading and energy at the limit of three voltages.
EDGES = ((5.2, 30.0), (4.5, 35.0), (6.2, 25.0))

# Steps for refits: so long that what a fit leaves open does not show, still short enough.
LONG_STEPS = {
    names.ZERO: 0.1,
    names.RESOLUTION: 0.02,
    names.KERNEL: 0.2,
    names.EXCESS: 0.1,
    names.EXCESS_ENERGY: 0.05,
    names.DEAD_TIME: 40.0,
}


def width(value=0.25, u=math.inf):
    return Quantity(names.RESOLUTION, "w", value, u, "°")


def fits_of(*, seed=None, rate=12000.0, width_deg=0.25):
    """One fit an edge; mean counts unless seeded. All obey one smooth factor."""
    reference = math.exp(
        np.mean([math.log(math.sin(math.radians(edge - 0.08))) for edge, _ in EDGES])
    )
    fits = []
    for number, (edge, energy) in enumerate(EDGES):
        around = given(energy_keV=energy, resolution_deg=width_deg)
        ratio = math.sin(math.radians(edge - 0.08)) / reference
        true = parameters(edge=edge, rate=rate, smooth=tuple(smooth_map(ratio) @ SHARED_TRUTH))
        sketch = window(low=edge - 1.6, high=edge + 1.6)
        full = counted(sketch, true, around, None if seed is None else seed + number)
        fits.append(fit_edge(full, around, true))
    return tuple(fits)


@pytest.fixture(scope="module", params=[False, True], ids=["width known", "width free"])
def shared(request):
    return share(fits_of(), width(), width_free=request.param)


def test_the_smooth_map_is_that_of_one_function():
    """ln T = t1 ln r - t2 (r^3 - 1)/3 about another reference, and t3 M for the bend.

    Constants go into the amplitude.
    """
    t1, t2, t3, ratio = 1.3, 0.5, 0.3, 1.23
    a1, a2 = smooth_map(ratio) @ np.array([t1, t2, t3])

    def whole(r):
        return t1 * math.log(r) - t2 * (r**3 - 1.0) / 3.0

    for x in (0.0, 0.1, 0.4):
        bend = ((1.0 + x) ** 3 - 1.0) / 3.0 - math.log1p(x)
        own = a1 * math.log1p(x) + a2 * bend
        assert own == pytest.approx(whole(ratio * (1.0 + x)) - whole(ratio) + t3 * bend)


def test_names_and_truth(shared):
    expected = [*([names.RESOLUTION] if shared.width_free else []), *SMOOTH_NAMES]
    assert [quantity.name for quantity in shared.inputs] == expected
    values = np.array([quantity.value for quantity in shared.inputs])
    u = np.array([quantity.standard_uncertainty for quantity in shared.inputs])
    truth = np.array([*([0.25] if shared.width_free else []), *SHARED_TRUTH])
    # Mean counts: only the weak priors pull.
    assert np.all(np.abs(values - truth) < 0.2 * u)
    np.testing.assert_allclose(np.sqrt(np.diag(shared.covariance)), u, rtol=1e-6)
    np.testing.assert_allclose(np.diag(shared.correlation()), 1.0)
    for fit, (edge, _) in zip(shared.fits, EDGES, strict=True):
        assert fit.reading_deg == pytest.approx(edge, abs=0.1 * fit.reading_u_deg)
        assert fit.window.smooth_u == OWN_FREEDOM


def joint_information(shared):
    """Information on all parameters of all fits and the shared numbers at once."""
    fits, g = shared.fits, len(shared.inputs)
    size = sum(fit.maximum.parameters.size for fit in fits) + g
    information = np.zeros((size, size))
    at = 0
    for fit in fits:
        p = fit.maximum.parameters.size
        columns = [*range(at, at + p), *range(size - g, size)]
        by_width = by_input(fit, moved(fit.given, "resolution_deg", 1e-4), 1e-4)
        whole = np.zeros((fit.maximum.expected.size, p + g))
        whole[:, :p] = fit.maximum.jacobian
        if shared.width_free:
            whole[:, p] = by_width
        block = (whole / fit.maximum.expected[:, np.newaxis]).T @ whole
        # Departure of (a1, a2) from what the shared function asks, with its freedom.
        departure = np.zeros((2, p + g))
        departure[:, 2:4] = np.eye(2)
        departure[:, -3:] = -smooth_map(edge_sine(fit) / shared.reference_sine)
        block += departure.T @ np.diag(np.array(OWN_FREEDOM) ** -2.0) @ departure
        block[5, 5] += 1.5**-2.0  # prior of the background's slope
        information[np.ix_(columns, columns)] += block
        at += p
    # Priors of the shared numbers.
    information[-3:, -3:] += np.diag(
        np.array([3.0, 1.0, 0.4]) ** -2.0
    )  # priors of the shared numbers
    return information


def test_covariance_is_that_of_the_joint_fit(shared):
    """The profile likelihoods add up to the joint one: same shared covariance, same cutoffs."""
    covariance = np.linalg.inv(joint_information(shared))
    g = len(shared.inputs)
    np.testing.assert_allclose(covariance[-g:, -g:], shared.covariance, rtol=0.02, atol=1e-9)
    at = 0
    for fit in shared.fits:
        responses = edge_responses(fit, shared)
        by_shared = np.array([responses[quantity.name] for quantity in shared.inputs])
        total = fit.reading_u_deg**2 + by_shared @ shared.covariance @ by_shared
        assert total == pytest.approx(covariance[at, at], rel=0.02)
        at += fit.maximum.parameters.size


@pytest.fixture(scope="module")
def refits(shared):
    """Shared numbers and readings after each input was moved and everything fitted again."""
    found = {}
    for name, attribute, _ in RESPONDING:
        if shared.width_free and name == names.RESOLUTION:
            continue
        step = LONG_STEPS[name]
        ends = []
        for sign in (1.0, -1.0):
            changed = tuple(
                fit_edge(fit.window, moved(fit.given, attribute, sign * step),
                         fit.maximum.parameters)
                for fit in fits_of()
            )  # fmt: skip
            again = share(changed, width(), width_free=shared.width_free)
            numbers = np.array([quantity.value for quantity in again.inputs])
            ends.append((numbers, np.array([fit.reading_deg for fit in again.fits])))
        found[name] = tuple(
            (ahead - behind) / (2.0 * step) for ahead, behind in zip(*ends, strict=True)
        )
    return found


EVERY = [name for name, _, _ in RESPONDING]


@pytest.mark.parametrize("name", EVERY)
def test_answers_of_the_shared_numbers_against_refits(shared, refits, name):
    if name not in refits:
        assert name not in shared.answers  # the width answers to nothing but itself
        return
    moved_by, _ = refits[name]
    u = np.sqrt(np.diag(shared.covariance))
    # To 5 %, or to what the rounds of `share` leave open.
    atol = 0.05 * u / LONG_STEPS[name]
    difference = np.abs(shared.answers[name] - moved_by)
    assert np.all(difference < 0.05 * np.abs(moved_by) + atol), (shared.answers[name], moved_by)


@pytest.mark.parametrize("name", EVERY)
def test_responses_of_the_cutoffs_against_refits(shared, refits, name):
    if name not in refits:
        assert name == shared.inputs[0].name  # tested as one of the shared numbers
        return
    _, readings = refits[name]
    for fit, moved_by in zip(shared.fits, readings, strict=True):
        response = edge_responses(fit, shared)[name]
        atol = 0.03 * fit.reading_u_deg / LONG_STEPS[name]
        assert response == pytest.approx(moved_by, rel=0.05, abs=atol)


def test_responses_are_worth_testing(refits):
    """Each input moves some cutoff by much more than the tolerance above."""
    for name, (_, readings) in refits.items():
        assert np.abs(readings).max() * LONG_STEPS[name] > 2e-4, name


def test_zero_moves_the_limit_and_the_shape_alike(refits):
    """A reading is a reading: the cutoff stays where the counts rise, whatever the zero."""
    _, readings = refits[names.ZERO]
    assert np.all(np.abs(readings) < 0.1)


def test_response_to_the_shared_numbers_themselves(shared):
    for place, quantity in enumerate(shared.inputs):
        step = 0.02 if quantity.name == names.RESOLUTION else 0.4
        ends = []
        for sign in (1.0, -1.0):
            inputs = list(shared.inputs)
            inputs[place] = replace(quantity, value=quantity.value + sign * step)
            other = replace(shared, inputs=tuple(inputs))
            ends.append(np.array([fit_with(fit, other).reading_deg for fit in shared.fits]))
        for fit, moved_by in zip(shared.fits, (ends[0] - ends[1]) / (2.0 * step), strict=True):
            response = edge_responses(fit, shared)[quantity.name]
            assert response == pytest.approx(
                moved_by, rel=0.05, abs=0.02 * fit.reading_u_deg / step
            )


def test_fit_with_gives_back_the_fits(shared):
    for fit in shared.fits:
        again = fit_with(fit, shared)
        assert again.reading_deg == pytest.approx(fit.reading_deg, abs=0.02 * fit.reading_u_deg)
        assert again.window.smooth_mean == pytest.approx(fit.window.smooth_mean, abs=1e-3)
        assert again.given.kernel.fwhm_deg == pytest.approx(fit.given.kernel.fwhm_deg)


@pytest.mark.parametrize("true_width", [0.18, 0.35])
def test_a_free_width_is_found_from_afar(true_width):
    fits = tuple(
        fit_edge(fit.window, fit.given.changed(resolution_deg=0.25), fit.maximum.parameters)
        for fit in fits_of(width_deg=true_width)
    )
    found = share(fits, width(0.25), width_free=True)
    resolution = found.inputs[0]
    assert resolution.value == pytest.approx(true_width, abs=0.2 * resolution.standard_uncertainty)


def test_a_stated_width_is_a_prior():
    free = share(fits_of(), width(0.25), width_free=True)
    loose = free.inputs[0].standard_uncertainty
    tied = share(fits_of(), width(0.25 + 0.5 * loose, 0.5 * loose), width_free=True).inputs[0]
    # Mean weighted by 1 and 4.
    assert tied.standard_uncertainty == pytest.approx(loose / math.sqrt(5.0), rel=0.05)
    assert tied.value == pytest.approx(0.25 + 0.4 * loose, abs=0.1 * loose)
    assert tied.source == "run sheet and edges"
    assert free.inputs[0].source == "edges"


def test_pulls_of_the_width():
    """Twenty drawn runs: the width scatters about its truth as its uncertainty says."""
    pulls = []
    for seed in range(20):
        found = share(fits_of(seed=100 + 10 * seed, rate=2500.0), width(), width_free=True)
        resolution = found.inputs[0]
        pulls.append((resolution.value - 0.25) / resolution.standard_uncertainty)
    assert abs(np.mean(pulls)) < 0.8
    assert 0.5 < np.std(pulls) < 1.5


def test_scans_that_want_different_widths_widen_its_uncertainty():
    narrow, broad = fits_of(width_deg=0.15), fits_of(width_deg=0.35)
    mixed = (narrow[0], broad[1], broad[2])
    level = tuple(
        fit_edge(fit.window, fit.given.changed(resolution_deg=0.25), fit.maximum.parameters)
        for fit in mixed
    )
    found = share(level, width(), width_free=True)
    alike = share(fits_of(), width(), width_free=True)
    wide, usual = (s.inputs[0].standard_uncertainty for s in (found, alike))
    assert wide > 1.5 * usual
    np.testing.assert_allclose(found.correlation(), found.correlation().T)
    assert np.all(np.linalg.eigvalsh(found.covariance) > 0.0)


def test_by_input_is_a_derivative():
    fit = fits_of()[0]
    for name, attribute, step in RESPONDING:
        one = by_input(fit, moved(fit.given, attribute, step), step)
        p = fit.maximum.parameters
        ahead, behind = (
            expected_counts(fit.window, p, moved(fit.given, attribute, s))[0]
            for s in (0.5 * step, -0.5 * step)
        )
        central = (ahead - behind) / step
        assert np.abs(one - central).max() < 0.05 * np.abs(central).max(), name
