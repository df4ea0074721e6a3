"""Markov chains for the posterior, and whether they have converged."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hdetermine.inference.density import PosteriorDensity

FloatArray = NDArray[np.float64]

STUDENT_FREEDOM = 20.0
STUDENT_WIDTH = 1.05
MOVE_SHARES: Mapping[str, float] = {"independence": 0.6, "stretch": 0.2, "differential": 0.2}
DISCARDED_SHARE = 0.2
PROGRESS_EVERY = 100

# emcee's advice for trusting its autocorrelation time, and the limits of Vehtari et al. (2021)
# with ten times their minimum of 100 per chain-of-four for the tails of an interval.
STEPS_PER_TAU = 50.0
RHAT_LIMIT = 1.01
ESS_LIMIT = 1000.0


@dataclass(frozen=True, slots=True, eq=False)
class Chain:
    """A run of an ensemble.

    `positions` has the shape (steps kept, walkers, dimensions); `flat` the same points with
    shape (points, dimensions).
    """

    positions: FloatArray
    walkers: int
    steps: int
    discarded: int
    acceptance: float
    moves: Mapping[str, float]

    @property
    def flat(self) -> FloatArray:
        """All points, step by step."""
        return self.positions.reshape(-1, self.positions.shape[2])


@dataclass(frozen=True, slots=True, eq=False)
class Convergence:
    """Diagnostics of a chain, one figure a coordinate; `failure` is empty if all is well."""

    tau: FloatArray
    ess: FloatArray
    rhat: FloatArray
    limits: Mapping[str, float]
    failure: str


class IndependenceProposal:
    """Propose from a Student distribution around the Gaussian approximation.

    Independent of where the walker stands, hence almost without autocorrelation where the
    approximation is good; the tails keep it valid where it is not, and the two ensemble moves
    beside it reach what it would miss (L. Tierney, Ann. Stat. 22, 1701 (1994)).
    """

    def __init__(self, mean: FloatArray, root: FloatArray) -> None:
        self._mean = mean
        self._root = STUDENT_WIDTH * root
        self._inverse = np.linalg.inv(self._root)

    def _log_density(self, points: FloatArray) -> FloatArray:
        scaled = (points - self._mean) @ self._inverse.T
        power = 0.5 * (STUDENT_FREEDOM + points.shape[1])
        return np.asarray(-power * np.log1p(np.sum(scaled**2, axis=1) / STUDENT_FREEDOM))

    def __call__(self, points: FloatArray, random: Any) -> tuple[FloatArray, FloatArray]:
        """Return proposals and the log ratio of the proposal densities."""
        normal = random.standard_normal(points.shape)
        spread = np.sqrt(random.chisquare(STUDENT_FREEDOM, (len(points), 1)) / STUDENT_FREEDOM)
        proposed = self._mean + (normal / spread) @ self._root.T
        return proposed, self._log_density(points) - self._log_density(proposed)


def run_chain(
    density: PosteriorDensity,
    seed: np.random.SeedSequence,
    walkers: int,
    steps: int,
    progress: Callable[[str, int, int], None] | None = None,
) -> Chain:
    """Run an ensemble of walkers, started from the Gaussian approximation.

    Parameters
    ----------
    density : PosteriorDensity
        What to sample.
    seed : numpy.random.SeedSequence
        Source of all randomness; it is not changed.
    walkers, steps : int
        Size of the ensemble (raised to an even number of at least four a dimension) and number
        of steps, of which the first fifth is discarded.
    progress : callable or None
        Called with ("posterior", steps done, steps) now and then.

    Returns
    -------
    Chain
    """
    import emcee

    dimensions = density.dimensions
    walkers = max(walkers, 4 * dimensions)
    walkers += walkers % 2
    generator = np.random.default_rng(seed.generate_state(4).tolist())
    start = density.mean + generator.standard_normal((walkers, dimensions)) @ (
        density.covariance_root.T
    )
    # The chain has its own generator; a seeded start alone would leave it to the global one.
    state = emcee.State(start, random_state=np.random.MT19937(seed).state)
    proposal = IndependenceProposal(density.mean, density.covariance_root)
    moves = (emcee.moves.MHMove(proposal), emcee.moves.StretchMove(), emcee.moves.DEMove())
    sampler = emcee.EnsembleSampler(
        walkers,
        dimensions,
        density,
        moves=list(zip(moves, MOVE_SHARES.values(), strict=True)),
        vectorize=True,
    )
    # The wrapper that emcee puts around a density prints a traceback of an interruption, too.
    sampler.log_prob_fn = density
    for done, _ in enumerate(sampler.sample(state, iterations=steps), start=1):
        if progress is not None and (done % PROGRESS_EVERY == 0 or done == steps):
            progress("posterior", done, steps)
    discarded = int(DISCARDED_SHARE * steps)
    return Chain(
        positions=np.asarray(sampler.get_chain(discard=discarded)),
        walkers=walkers,
        steps=steps,
        discarded=discarded,
        acceptance=float(np.mean(sampler.acceptance_fraction)),
        moves=MOVE_SHARES,
    )


def convergence(points: FloatArray) -> Convergence:
    """Judge a chain by autocorrelation time, effective sample size and split R-hat.

    Parameters
    ----------
    points : ndarray, shape (steps, walkers, parameters)
        The parameters whose figures matter, which need not be the sampler's coordinates.

    Notes
    -----
    Walkers of one ensemble are not fully independent chains; the three figures are judged
    together for that reason.

    References
    ----------
    J. Goodman and J. Weare, Commun. Appl. Math. Comput. Sci. 5, 65 (2010), section 5; A.
    Vehtari, A. Gelman, D. Simpson, B. Carpenter and P.-C. Buerkner, Bayesian Anal. 16, 667
    (2021): rank-normalised split R-hat and bulk effective sample size.
    """
    import emcee
    from arviz_stats.base import array_stats

    kept = len(points)
    with np.errstate(invalid="ignore", divide="ignore"):  # a walker that never moved
        tau = np.asarray(emcee.autocorr.integrated_time(points, tol=0, quiet=True))
        ess = np.asarray(array_stats.ess(points, chain_axis=1, draw_axis=0, method="bulk"))
        rhat = np.asarray(array_stats.rhat(points, chain_axis=1, draw_axis=0))
    limits = {
        "steps_per_autocorrelation_time": STEPS_PER_TAU,
        "split_rhat": RHAT_LIMIT,
        "effective_sample_size": ESS_LIMIT,
    }
    failures = []
    # Written so that a figure that is not a number fails too.
    if not np.all(kept >= STEPS_PER_TAU * tau):
        failures.append(
            f"{kept} steps are fewer than {STEPS_PER_TAU:g} autocorrelation times of "
            f"{np.max(tau):.1f} steps"
        )
    if not np.all(rhat <= RHAT_LIMIT):
        failures.append(f"split R-hat is {np.max(rhat):.3f}, more than {RHAT_LIMIT:g}")
    if not np.all(ess >= ESS_LIMIT):
        failures.append(f"the effective sample size is {np.min(ess):.0f}, below {ESS_LIMIT:g}")
    failure = f"The chain has not converged: {'; '.join(failures)}." if failures else ""
    return Convergence(tau, ess, rhat, limits, failure)
