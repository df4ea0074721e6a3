"""Recorded counts around an edge, as a function of the cutoff and its surroundings.

The expected count of a point is

    t rec( B(theta) + int K(theta - theta') C(theta') dtheta' + lines ),

with rec the dead time, B = exp(b0 + b1 s + b2 s^2) the background, K the smearing kernel and
C = exp(a0 + a1 L + a2 M) cos(theta') f(x) the continuum above its limit, x = lambda/lambda_min
- 1, L = ln(1 + x), M = ((1 + x)^3 - 1)/3 - L, and f the shape of `physics.continuum`. Absorption
grows as the cube of the wavelength, so a1 L + a2 M describes any power of the wavelength and any
absorber exactly. Where the window passes the anode's own K edge, the continuum steps up by a
factor 1 + j. The fit maximises the likelihood by Fisher scoring (`scoring`). Weak priors keep what
the data do not see within reason; they are stated beside the numbers below.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from hdetermine.inference.scoring import Maximum, maximise
from hdetermine.inference.smearing import Kernel, quadrature
from hdetermine.physics.continuum import rising_continuum
from hdetermine.physics.counting import recorded_rate, recorded_slope
from hdetermine.records.apparatus import DeadTimeModel

FloatArray = NDArray[np.float64]

# Weak priors (standard deviations): the background changes by less than exp(3) from end to end
# of the window, and bends by less than exp(1); a line stands within 0.02 degrees of where the
# angle scale puts it. The amplitude b of the background has the prior b^(0.1 - 1): as good as flat
# in its logarithm, but a background without counts stays defined.
_BACKGROUND_U = (1.5, 1.0)
SMOOTH_TERMS = 2
# What transmission, crystal and counter do together is close to a power of the wavelength: the
# crystal reflects as its square, thin counters absorb as its cube; windows and air, and counters
# that absorb much, bend it down.
SMOOTH_MEAN = (2.5, -0.5)
SMOOTH_U = (3.0, 2.0)
_LINE_SHIFT_U_DEG = 0.02
# The photons come from depths that the anode itself absorbs in: by a few percent.
_JUMP_MEAN, _JUMP_U = 0.06, 0.06
_BACKGROUND_POWER = 0.1


@dataclass(frozen=True, slots=True)
class LineTemplate:
    """A group of lines inside the window.

    Attributes
    ----------
    components : tuple of (float, float, float)
        True angle, natural FWHM (both in degrees) and strength of each line.
    absorption_deg : float or None
        True angle of the anode's own K edge, where it stands just below the lines.
    """

    components: tuple[tuple[float, float, float], ...]
    absorption_deg: float | None = None


@dataclass(frozen=True, slots=True)
class Surroundings:
    """What the edge fit takes as given.

    Attributes
    ----------
    zero_deg : float
        Reading minus true angle.
    kernel : Kernel
        The smearing.
    excess, excess_energy_keV : float
        Near-limit excess of the continuum.
    energy_keV : float
        Energy at the limit, from the tube voltage.
    dead_time_us : float
        Dead time.
    dead_time_model : str
        Its model.
    """

    zero_deg: float
    kernel: Kernel
    excess: float
    excess_energy_keV: float
    energy_keV: float
    dead_time_us: float
    dead_time_model: DeadTimeModel

    def changed(self, **changes: float) -> Surroundings:
        """Return a copy with other numbers; ``resolution_deg`` and ``triangular_fraction`` go
        to the kernel.
        """
        kernel = replace(
            self.kernel,
            fwhm_deg=changes.pop("resolution_deg", self.kernel.fwhm_deg),
            triangular_fraction=changes.pop("triangular_fraction", self.kernel.triangular_fraction),
        )
        values = {
            name: changes.get(name, getattr(self, name))
            for name in ("zero_deg", "excess", "excess_energy_keV", "energy_keV", "dead_time_us")
        }
        return Surroundings(kernel=kernel, dead_time_model=self.dead_time_model, **values)


@dataclass(frozen=True, slots=True, eq=False)
class EdgeWindow:
    """The points that take part in a fit, and the terms that describe them.

    Attributes
    ----------
    reading_deg, counts, dwell_s : ndarray, shape (n,)
        The points.
    background_terms : int
        2 or 3 terms of the logarithm of the background: level, slope, bend.
    lines : tuple of LineTemplate
        Lines modelled inside the window.
    smooth_mean, smooth_u : (float, float)
        Prior of the two terms of the smooth factor: expectation and standard deviation.
    """

    reading_deg: FloatArray
    counts: FloatArray
    dwell_s: FloatArray
    background_terms: int
    lines: tuple[LineTemplate, ...] = ()
    smooth_mean: tuple[float, float] = SMOOTH_MEAN
    smooth_u: tuple[float, float] = SMOOTH_U

    @property
    def absorption_deg(self) -> tuple[float, ...]:
        """True angles of the anode's absorption edges inside the window."""
        return tuple(line.absorption_deg for line in self.lines if line.absorption_deg is not None)

    @property
    def parameters(self) -> int:
        """Number of parameters of the fit."""
        own = 2 * len(self.lines) + len(self.absorption_deg)
        return 2 + SMOOTH_TERMS + self.background_terms + own


