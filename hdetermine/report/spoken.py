"""Inputs and routes in words, for people who do not read dotted names."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

from hdetermine.inference import measurement as names
from hdetermine.records.results import Budget, Check, RouteName

WORDS: dict[str, str] = {
    names.GAIN: "gain of the voltage display",
    names.OFFSET: "offset of the voltage display",
    "tube.voltage.repeatability_kV": "repeatability of the voltage",
    names.RIPPLE: "ripple of the supply",
    names.WORK_FUNCTION: "work function of the cathode",
    names.SPACING: "spacing of the crystal planes",
    names.TEMPERATURE: "temperature of the crystal",
    names.EXPANSION: "thermal expansion of the crystal",
    names.REFRACTION: "refraction in the crystal",
    names.ZERO: "zero of the angle scale",
    names.RESOLUTION: "angular resolution",
    names.KERNEL: "shape of the angular smearing",
    names.DEAD_TIME: "dead time of the counter",
    names.EXCESS: "excess of the continuum near its limit",
    names.EXCESS_ENERGY: "reach of that excess",
    names.WAVELENGTH_SCALE: "wavelengths of the reference lines",
    "continuum.smooth_*": "smooth factor of the continuum",
    "continuum.smooth_1": "smooth factor of the continuum, first term",
    "continuum.smooth_2": "smooth factor of the continuum, second term",
    "continuum.smooth_3": "smooth factor of the continuum, third term",
}
SCAN_WORDS: dict[str, str] = {
    "counting_deg": "counting statistics",
    "window_deg": "choice of the fit window",
    "background_deg": "shape of the background",
    "voltage_kV": "repeatability of the voltage",
    "scatter_deg": "scatter between scans",
}
ROUTE_WORDS: dict[RouteName, str] = {
    "linear": "linear propagation",
    "monte_carlo": "Monte Carlo",
    "posterior": "posterior",
}
_PER_SCAN = re.compile(r"scan\.(?P<scan>.*)\.(?P<kind>[A-Za-z_]+)\Z", re.DOTALL)


def input_words(name: str) -> str:
    """Say in words what a dotted input name means; an unknown name stays as it is."""
    match = _PER_SCAN.match(name)
    if match is None:
        return WORDS.get(name, name)
    return SCAN_WORDS.get(match["kind"], match["kind"])


def scan_of(name: str) -> str:
    """Name of the scan an input belongs to, "all scans" for ``scan.*``; empty for other inputs."""
    match = _PER_SCAN.match(name)
    if match is None:
        return ""
    return "all scans" if match["scan"] == "*" else match["scan"]


@dataclass(frozen=True, slots=True)
class Source:
    """A source of uncertainty: one group of rows of the budget.

    `variance_share` is its part of the variance of the result; `count` how many rows of the
    budget it stands for.
    """

    words: str
    variance_share: float
    common: bool
    count: int


def sources(budget: Budget) -> tuple[Source, ...]:
    """Sum up the budget by source, largest share first.

    Rows of one group (the counting statistics of all scans, the continuum's shape) are one
    source; a row without a group is a source of its own.
    """
    found: dict[tuple[str, bool], tuple[float, int]] = {}
    for row in budget.rows:
        key = (row.group or input_words(row.quantity), row.common)
        share, count = found.get(key, (0.0, 0))
        found[key] = (share + row.variance_share, count + 1)
    listed = [
        Source(words, share, common, count) for (words, common), (share, count) in found.items()
    ]
    return tuple(sorted(listed, key=lambda one: -one.variance_share))


def checks_in_words(checks: Sequence[Check]) -> str:
    """Say in one sentence how the consistency checks went; failed ones are named."""
    failed = [check.name for check in checks if check.passed is False]
    done = sum(check.passed is not None for check in checks)
    if not done:
        return "No consistency check was possible."
    if not failed:
        several = f"All {done} consistency checks" if done > 1 else "The one consistency check"
        return f"{several} that the data allow passed."
    asks = "asks" if len(failed) == 1 else "ask"
    return (
        f"{len(failed)} of {done} consistency checks failed and {asks} for a second look before "
        f"the result is used: {'; '.join(failed)}."
    )
