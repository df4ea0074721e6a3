"""Closure study of the screening: false alarms in sound classes, and copied stretches.

    python -m tests.closure.screening_study [--classes 300] [--groups 12] [--seed 1]

Counts are simulated; a sound class is one in which nothing was done to them.
"""

from __future__ import annotations

import argparse
from collections import Counter

import numpy as np

from hdetermine.classcheck.screening import screen_counts, screen_voltages
from hdetermine.classcheck.screens import FAMILY_CHANCE, Look, raise_alarms
from hdetermine.classcheck.stretches import CountTrace, Stretch, find_stretches, make_trace
from hdetermine.determination import determine
from hdetermine.records.run import Run

from .students import make_bench

KINDS = (("Cu", "LiF"), ("Cu", "NaCl"), ("Mo", "LiF"), ("Mo", "NaCl"))
COPIED_POINTS = 15


def sound_runs(number: int, seed: int) -> list[Run]:
    """Simulate the runs of a class: one kind of bench, every group its own counts."""
    anode, crystal = KINDS[seed % len(KINDS)]
    zero = 0.2
    return [
        make_bench(100_000 * seed + i, anode=anode, crystal=crystal, zero_deg=zero).run
        for i in range(number)
    ]


def traces_of(runs: list[Run]) -> list[CountTrace]:
    return [
        make_trace(group, number, f"scan {number}", scan.reading_deg, scan.counts)
        for group, run in enumerate(runs)
        for number, scan in enumerate(run.scans, 1)
    ]


def alarms_of(looks: list[list[Look]]) -> list[str]:
    """Raise the alarms of a class from the looks of its groups."""
    number = Counter(look.family for group in looks for look in group)
    return [
        f"{family}: {alarm.statistic:.3g}"
        for group in looks
        for family in number
        for alarm in raise_alarms([one for one in group if one.family == family], number[family])
    ]


def count_alarms(runs: list[Run]) -> list[str]:
    """Alarms of scatter, digits and stretches in a class."""
    looks = [screen_counts(run, 0.2, 0.02, 0.4) for run in runs]
    stretches = find_stretches(traces_of(runs), FAMILY_CHANCE)
    return alarms_of(looks) + [f"stretch: {one.length}" for one in stretches]


def copied_stretch(runs: list[Run], rng: np.random.Generator) -> list[Stretch]:
    """Copy 15 counts from one group into another at the same angles, and look for them."""
    traces = traces_of(runs)
    scans = len(runs[0].scans)
    scan = int(rng.integers(scans))
    giver, taker = rng.choice(len(runs), 2, replace=False)
    source, target = traces[giver * scans + scan], traces[taker * scans + scan]
    start = int(rng.integers(target.counts.size - COPIED_POINTS))
    counts = target.counts.copy()
    counts[start : start + COPIED_POINTS] = source.counts[start : start + COPIED_POINTS]
    traces[taker * scans + scan] = make_trace(
        target.group, target.scan, target.label, target.millidegrees / 1e3, counts
    )
    found = find_stretches(traces, FAMILY_CHANCE)
    wanted = {giver * scans + scan, taker * scans + scan}
    return [one for one in found if {one.first, one.second} == wanted]


def voltage_looks(runs: list[Run]) -> list[list[Look]]:
    return [screen_voltages(determine(run, 1, posterior=False, monte_carlo=False)) for run in runs]


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--classes", type=int, default=300)
    parser.add_argument("--groups", type=int, default=12)
    parser.add_argument("--analysed", type=int, default=6, help="classes that are re-analysed")
    parser.add_argument("--seed", type=int, default=1)
    arguments = parser.parse_args()
    with_alarm, found, kinds = 0, 0, Counter()
    for number in range(arguments.classes):
        runs = sound_runs(arguments.groups, arguments.seed * 1000 + number)
        alarms = count_alarms(runs)
        with_alarm += bool(alarms)
        kinds.update(alarms)
        rng = np.random.default_rng([arguments.seed, number])
        found += bool(copied_stretch(runs, rng))
    total = arguments.classes
    print(f"sound classes with a false alarm: {with_alarm}/{total} = {with_alarm / total:.2%}")
    print(f"   {dict(kinds) or 'none'}")
    print(f"copied stretches of {COPIED_POINTS} points found: {found}/{total}")
    deviations, alarms = [], 0
    for number in range(arguments.analysed):
        looks = voltage_looks(sound_runs(arguments.groups, arguments.seed * 1000 + number))
        alarms += bool(alarms_of(looks))
        deviations += [look.statistic for group in looks for look in group]
    spread = np.array(deviations)
    print(
        f"voltages: {spread.size} deviations with standard deviation {spread.std():.2f}, largest "
        f"{np.abs(spread).max():.1f}; classes with a false alarm {alarms}/{arguments.analysed}"
    )


if __name__ == "__main__":
    main()
