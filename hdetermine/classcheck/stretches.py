"""Identical stretches of counts in two scans.

Two independent scans agree in a count now and then, and more often where counts are low. How
surprising a stretch is follows from its counts: the information -ln P of a count is taken from
Poisson's law with the scan's own running mean, and the information of a stretch is the smaller
of the two scans' sums. Independent scans agree from a given place on in a stretch of information
I with a probability of at most exp(-I); summed over all pairs of scans and places this bounds
the chance of a false alarm in the class.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammaln

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

LEAST_LENGTH = 6
SEED_LENGTH, SEED_INFORMATION = 5, 5.0
SHIFTED_SEED_LENGTH, SHIFTED_SEED_INFORMATION = 8, 14.0
_RUNNING = 7
LONGEST_SCAN = 5000
"""Points of a scan that are compared; a longer one is compared up to there."""
LARGEST_CLASH = 400
"""Scans that share one seed: more say nothing about any pair of them."""


@dataclass(frozen=True, slots=True, eq=False)
class CountTrace:
    """The counts of one scan, ready to be compared.

    Attributes
    ----------
    group : int
        Number of the group within the class.
    scan : int
        Number of the scan within the group.
    label : str
        How the scan is called in a sentence.
    millidegrees : ndarray of int, shape (n,)
        Readings, rounded.
    counts : ndarray of int, shape (n,)
        Counts.
    information : ndarray, shape (n,)
        -ln P of each count.
    """

    group: int
    scan: int
    label: str
    millidegrees: IntArray
    counts: IntArray
    information: FloatArray


@dataclass(frozen=True, slots=True)
class Stretch:
    """A stretch of identical counts.

    Attributes
    ----------
    first, second : int
        Index of the two traces.
    first_start, second_start, length : int
        Where it lies.
    information : float
        Its surprise, natural units.
    probability : float
        Bound on the chance of so surprising a stretch anywhere in a sound class.
    same_angles : bool
        True if both stand at the same angles.
    """

    first: int
    second: int
    first_start: int
    second_start: int
    length: int
    information: float
    probability: float
    same_angles: bool


def count_information(counts: IntArray) -> FloatArray:
    """Information -ln P of each count under Poisson's law with the running mean."""
    values = counts.astype(float)
    weight = np.convolve(np.ones(values.size), np.ones(_RUNNING), mode="same")
    mean = np.convolve(values, np.ones(_RUNNING), mode="same") / weight
    mean = np.maximum(mean, 1e-9)
    return np.asarray(np.maximum(mean - values * np.log(mean) + gammaln(values + 1.0), 0.0))


def make_trace(group: int, scan: int, label: str, reading_deg: FloatArray, counts: IntArray) -> (
    CountTrace
):  # fmt: skip
    """Make the trace of a scan."""
    part = slice(0, LONGEST_SCAN)
    kept = counts[part].astype(np.int64)
    return CountTrace(
        group, scan, label, np.rint(reading_deg[part] * 1e3).astype(np.int64), kept,
        count_information(kept),
    )  # fmt: skip


def find_stretches(traces: Sequence[CountTrace], chance: float) -> list[Stretch]:
    """Find stretches that independent counting does not explain.

    Parameters
    ----------
    traces : sequence of CountTrace
        Every scan of the class.
    chance : float
        Chance of a false alarm that is allowed, over the whole class.

    Returns
    -------
    list of Stretch
        The most surprising of each pair of scans, most surprising first.
    """
    points = [trace.counts.size for trace in traces]
    pairs = len(traces) * (len(traces) - 1) / 2.0
    longest = max(points, default=0)
    # Half of the allowance each: same angles, and any two places.
    places = {True: 2.0 * pairs * longest, False: 2.0 * pairs * longest**2}
    best: dict[tuple[int, int], Stretch] = {}
    for same_angles in (True, False):
        for one, other in _seeds(traces, same_angles):
            stretch = _extended(traces, one, other, same_angles, places[same_angles])
            pair = (stretch.first, stretch.second)
            if stretch.length < LEAST_LENGTH or stretch.probability > chance:
                continue
            if pair not in best or stretch.information > best[pair].information:
                best[pair] = stretch
    return sorted(best.values(), key=lambda s: (-s.information, s.first, s.second))


Place = tuple[int, int]


def _seeds(traces: Sequence[CountTrace], same_angles: bool) -> set[tuple[Place, Place]]:
    """Pairs of places that agree in a few counts: start of each run of agreement, once."""
    length = SEED_LENGTH if same_angles else SHIFTED_SEED_LENGTH
    least = SEED_INFORMATION if same_angles else SHIFTED_SEED_INFORMATION
    index: dict[tuple[int, bytes], list[Place]] = {}
    for number, trace in enumerate(traces):
        if trace.counts.size < length:
            continue
        windows = np.lib.stride_tricks.sliding_window_view(trace.counts, length)
        worth = np.convolve(trace.information, np.ones(length), mode="valid") >= least
        for start in np.flatnonzero(worth):
            angle = int(trace.millidegrees[start]) if same_angles else 0
            index.setdefault((angle, windows[start].tobytes()), []).append((number, int(start)))
    seeds: set[tuple[Place, Place]] = set()
    for places in index.values():
        if not 1 < len(places) <= LARGEST_CLASH:
            continue
        for one, other in itertools.combinations(places, 2):
            if one[0] != other[0]:
                seeds.add(_run_start(traces, one, other))
    return seeds


def _run_start(traces: Sequence[CountTrace], one: Place, other: Place) -> tuple[Place, Place]:
    """Go back to where the agreement begins."""
    (a, i), (b, j) = one, other
    first, second = traces[a].counts, traces[b].counts
    while i > 0 and j > 0 and first[i - 1] == second[j - 1]:
        i, j = i - 1, j - 1
    return (a, i), (b, j)


def _extended(
    traces: Sequence[CountTrace], one: Place, other: Place, same_angles: bool, places: float
) -> Stretch:
    (a, i), (b, j) = one, other
    first, second = traces[a], traces[b]
    span = min(first.counts.size - i, second.counts.size - j)
    equal = first.counts[i : i + span] == second.counts[j : j + span]
    length = int(np.argmin(equal)) if not np.all(equal) else span
    information = min(
        float(np.sum(first.information[i : i + length])),
        float(np.sum(second.information[j : j + length])),
    )
    probability = min(1.0, places * math.exp(-min(information, 700.0)))
    return Stretch(a, b, i, j, length, information, probability, same_angles)
