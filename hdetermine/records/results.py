"""What the analysis finds, stage by stage: frozen records that flow one way."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from hdetermine.records.quantity import Distribution, Evaluation, Quantity
from hdetermine.records.run import Run

FloatArray = NDArray[np.float64]
RouteName = Literal["linear", "monte_carlo", "posterior"]


# --- angle scale ------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class LineMeasure:
    """A characteristic line found in a scan.

    `reading_deg` is where the line's strongest component stands on the goniometer;
    `expected_deg` where it would stand after the fit of the angle scale; both readings.
    """

    scan: str
    label: str
    order: int
    wavelength_pm: float
    wavelength_u_pm: float
    reading_deg: float
    reading_u_deg: float
    expected_deg: float
    used: bool
    reason: str = ""

    @property
    def residual_deg(self) -> float:
        """Reading minus expectation, degrees."""
        return self.reading_deg - self.expected_deg


@dataclass(frozen=True, slots=True)
class AngleScale:
    """Zero offset, resolution and spacing after the characteristic lines were used.

    Attributes
    ----------
    zero : Quantity
        Reading minus true angle, degrees.
    resolution : Quantity
        FWHM of the smearing, degrees.
    kernel : Quantity
        Triangular fraction of the smearing kernel.
    inputs : tuple of Quantity
        The inputs that the lines estimate together (zero, spacing, temperature, wavelength
        scale), as they stand afterwards.
    correlation : ndarray, shape (len(inputs), len(inputs))
        Their correlation matrix.
    lines : tuple of LineMeasure
        Every line that was found, used or not.
    zero_from, resolution_from : str
        In words, what each rests on: "lines", "prior", "edges".
    free_spacing_pm, free_spacing_u_pm : float or None
        Spacing when it is fitted together with the zero without its stated value, pm; None
        where the lines do not allow it.
    zero_by_wavelength_deg : float
        Change of the zero per relative change of the reference wavelengths, degrees.
    edge_resolution_deg, edge_resolution_u_deg, edge_pull : float or None
        Width that the edges by themselves ask for, and its difference from that of the lines
        in standard uncertainties; None where the lines did not tell a width.
    remarks : tuple of str
        Anything a careful reader should know.
    """

    zero: Quantity
    resolution: Quantity
    kernel: Quantity
    inputs: tuple[Quantity, ...]
    correlation: FloatArray
    lines: tuple[LineMeasure, ...]
    zero_from: str
    resolution_from: str
    free_spacing_pm: float | None = None
    free_spacing_u_pm: float | None = None
    zero_by_wavelength_deg: float = 0.0
    edge_resolution_deg: float | None = None
    edge_resolution_u_deg: float | None = None
    edge_pull: float | None = None
    remarks: tuple[str, ...] = ()


# --- cutoffs ----------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class WindowFit:
    """One fit of the family that a cutoff is averaged over (window, background, shape)."""

    from_deg: float
    to_deg: float
    background_terms: int
    continuum_terms: int
    lines_modelled: int
    reading_deg: float
    reading_u_deg: float
    deviance: float
    degrees_of_freedom: int
    weight: float


@dataclass(frozen=True, slots=True, eq=False)
class FittedCurve:
    """The heaviest fit of a cutoff, point by point, for pictures.

    Recorded counts, so dead time is inside; arrays share the shape (n,). `in_window` marks
    the points that took part in the fit.
    """

    reading_deg: FloatArray
    counts: FloatArray
    expected_counts: FloatArray
    background_counts: FloatArray
    dwell_s: FloatArray
    in_window: NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class Cutoff:
    """The short-wavelength limit of one scan, or the reason why there is none.

    Attributes
    ----------
    scan : str
        Name of the scan.
    tube_voltage_kV : float
        As displayed.
    used : bool
        False for a refused or left-out scan; then `reason` says why and the numbers are nan.
    reading_deg : float
        Cutoff as a goniometer reading, degrees.
    counting_u_deg : float
        Standard uncertainty from counting statistics alone, degrees.
    lower_u_deg, upper_u_deg : float
        The two sides of the asymmetric likelihood (distance to a rise of 1 in the deviance).
    window_u_deg : float
        Spread between the windows of the family, degrees.
    background_u_deg : float
        Spread between the backgrounds of the family, degrees.
    glancing_angle_deg : float
        True glancing angle of the cutoff, degrees.
    wavelength_pm : float
        Cutoff wavelength, pm.
    standard_uncertainty_pm : float
        Of `wavelength_pm`, every input included, pm.
    shape : str
        Name of the continuum shape that was fitted.
    deviance, degrees_of_freedom : float, int
        Of the heaviest fit.
    windows : tuple of WindowFit
        The family, heaviest first.
    fixed_window : WindowFit or None
        The fit of a window that the user fixed (both are reported).
    responses_deg : mapping of str to float
        Change of `reading_deg` per unit of each input (dotted names).
    curve : FittedCurve or None
        The heaviest fit point by point; for a refused scan the counts without a fit.
    remarks : tuple of str
        Remarks of the reader and of the fit.
    """

    scan: str
    tube_voltage_kV: float
    used: bool
    reason: str = ""
    reading_deg: float = math.nan
    counting_u_deg: float = math.nan
    lower_u_deg: float = math.nan
    upper_u_deg: float = math.nan
    window_u_deg: float = math.nan
    background_u_deg: float = math.nan
    glancing_angle_deg: float = math.nan
    wavelength_pm: float = math.nan
    standard_uncertainty_pm: float = math.nan
    shape: str = ""
    deviance: float = math.nan
    degrees_of_freedom: int = 0
    windows: tuple[WindowFit, ...] = ()
    fixed_window: WindowFit | None = None
    responses_deg: Mapping[str, float] = field(default_factory=dict)
    curve: FittedCurve | None = None
    remarks: tuple[str, ...] = ()


# --- relation ---------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Influence:
    """What one voltage does to the result: h without it, and the shift in units of u(h)."""

    scan: str
    tube_voltage_kV: float
    value_without_J_s: float
    shift_in_u: float
    weight: float


@dataclass(frozen=True, slots=True, eq=False)
class Relation:
    """Cutoff wavelength against inverse voltage, fitted with the full covariance.

    Attributes
    ----------
    scans : tuple of str
        Scans that take part, n of them.
    voltages_kV : ndarray, shape (n,)
        Peak accelerating voltages with the work function, best estimates, kV.
    wavelengths_pm : ndarray, shape (n,)
        Cutoffs, pm.
    covariance_pm2 : ndarray, shape (n, n)
        Of the wavelengths, every input included, pm^2.
    voltage_covariance_kV2 : ndarray, shape (n, n)
        Of the voltages, kV^2.
    weights : ndarray, shape (n,)
        Weights of the single values of h; they sum to one (some may be negative).
    slope_pm_kV, slope_u_pm_kV : float
        Of the line through the origin, pm kV.
    free_slope_pm_kV, intercept_pm : float
        Of the line with a free intercept; nan if fewer than three voltages differ.
    free_covariance : ndarray, shape (2, 2)
        Of (slope, intercept).
    exponent, exponent_u : float
        p in lambda proportional to voltage**-p; 1 is expected.
    chi2, degrees_of_freedom : float, int
        Of the line through the origin.
    birge_ratio : float
        sqrt(chi2/degrees_of_freedom) (Birge 1932); nan for a single voltage.
    scatter_deg : float
        Scatter between scans beyond all other inputs, degrees; zero if none is needed.
    stated_birge_ratio : float
        The ratio before that scatter was added.
    influence : tuple of Influence
        Leave-one-out.
    repeat_u_relative : float or None
        Repeatability found from repeated scans of one voltage, relative.
    """

    scans: tuple[str, ...]
    voltages_kV: FloatArray
    wavelengths_pm: FloatArray
    covariance_pm2: FloatArray
    voltage_covariance_kV2: FloatArray
    weights: FloatArray
    slope_pm_kV: float
    slope_u_pm_kV: float
    free_slope_pm_kV: float
    intercept_pm: float
    free_covariance: FloatArray
    exponent: float
    exponent_u: float
    chi2: float
    degrees_of_freedom: int
    birge_ratio: float
    scatter_deg: float = 0.0
    stated_birge_ratio: float = math.nan
    influence: tuple[Influence, ...] = ()
    repeat_u_relative: float | None = None


@dataclass(frozen=True, slots=True, eq=False)
class MeasurementModel:
    """h as a function of named inputs, the edges already fitted.

    This is all that propagation needs: the cutoffs' readings, how they answer to each input,
    and the weights of the voltages.

    Attributes
    ----------
    scans : tuple of str
        n used scans.
    displayed_kV : ndarray, shape (n,)
        Displayed voltages.
    reading_deg : ndarray, shape (n,)
        Cutoff readings at the inputs' estimates.
    inputs : tuple of Quantity
        The m inputs of the budget.
    correlation : ndarray, shape (m, m)
        Between the inputs.
    responses_deg : ndarray, shape (n, m)
        d(reading)/d(input) through the edge fit.
    weights : ndarray, shape (n,)
        Of the voltages; they sum to one.
    skew : ndarray, shape (n, 2)
        Lower and upper one-sigma distance of each cutoff's likelihood, degrees.
    reference_temperature_C : float
        For which the spacing holds.
    """

    scans: tuple[str, ...]
    displayed_kV: FloatArray
    reading_deg: FloatArray
    inputs: tuple[Quantity, ...]
    correlation: FloatArray
    responses_deg: FloatArray
    weights: FloatArray
    skew: FloatArray
    reference_temperature_C: float


# --- uncertainty ------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Route:
    """h and its uncertainty by one of the three routes.

    Attributes
    ----------
    name : {"linear", "monte_carlo", "posterior"}
        Which one.
    value_J_s, standard_uncertainty_J_s : float
        Estimate and standard uncertainty.
    interval_95_J_s : (float, float)
        Probabilistically symmetric 95 % interval.
    usable : bool
        False if the route's own diagnostics forbid its use (then `reason` says why).
    reason : str
        Why it is not usable.
    diagnostics : mapping
        JSON-able figures of the route.
    """

    name: RouteName
    value_J_s: float
    standard_uncertainty_J_s: float
    interval_95_J_s: tuple[float, float]
    usable: bool = True
    reason: str = ""
    diagnostics: Mapping[str, object] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class BudgetRow:
    """One input of the budget.

    `sensitivity` is dy/dx with its sign; `contribution` is sensitivity times standard
    uncertainty, signed; `variance_share` is c_i u_i sum_j r_ij c_j u_j / u_c^2, so that the
    shares sum to one with correlations too (and may be negative).
    """

    quantity: str
    symbol: str
    estimate: float
    unit: str
    standard_uncertainty: float
    evaluation: Evaluation
    distribution: Distribution
    degrees_of_freedom: float
    sensitivity: float
    contribution: float
    variance_share: float
    common: bool = True
    correlated_with: tuple[str, ...] = ()
    source: str = ""
    is_default: bool = False
    group: str = ""


@dataclass(frozen=True, slots=True, eq=False)
class Budget:
    """An uncertainty budget of any measurement function of named inputs.

    Attributes
    ----------
    measurand, unit : str
        What the result is.
    value : float
        Result at the inputs' estimates.
    combined_standard_uncertainty : float
        Quadrature sum with correlations (JCGM 100:2008, eq. 16).
    effective_degrees_of_freedom : float
        Welch-Satterthwaite (JCGM 100:2008, eq. G.2b).
    coverage_probability, coverage_factor, expanded_uncertainty : float
        Student's t for the effective degrees of freedom.
    rows : tuple of BudgetRow
        One an input.
    correlation : ndarray, shape (m, m)
        Between the rows.
    second_order_standard_uncertainty : float or None
        With the next terms of the Taylor series (JCGM 100:2008, 5.1.2 note), if computed.
    """

    measurand: str
    unit: str
    value: float
    combined_standard_uncertainty: float
    effective_degrees_of_freedom: float
    coverage_probability: float
    coverage_factor: float
    expanded_uncertainty: float
    rows: tuple[BudgetRow, ...]
    correlation: FloatArray
    second_order_standard_uncertainty: float | None = None


@dataclass(frozen=True, slots=True)
class Improvement:
    """Expanded uncertainty that would remain if an input were better known."""

    quantity: str
    symbol: str
    expanded_if_halved: float
    expanded_if_zero: float


# --- judgement --------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class PlanckValue:
    """The reported value of h.

    Attributes
    ----------
    value_J_s, standard_uncertainty_J_s : float
        Estimate and standard uncertainty, J s.
    coverage_probability, coverage_factor, expanded_uncertainty_J_s : float
        p, k and U = k u.
    effective_degrees_of_freedom : float
        Infinite if no Type A input of finite freedom matters.
    route : {"linear", "monte_carlo", "posterior"}
        Where the figures come from.
    route_reason : str
        One sentence: why that route.
    """

    value_J_s: float
    standard_uncertainty_J_s: float
    coverage_probability: float
    coverage_factor: float
    expanded_uncertainty_J_s: float
    effective_degrees_of_freedom: float
    route: RouteName
    route_reason: str

    @property
    def relative_standard_uncertainty(self) -> float:
        """u(h)/h."""
        return self.standard_uncertainty_J_s / self.value_J_s


@dataclass(frozen=True, slots=True)
class Comparison:
    """The result against the exact SI value."""

    reference_J_s: float
    relative_deviation: float
    E_n: float
    verdict: str


@dataclass(frozen=True, slots=True)
class ReadBackwards:
    """With h exact, what the same run says about the supply and the crystal."""

    voltage_gain: float
    voltage_gain_u: float
    spacing_pm: float
    spacing_u_pm: float


@dataclass(frozen=True, slots=True)
class Check:
    """A consistency check: its figure, its limit and what it means.

    `passed` is None where the data do not allow the check.
    """

    name: str
    passed: bool | None
    figure: float | None
    limit: float | None
    meaning: str


@dataclass(frozen=True, slots=True)
class Provenance:
    """Versions, seed and settings that made the result."""

    package_version: str
    versions: Mapping[str, str]
    seed: int
    settings: Mapping[str, object]


@dataclass(frozen=True, slots=True, eq=False)
class Determination:
    """Everything that one analysis of one run found.

    Attributes
    ----------
    run : Run
        What was analysed.
    h : PlanckValue
        The reported value.
    comparison, read_backwards
        Judgement against the SI value.
    routes : mapping of route name to Route
        All routes that were taken.
    angle_scale, cutoffs, relation, model
        The stages, in their order. `cutoffs` has one entry a scan, refused ones included.
    budget : Budget
        Of h, in J s.
    improvements : tuple of Improvement
        Sorted, best first.
    counting_floor_J_s : float
        Expanded uncertainty with perfect counting statistics.
    checks : tuple of Check
        Consistency checks.
    provenance : Provenance
        Versions, seed, settings.
    posterior_samples : ndarray, shape (n, dim) or None
        Thinned chain for the picture; column 0 is h in J s.
    posterior_names : tuple of str
        Names of the columns.
    """

    run: Run
    h: PlanckValue
    comparison: Comparison
    read_backwards: ReadBackwards
    routes: Mapping[str, Route]
    angle_scale: AngleScale
    cutoffs: tuple[Cutoff, ...]
    relation: Relation
    model: MeasurementModel
    budget: Budget
    improvements: tuple[Improvement, ...]
    counting_floor_J_s: float
    checks: tuple[Check, ...]
    provenance: Provenance
    posterior_samples: FloatArray | None = None
    posterior_names: tuple[str, ...] = ()

    @property
    def used(self) -> tuple[Cutoff, ...]:
        """The cutoffs that took part."""
        return tuple(cutoff for cutoff in self.cutoffs if cutoff.used)

    @property
    def refused(self) -> tuple[Cutoff, ...]:
        """The scans that did not take part, each with its reason."""
        return tuple(cutoff for cutoff in self.cutoffs if not cutoff.used)