@dataclass(frozen=True, slots=True, eq=False)
class EdgeFit:
    """A maximum of the likelihood of one window."""

    window: EdgeWindow
    given: Surroundings
    maximum: Maximum

    @property
    def reading_deg(self) -> float:
        """Cutoff reading, degrees."""
        return float(self.maximum.parameters[0])

    @property
    def reading_u_deg(self) -> float:
        """Standard uncertainty of the reading from counting statistics, degrees."""
        return float(np.sqrt(max(self.maximum.covariance()[0, 0], 0.0)))

    @property
    def degrees_of_freedom(self) -> int:
        """Points minus parameters."""
        return self.window.counts.size - self.window.parameters


def continuum_rate(
    readings: FloatArray, parameters: FloatArray, given: Surroundings
) -> tuple[FloatArray, FloatArray]:
    """Smeared continuum (1/s) and its derivatives by cutoff, amplitude and smooth terms.

    Parameters
    ----------
    readings : ndarray, shape (n,)
        Goniometer readings, degrees.
    parameters : ndarray, shape (4,) or longer
        Cutoff reading (degrees), log amplitude, smooth terms; the rest is not used.
    given : Surroundings
        The rest.

    Returns
    -------
    rate : ndarray, shape (n,)
    derivatives : ndarray, shape (n, 4)
    """
    limit = float(parameters[0]) - given.zero_deg
    rate = np.zeros(readings.size)
    derivatives = np.zeros((readings.size, 2 + SMOOTH_TERMS))
    angles = readings - given.zero_deg
    lit = angles + given.kernel.reach_deg > limit
    if limit <= 0.05 or limit >= 85.0 or not lit.any():
        return rate, derivatives
    nodes, weights = quadrature(angles[lit], limit, given.kernel)
    radians = np.radians(nodes)
    limit_sine = np.sin(np.radians(limit))
    x = np.maximum(np.sin(radians) / limit_sine - 1.0, 0.0)
    value, slope = rising_continuum(x, given.excess, given.energy_keV / given.excess_energy_keV)
    longer = 1.0 + x
    stretch = np.log(longer)
    bend = (longer**3 - 1.0) / 3.0 - stretch
    smooth = parameters[1] + parameters[2] * stretch + parameters[3] * bend
    factor = weights * np.cos(radians) * np.exp(np.minimum(smooth, 60.0))
    value, slope = value * factor, slope * factor
    slope = slope + value * (parameters[2] + parameters[3] * (longer**3 - 1.0)) / longer
    rate[lit] = value.sum(axis=1)
    x_by_limit = -longer / np.tan(np.radians(limit)) * (np.pi / 180.0)
    derivatives[lit, 0] = (slope * x_by_limit).sum(axis=1)
    derivatives[lit, 1] = rate[lit]
    derivatives[lit, 2] = (value * stretch).sum(axis=1)
    derivatives[lit, 3] = (value * bend).sum(axis=1)
    return rate, derivatives


def _line_rate(
    readings: FloatArray, template: LineTemplate, shift: float, given: Surroundings
) -> FloatArray:
    centre, natural, strength = np.array(template.components).T
    distance = (readings - given.zero_deg - shift)[:, np.newaxis] - centre
    return np.asarray(given.kernel.profile(distance, natural) @ strength)


