"""The posterior density of h and the common inputs, in coordinates that suit a sampler.

Coordinates t: every common input with an uncertainty has a standard normal coordinate z, and
its value is quantile(Phi(z)) of its own distribution, so that its prior is exactly the
distribution of the budget, correlations by the Gaussian copula of `budget.distributions.draw`.
The first coordinate t_0 is the relative distance of h from the weighted mean that the cutoffs
give with those inputs, so that it hardly depends on them; h itself has a flat prior.

What is independent from scan to scan and not counting statistics (fit windows, background,
voltage repeatability) is integrated out: its variance, expressed as a reading, widens both
sides of the likelihood of the scan's cutoff.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hdetermine.budget.correlation import square_root
from hdetermine.budget.distributions import from_normal
from hdetermine.budget.planck import linear_figures
from hdetermine.inference import measurement
from hdetermine.inference.spread import cutoff_sides
from hdetermine.inference.weights import log_per_degree, log_sensitivities, planck_gradient
from hdetermine.records.results import MeasurementModel

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class PosteriorDensity:
    """Log density and its Gaussian approximation.

    Attributes
    ----------
    model : MeasurementModel
        With n scans and m inputs.
    sampled : tuple of int
        Indices of the k inputs that are sampled.
    integrated : tuple of int
        Indices of the inputs that are integrated out.
    root : ndarray, shape (k, k)
        Square root of the correlation matrix of the sampled inputs.
    variances_deg2 : ndarray, shape (n, 2)
        Of the readings, lower and upper side.
    scale : float
        h = (mean of the cutoffs with the inputs) * (1 + scale * t_0).
    mean, covariance_root : ndarray, shapes (k + 1,) and (k + 1, k + 1)
        Gaussian approximation: mean and Cholesky factor of the covariance of t.
    """

    model: MeasurementModel
    sampled: tuple[int, ...]
    integrated: tuple[int, ...]
    root: FloatArray
    variances_deg2: FloatArray
    scale: float
    mean: FloatArray
    covariance_root: FloatArray

    @property
    def dimensions(self) -> int:
        """Number of coordinates."""
        return len(self.sampled) + 1

    def _values(self, t: FloatArray) -> FloatArray:
        """Values of all inputs at points t, shape (m, points)."""
        values = np.repeat(measurement.estimates(self.model)[:, np.newaxis], len(t), axis=1)
        scores = self.root @ t[:, 1:].T
        for i, score in zip(self.sampled, scores, strict=True):
            values[i] = from_normal(self.model.inputs[i], score)
        return values

    def points(self, t: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Return h, shape (points,), and the sampled inputs, shape (k, points).

        Parameters
        ----------
        t : ndarray, shape (points, k + 1)
        """
        values = self._values(t)
        planck = measurement.planck_J_s(self.model, values) * (1.0 + self.scale * t[:, 0])
        return np.asarray(planck), values[list(self.sampled)]

    def __call__(self, t: FloatArray) -> FloatArray:
        """Log density up to a constant, shape (points,); -inf out of the crystal's reach."""
        values = self._values(t)
        centre = measurement.planck_J_s(self.model, values)
        planck = centre * (1.0 + self.scale * t[:, 0])
        predicted = measurement.predicted_reading_deg(self.model, planck, values)
        deviation = predicted - self.model.reading_deg[:, np.newaxis]
        lower, upper = self.variances_deg2[:, :1], self.variances_deg2[:, 1:]
        mismatch = np.sum(deviation**2 / np.where(deviation < 0.0, lower, upper), axis=0)
        # Flat in h, not in t_0: dh = centre * scale * dt_0.
        with np.errstate(invalid="ignore", divide="ignore"):
            jacobian = np.log(centre)
        result = jacobian - 0.5 * (mismatch + np.sum(t[:, 1:] ** 2, axis=1))
        return np.where(np.isfinite(result), result, -np.inf)


def posterior_density(model: MeasurementModel) -> PosteriorDensity:
    """Set up the density of a model.

    Parameters
    ----------
    model : MeasurementModel
        At least one input must have an uncertainty, and every cutoff a width.

    Returns
    -------
    PosteriorDensity

    Raises
    ------
    ValueError
        If a cutoff has no width at all.
    """
    u = np.array([quantity.standard_uncertainty for quantity in model.inputs])
    names = [quantity.name for quantity in model.inputs]
    counting = {measurement.counting_name(scan) for scan in model.scans}
    alone = np.count_nonzero(model.correlation, axis=1) == 1
    free = [i for i in range(len(names)) if u[i] > 0.0 and names[i] not in counting]
    integrated = [i for i in free if alone[i] and not model.inputs[i].common]
    sampled = [i for i in free if i not in integrated]

    logarithmic = log_sensitivities(model, model.reading_deg)
    per_degree = log_per_degree(model, model.reading_deg)
    as_reading = logarithmic / per_degree[:, np.newaxis] * u
    own = np.sum(as_reading[:, integrated] ** 2, axis=1)
    variances = cutoff_sides(model) ** 2 + own[:, np.newaxis]
    if not np.all(variances > 0.0):
        raise ValueError("every cutoff needs a width")

    figures = linear_figures(model)
    root = square_root(model.correlation[np.ix_(sampled, sampled)])
    relative = figures.standard_uncertainty_J_s / figures.value_J_s
    # The prediction follows the mean that the inputs give, and each cutoff its own value.
    of_mean = planck_gradient(model)[sampled] * u[sampled] / figures.value_J_s
    of_inputs = of_mean / per_degree[:, np.newaxis] - as_reading[:, sampled]
    slopes = np.column_stack([np.full(len(model.scans), relative) / per_degree, of_inputs @ root])
    mean_variance = variances.mean(axis=1)
    precision = slopes.T @ (slopes / mean_variance[:, np.newaxis])
    precision[1:, 1:] += np.eye(len(sampled))
    covariance = np.linalg.inv(precision)
    expected = measurement.predicted_reading_deg(
        model, np.array([figures.value_J_s]), measurement.estimates(model)[:, np.newaxis]
    )[:, 0]
    mean = covariance @ (slopes.T @ ((model.reading_deg - expected) / mean_variance))
    return PosteriorDensity(
        model=model,
        sampled=tuple(sampled),
        integrated=tuple(integrated),
        root=root,
        variances_deg2=variances,
        scale=relative,
        mean=mean,
        covariance_root=np.linalg.cholesky(covariance),
    )
