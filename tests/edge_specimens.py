"""Small windows around an edge, for the tests of the edge fit (figures of the trade, no source)."""

from __future__ import annotations

import math

import numpy as np

from hdetermine.inference.edgemodel import (
    EdgeWindow,
    LineTemplate,
    Surroundings,
    expected_counts,
)
from hdetermine.inference.smearing import Kernel

EDGE_DEG = 5.2
# Two components of unequal strength with natural widths, true angles.
LINE = LineTemplate(((6.35, 0.004, 1.0), (6.41, 0.004, 0.5)))
# The same line just above the anode's own absorption edge.
EDGED_LINE = LineTemplate(LINE.components, 6.22)
OTHER_LINE = LineTemplate(((6.02, 0.003, 1.0),))


def given(**changes) -> Surroundings:
    """What the fits take as known; 30 kV."""
    sound = Surroundings(
        zero_deg=0.08,
        kernel=Kernel(0.25, 0.4),
        excess=0.85,
        excess_energy_keV=0.4,
        energy_keV=30.0,
        dead_time_us=90.0,
        dead_time_model="nonparalysable",
    )
    if "dead_time_model" in changes:
        model = changes.pop("dead_time_model")
        sound = Surroundings(
            sound.zero_deg, sound.kernel, sound.excess, sound.excess_energy_keV,
            sound.energy_keV, sound.dead_time_us, model,
        )  # fmt: skip
    return sound.changed(**changes)


def window(background_terms=2, lines=(), *, step=0.1, low=3.6, high=6.8, dwell=10.0, **more):
    """A window without counts."""
    readings = np.round(np.arange(low, high + 1e-9, step), 6)
    return EdgeWindow(
        readings,
        np.zeros(readings.size),
        np.full(readings.size, dwell),
        background_terms,
        lines,
        **more,
    )


def parameters(
    background_terms=2,
    lines=0,
    *,
    edge=EDGE_DEG,
    rate=6000.0,
    smooth=(2.5, -0.5),
    level=1.5,
    jumps=(),
):
    """Parameters of `fit_edge`; `rate` is the amplitude of the continuum in 1/s."""
    bends = [-0.3, 0.15][: background_terms - 1]
    values = [edge, math.log(rate), *smooth, math.log(level), *bends]
    for i in range(lines):
        values += [math.log(120.0 / (i + 1)), 0.006 * (1 - 2 * i)]
    return np.array([*values, *jumps])


def counted(sketch: EdgeWindow, true, surroundings: Surroundings, seed=None) -> EdgeWindow:
    """The window with its mean counts, or with Poisson counts."""
    mean, _ = expected_counts(sketch, true, surroundings)
    counts = mean if seed is None else np.random.default_rng(seed).poisson(mean).astype(float)
    return EdgeWindow(
        sketch.reading_deg, counts, sketch.dwell_s, sketch.background_terms, sketch.lines,
        sketch.smooth_mean, sketch.smooth_u,
    )  # fmt: skip