def background_rate(window: EdgeWindow, parameters: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Background (1/s) and its derivatives by its log terms.

    The slope is in units of the half span of the window.
    """
    start = 2 + SMOOTH_TERMS
    readings = window.reading_deg
    half = max(0.5 * (readings[-1] - readings[0]), 1e-9)
    position = (readings - 0.5 * (readings[-1] + readings[0])) / half
    powers = [position**i for i in range(window.background_terms)]
    log_rate = sum(parameters[start + i] * power for i, power in enumerate(powers))
    rate = np.exp(np.clip(log_rate, -60.0, 60.0))
    return rate, np.stack([rate * power for power in powers], axis=1)


def expected_counts(
    window: EdgeWindow, parameters: FloatArray, given: Surroundings
) -> tuple[FloatArray, FloatArray]:
    """Expected recorded counts, shape (n,), and their Jacobian, shape (n, p)."""
    continuum, by_continuum = continuum_rate(window.reading_deg, parameters, given)
    background, by_background = background_rate(window, parameters)
    start = 2 + SMOOTH_TERMS + window.background_terms
    by_jump = []
    for i, angle in enumerate(window.absorption_deg, start + 2 * len(window.lines)):
        past = ndtr((window.reading_deg - given.zero_deg - angle) / given.kernel.sigma_deg)
        gate = 1.0 + float(parameters[i]) * past
        by_jump.append((continuum * past)[:, np.newaxis])
        continuum, by_continuum = continuum * gate, by_continuum * gate[:, np.newaxis]
    columns = [by_continuum, by_background]
    rate = continuum + background
    for i, template in enumerate(window.lines):
        amplitude = np.exp(min(float(parameters[start + 2 * i]), 60.0))
        shift = float(parameters[start + 2 * i + 1])
        step = 1e-3
        profile = _line_rate(window.reading_deg, template, shift, given)
        ahead = _line_rate(window.reading_deg, template, shift + step, given)
        behind = _line_rate(window.reading_deg, template, shift - step, given)
        rate = rate + amplitude * profile
        columns.append(amplitude * np.stack([profile, (ahead - behind) / (2.0 * step)], axis=1))
    dead_time_s = given.dead_time_us * 1e-6
    expected = window.dwell_s * recorded_rate(rate, dead_time_s, given.dead_time_model)
    slope = window.dwell_s * recorded_slope(rate, dead_time_s, given.dead_time_model)
    jacobian = slope[:, np.newaxis] * np.concatenate([*columns, *by_jump], axis=1)
    return np.maximum(expected, 1e-9), jacobian


def _prior(window: EdgeWindow, parameters: FloatArray) -> tuple[float, FloatArray, FloatArray]:
    """Penalty (as a deviance), its half gradient, and half its curvature (diagonal)."""
    precision = np.zeros(parameters.size)
    centre = np.zeros(parameters.size)
    precision[2:4] = np.array(window.smooth_u) ** -2.0
    centre[2:4] = window.smooth_mean
    start = 2 + SMOOTH_TERMS
    bends = window.background_terms - 1
    precision[start + 1 : start + 1 + bends] = np.array(_BACKGROUND_U[:bends]) ** -2.0
    for i in range(len(window.lines)):
        precision[start + window.background_terms + 2 * i + 1] = _LINE_SHIFT_U_DEG**-2
    jumps = slice(start + window.background_terms + 2 * len(window.lines), None)
    precision[jumps], centre[jumps] = _JUMP_U**-2, _JUMP_MEAN
    gradient = precision * (parameters - centre)
    penalty = float(gradient @ (parameters - centre))
    penalty -= 2.0 * _BACKGROUND_POWER * float(parameters[start])
    gradient[start] -= _BACKGROUND_POWER
    return penalty, gradient, precision


def fit_edge(
    window: EdgeWindow, given: Surroundings, start: FloatArray, *, hold: int | None = None
) -> EdgeFit:
    """Maximise the Poisson likelihood of a window.

    Parameters
    ----------
    window : EdgeWindow
        Points and terms.
    given : Surroundings
        What is taken as known.
    start : ndarray, shape (p,)
        Where to start: cutoff reading, log amplitude, smooth terms, log background and its
        slope, then log amplitude and shift of each line, then the jumps.
    hold : int, optional
        Index of a parameter that stays where it starts (for profiles).
    """
    limits = np.full(start.size, 3.0)
    limits[0] = 0.1 * (window.reading_deg[-1] - window.reading_deg[0])
    # A cutoff outside the window would be a guess; one at its end is refused by the caller.
    low, high = np.full(start.size, -np.inf), np.full(start.size, np.inf)
    low[0], high[0] = window.reading_deg[0], window.reading_deg[-1]
    maximum = maximise(
        window.counts,
        lambda parameters: expected_counts(window, parameters, given),
        lambda parameters: _prior(window, parameters),
        start,
        limits,
        bounds=(low, high),
        hold=hold,
    )
    return EdgeFit(window, given, maximum)


def likelihood_sides(fit: EdgeFit) -> tuple[float, float]:
    """Distances below and above the cutoff at which the profile deviance rises by one, deg."""
    u = fit.reading_u_deg
    sides = []
    for sign in (-1.0, 1.0):
        start = fit.maximum.parameters.copy()
        start[0] += sign * u
        held = fit_edge(fit.window, fit.given, start, hold=0).maximum
        rise = held.deviance + held.penalty - fit.maximum.deviance - fit.maximum.penalty
        sides.append(u / np.sqrt(np.clip(rise, 0.25, 4.0)))
    return float(sides[0]), float(sides[1])
