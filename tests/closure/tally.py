"""What many runs say together: bias, spread, pull, coverage, each with its own uncertainty."""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Iterable, Sequence
from dataclasses import asdict, dataclass

import numpy as np
from scipy.stats import beta

from .record import RunRecord

ONE_SIGMA = math.erf(1.0 / math.sqrt(2.0))


@dataclass(frozen=True)
class Coverage:
    """How often an interval held the truth, with the Clopper-Pearson interval (95 %) of that."""

    inside: int
    of: int

    @property
    def fraction(self) -> float:
        return self.inside / self.of if self.of else math.nan

    @property
    def interval(self) -> tuple[float, float]:
        """C. J. Clopper and E. S. Pearson, Biometrika 26, 404 (1934)."""
        k, n = self.inside, self.of
        low = float(beta.ppf(0.025, k, n - k + 1)) if k else 0.0
        high = float(beta.ppf(0.975, k + 1, n - k)) if k < n else 1.0
        return low, high

    def __str__(self) -> str:
        low, high = self.interval
        return f"{self.fraction:.1%} [{low:.1%}, {high:.1%}]"


@dataclass(frozen=True)
class Figure:
    """A mean (or a width) with its standard error."""

    value: float
    error: float

    def percent(self) -> str:
        """As a percentage."""
        return f"{100 * self.value:+.3f}({100 * self.error:.3f}) %"

    def plain(self) -> str:
        """As a number."""
        return f"{self.value:+.2f}({self.error:.2f})"


def mean_of(values: Iterable[float]) -> Figure:
    """Mean with its standard error."""
    x = finite(values)
    if x.size == 0:
        return Figure(math.nan, math.nan)
    return Figure(float(x.mean()), float(x.std(ddof=1) / math.sqrt(x.size)) if x.size > 1 else 0.0)


def width_of(values: Iterable[float]) -> Figure:
    """Standard deviation with its standard error (the fourth moment included)."""
    x = finite(values)
    if x.size < 3:
        return Figure(math.nan, math.nan)
    spread = float(x.std(ddof=1))
    if spread == 0.0:
        return Figure(0.0, 0.0)
    kurtosis = float(((x - x.mean()) ** 4).mean() / x.var() ** 2)
    return Figure(spread, spread * math.sqrt(max(kurtosis - 1.0, 0.0) / x.size) / 2.0)


def finite(values: Iterable[float]) -> np.ndarray:
    """Only the finite ones."""
    x = np.array(list(values), dtype=float)
    return x[np.isfinite(x)]


@dataclass(frozen=True)
class RouteTally:
    """h by one route over many runs; relative to the truth."""

    bias: Figure
    spread: Figure
    u: float
    pull_mean: Figure
    pull_width: Figure
    one_sigma: Coverage
    covered: Coverage


def tally_route(rows: Sequence[tuple[float, float, float, float]]) -> RouteTally:
    """Tally (error, u, low, high), all relative to the truth."""
    error, u, low, high = np.array(rows, dtype=float).reshape(-1, 4).T
    return RouteTally(
        bias=mean_of(error),
        spread=width_of(error),
        u=float(np.median(u)) if u.size else math.nan,
        pull_mean=mean_of(error / u),
        pull_width=width_of(error / u),
        one_sigma=Coverage(int((np.abs(error) <= u).sum()), error.size),
        covered=Coverage(int(((low <= 0.0) & (high >= 0.0)).sum()), error.size),
    )


@dataclass(frozen=True)
class StudyTally:
    """One study."""

    name: str
    runs: int
    refused: dict[str, int]
    seconds: float
    routes: dict[str, RouteTally]
    alone: Figure
    alone_spread: Figure
    cutoff_bias: Figure
    cutoff_spread: Figure
    cutoff_pull_mean: Figure
    cutoff_pull_width: Figure
    cutoffs_by_voltage: dict[float, tuple[Figure, Figure, Figure]]
    cutoffs_used: Coverage
    reasons: dict[str, int]
    failed_checks: dict[str, int]
    zero_pull: tuple[Figure, Figure]
    resolution_ratio: tuple[Figure, Figure]
    flagged: Coverage
    yardstick: RouteTally | None
    yardstick_alone: Figure
    yardstick_alone_origin: Figure
    yardstick_cutoffs: Figure

    def as_dict(self) -> dict[str, object]:
        """Plain content, for JSON."""
        return asdict(self)


def tally(name: str, records: Sequence[RunRecord]) -> StudyTally:
    """Tally the records of one study."""
    good = [record for record in records if not record.refused]
    names = list(dict.fromkeys(route for record in good for route in record.routes))
    cutoffs = [cutoff for record in good for cutoff in record.cutoffs]
    used = [cutoff for cutoff in cutoffs if cutoff.used]
    edges = [c for record in records for c in record.cutoffs if "angle scale only" not in c.reason]
    by_voltage = {}
    for voltage in sorted({cutoff.voltage_kV for cutoff in used}):
        mine = [cutoff for cutoff in used if cutoff.voltage_kV == voltage]
        by_voltage[voltage] = (
            mean_of(c.error for c in mine),
            width_of(c.error for c in mine),
            width_of(c.error / c.u for c in mine),
        )
    yardsticks = [record.yardstick for record in records if record.yardstick is not None]
    return StudyTally(
        name=name,
        runs=len(records),
        refused=dict(Counter(record.refused for record in records if record.refused)),
        seconds=float(np.mean([record.seconds for record in records])),
        routes={
            route: tally_route([r.routes[route] for r in good if route in r.routes])
            for route in names
        },
        alone=mean_of(record.alone for record in good),
        alone_spread=width_of(record.alone for record in good),
        cutoff_bias=mean_of(cutoff.error for cutoff in used),
        cutoff_spread=width_of(cutoff.error for cutoff in used),
        cutoff_pull_mean=mean_of(cutoff.error / cutoff.u for cutoff in used),
        cutoff_pull_width=width_of(cutoff.error / cutoff.u for cutoff in used),
        cutoffs_by_voltage=by_voltage,
        cutoffs_used=Coverage(sum(cutoff.used for cutoff in edges), len(edges)),
        reasons=dict(Counter(c.reason for c in edges if not c.used and c.reason).most_common(8)),
        failed_checks=dict(Counter(n for r in good for n in r.failed_checks).most_common()),
        zero_pull=(
            mean_of(r.zero_error_deg / r.zero_u_deg for r in good if r.zero_u_deg),
            width_of(r.zero_error_deg / r.zero_u_deg for r in good if r.zero_u_deg),
        ),
        resolution_ratio=(
            mean_of(r.resolution_ratio for r in good),
            width_of(r.resolution_ratio for r in good),
        ),
        flagged=Coverage(sum(abs(r.E_n) > 1.0 for r in good), len(good)),
        yardstick=tally_route(yardsticks) if yardsticks else None,
        yardstick_alone=mean_of(record.yardstick_alone for record in records),
        yardstick_alone_origin=mean_of(record.yardstick_alone_origin for record in records),
        yardstick_cutoffs=mean_of(
            cutoff.yardstick_error for record in records for cutoff in record.cutoffs
        ),
    )
