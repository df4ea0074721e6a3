"""The posterior of h, beside the two other routes."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from hdetermine.records.results import Determination
from hdetermine.report.figure_style import BLUE, GREEN, INK, MUTED, PURPLE, below, canvas, few_ticks
from hdetermine.report.figure_svg import Picture, picture

LEAST_SAMPLES = 50


def posterior_pictures(d: Determination) -> tuple[Picture, ...]:
    """Draw the distribution of h, and its course along the chain.

    Returns
    -------
    tuple of Picture
        Empty if no posterior was sampled.
    """
    samples = d.posterior_samples
    if samples is None or len(samples) < LEAST_SAMPLES or "posterior" not in d.routes:
        return ()
    return _distribution(d, samples[:, 0]), _course(d, samples[:, 0])


def _distribution(d: Determination, chain: NDArray[np.float64]) -> Picture:
    scale = 1e34
    route, linear = d.routes["posterior"], d.routes["linear"]
    figure = canvas(280.0, bottom=58.0)
    axes = figure.subplots()
    density, edges = np.histogram(chain * scale, bins=40, density=True)
    axes.stairs(density, edges, color=GREEN, fill=True, alpha=0.25, linewidth=0)
    axes.stairs(density, edges, color=GREEN, linewidth=1.3, label="posterior")
    centre, spread = linear.value_J_s * scale, linear.standard_uncertainty_J_s * scale
    abscissa = np.linspace(centre - 3.8 * spread, centre + 3.8 * spread, 121)
    normal = np.exp(-0.5 * ((abscissa - centre) / spread) ** 2) / (spread * np.sqrt(2.0 * np.pi))
    axes.plot(abscissa, normal, color=BLUE, linestyle=(0, (5, 2.5)), label="linear route")
    axes.axvline(d.comparison.reference_J_s * scale, color=PURPLE, linewidth=1.3,
                 linestyle=(0, (1.2, 1.2)), label="SI value")  # fmt: skip
    few_ticks(axes)
    axes.set_ylim(bottom=0.0)
    axes.set_xlabel("h / 10⁻³⁴ J s")
    axes.set_ylabel("density / (10³⁴ J⁻¹ s⁻¹)")
    below(figure, axes, 3)
    low, high = route.interval_95_J_s
    alt = (
        f"Histogram of {chain.size} posterior samples of h: centre {route.value_J_s * scale:.4f}, "
        f"95 percent between {low * scale:.4f} and {high * scale:.4f} times ten to the minus 34 "
        "joule seconds; the normal distribution of the linear route is drawn over it."
    )
    caption = (
        "Posterior of h (stepped, filled) with the normal distribution of the linear route "
        "(dashed) and the SI value (dotted)."
    )
    return picture(figure, "posterior", alt, caption)


def _course(d: Determination, chain: NDArray[np.float64]) -> Picture:
    scale = 1e34
    figure = canvas(280.0, bottom=58.0)
    axes = figure.subplots()
    thin = max(1, chain.size // 400)
    place = np.arange(chain.size)
    axes.plot(place[::thin], chain[::thin] * scale, ".", color=MUTED, markersize=2.6,
              markeredgewidth=0.0, label="samples")  # fmt: skip
    mean = np.cumsum(chain) / (place + 1.0)
    axes.plot(place[thin::thin], mean[thin::thin] * scale, color=INK, label="mean so far")
    few_ticks(axes)
    axes.set_xlabel("sample, in the order of the chain")
    axes.set_ylabel("h / 10⁻³⁴ J s")
    below(figure, axes, 2)
    half = chain.size // 2
    first, second = chain[:half].mean() * scale, chain[half:].mean() * scale
    alt = (
        f"Samples of h in the order in which they were drawn, with their running mean: the first "
        f"half has mean {first:.4f}, the second {second:.4f} times ten to the minus 34 joule "
        "seconds."
    )
    caption = (
        "The chain in its order, thinned, with the running mean: a chain that has converged "
        "shows no trend."
    )
    return picture(figure, "chain", alt, caption)
