"""Fisher scoring: the maximum of a Poisson likelihood with weak priors."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from hdetermine.inference.likelihood import poisson_deviance

FloatArray = NDArray[np.float64]
Model = Callable[[FloatArray], tuple[FloatArray, FloatArray]]
Prior = Callable[[FloatArray], tuple[float, FloatArray, FloatArray]]

_STUCK = 1e8  # damping
_KINK = 1.0  # of the deviance: one standard uncertainty


@dataclass(frozen=True, slots=True, eq=False)
class Maximum:
    """Where the steps settled.

    Attributes
    ----------
    parameters : ndarray, shape (p,)
        At the maximum.
    information : ndarray, shape (p, p)
        Expected information, priors included.
    expected : ndarray, shape (n,)
        Expected counts.
    jacobian : ndarray, shape (n, p)
        Of the expected counts.
    deviance, penalty : float
        Poisson deviance; penalty of the priors, also as a deviance.
    converged : bool
        False if the steps did not settle.
    """

    parameters: FloatArray
    information: FloatArray
    expected: FloatArray
    jacobian: FloatArray
    deviance: float
    penalty: float
    converged: bool

    def covariance(self) -> FloatArray:
        """Inverse of the information, shape (p, p).

        Inverted with a diagonal of ones: a parameter of which the counts tell next to nothing is
        told apart from one that lies in a direction they tell nothing of.
        """
        scale = np.sqrt(np.diag(self.information).clip(min=1e-300))
        shape = np.outer(scale, scale)
        return np.asarray(np.linalg.pinv(self.information / shape, hermitian=True) / shape)


def maximise(
    counts: FloatArray,
    model: Model,
    prior: Prior,
    start: FloatArray,
    step_limits: FloatArray,
    *,
    bounds: tuple[FloatArray | float, FloatArray | float] = (-np.inf, np.inf),
    hold: int | None = None,
    iterations: int = 60,
) -> Maximum:
    """Climb to the maximum of the likelihood by damped Fisher scoring.

    Parameters
    ----------
    counts : ndarray, shape (n,)
        Observed counts.
    model : callable
        Parameters to expected counts (n,) and Jacobian (n, p).
    prior : callable
        Parameters to penalty (as a deviance), half its gradient and half its curvature.
    start : ndarray, shape (p,)
        Where to start.
    step_limits : ndarray, shape (p,)
        No step is longer than this.
    bounds : (low, high)
        The parameters stay within; numbers or shape (p,).
    hold : int, optional
        Index of a parameter that stays where it starts (for profiles).
    iterations : int
        At most so many steps.

    References
    ----------
    W. Cash, Astrophys. J. 228, 939 (1979), for the likelihood; the expected information is
    J^T diag(1/m) J.
    """
    may_move = np.ones(start.size, dtype=bool)
    if hold is not None:
        may_move[hold] = False
    low, high = bounds
    parameters = start.astype(float)
    expected, jacobian = model(parameters)
    penalty, gradient, precision = prior(parameters)
    deviance = poisson_deviance(counts, expected)
    damping, converged = 1e-3, False
    for _ in range(iterations):
        weighted = jacobian / expected[:, np.newaxis]
        score = weighted.T @ (counts - expected) - gradient
        information = weighted.T @ jacobian + np.diag(precision)
        scale = np.diag(information).clip(min=1e-12)
        # A parameter that its bound stops is held, lest the others reckon with its step.
        stopped = ((parameters <= low) & (score < 0.0)) | ((parameters >= high) & (score > 0.0))
        free = may_move & ~stopped
        index = np.ix_(free, free)
        step = np.zeros(parameters.size)
        step[free] = np.linalg.solve((information + damping * np.diag(scale))[index], score[free])
        trial = np.clip(parameters + np.clip(step, -step_limits, step_limits), low, high)
        trial_expected, trial_jacobian = model(trial)
        trial_penalty, trial_gradient, trial_precision = prior(trial)
        trial_deviance = poisson_deviance(counts, trial_expected)
        gain = deviance + penalty - trial_deviance - trial_penalty
        if gain >= -1e-9:
            parameters, expected, jacobian = trial, trial_expected, trial_jacobian
            penalty, gradient, precision = trial_penalty, trial_gradient, trial_precision
            deviance = trial_deviance
            damping = max(damping * 0.2, 1e-9)
            if gain < 1e-5:
                converged = True
                break
        else:
            damping = max(damping * 8.0, 1e-4)
            if damping > _STUCK:
                # No step gains, as on the kink of a triangular kernel: settled, unless the score
                # promises more than a standard uncertainty.
                promised = np.linalg.lstsq(information[index], score[free], rcond=None)[0]
                converged = bool(score[free] @ promised < _KINK)
                break
    weighted = jacobian / expected[:, np.newaxis]
    information = weighted.T @ jacobian + np.diag(precision)
    return Maximum(parameters, information, expected, jacobian, deviance, penalty, converged)
