"""The angle scale from the lines of simulated runs, and without any."""

import math
from dataclasses import replace

import numpy as np
import pytest
from simulated import TRUTH, five_voltages, simulated, voltages

from hdetermine.inference import measurement as names
from hdetermine.inference.anglescale import _inflation, angle_scale

LINES_TRUTH = {**TRUTH, "from_deg": 18.0, "to_deg": 54.0}
W_STRENGTHS = {"L3-M4,5": 1.0, "L2-M4": 0.6, "L3-N5": 0.2, "L2-N4": 0.15, "L1-M3": 0.1}


def copper(seed=1, more=None, **tables):
    return simulated(
        voltages(35, dwell_s=5.0), {**LINES_TRUTH, **(more or {})}, seed, "Cu", "LiF", **tables
    )


CASES = {
    "Mo, nine lines": lambda seed: simulated(voltages(26, 34, 38), TRUTH, seed),
    "Cu, two orders": lambda seed: copper(seed),
    "Cu, Gaussian": lambda seed: copper(seed, {"kernel": "gaussian"}),
    "Cu, triangular": lambda seed: copper(seed, {"kernel": "triangular"}),
    "Cu, other zero": lambda seed: copper(seed, {"zero_deg": -0.4, "resolution_deg": 0.4}),
    "W L lines": lambda seed: simulated(
        voltages(35, dwell_s=5.0),
        {**LINES_TRUTH, "from_deg": 14.0, "line_strengths_deg": W_STRENGTHS},
        seed, "W", "LiF",
    ),
}  # fmt: skip


@pytest.mark.parametrize("case", CASES)
def test_zero_width_and_kernel_are_found(case):
    pulls = {"zero": [], "width": [], "kernel": []}
    for seed in (1, 2, 3):
        run, simulation = CASES[case](seed)
        scale, truth = angle_scale(run), simulation.truth
        for name, found, true in (
            ("zero", scale.zero, truth.zero_deg),
            ("width", scale.resolution, truth.resolution_deg),
            ("kernel", scale.kernel, truth.triangular_fraction),
        ):
            pulls[name].append((found.value - true) / found.standard_uncertainty)
        assert scale.zero_from.startswith("lines")
        assert scale.resolution_from == "lines"
        assert 0.0 < scale.zero.standard_uncertainty < 0.01
        assert scale.zero.evaluation == "A"
        assert 0.0 <= scale.kernel.value <= 1.0
    for name, values in pulls.items():
        assert np.all(np.abs(values) < 3.5), name
        assert abs(np.mean(values)) < 2.0, name


def test_a_box_is_told_and_leaves_the_zero_open_by_part_of_a_step():
    """Between two steps a flat top may stand anywhere: 0.15 of a step at least remains."""
    for seed in (1, 2, 3):
        run, simulation = copper(seed, {"kernel": "box", "resolution_deg": 0.3})
        scale, truth = angle_scale(run), simulation.truth
        assert scale.kernel.value > 1.7
        assert scale.resolution.value == pytest.approx(0.3, rel=0.1)
        u = scale.zero.standard_uncertainty
        assert 0.1 * run.apparatus.goniometer.step_deg < u < 0.03
        assert abs(scale.zero.value - truth.zero_deg) < 3.0 * u


def test_spacing_and_zero_together():
    """Two orders, far apart: the lines tell the spacing better than a loosely stated one."""
    run, simulation = copper(2, {"spacing_pm": 201.75})
    run = replace(
        run,
        apparatus=replace(
            run.apparatus,
            crystal=replace(
                run.apparatus.crystal,
                spacing_pm=run.apparatus.crystal.spacing_pm.with_uncertainty(0.5),
            ),
        ),
    )
    scale, truth = angle_scale(run), simulation.truth
    assert scale.zero_from == "lines, spacing fitted too"
    spacing = next(q for q in scale.inputs if q.name == names.SPACING)
    assert spacing.value == pytest.approx(201.75, abs=4.0 * spacing.standard_uncertainty)
    assert spacing.standard_uncertainty < 0.05
    assert scale.zero.value == pytest.approx(
        truth.zero_deg, abs=4.0 * scale.zero.standard_uncertainty
    )
    # Zero and spacing cannot be told apart fully.
    place = [q.name for q in scale.inputs].index(names.SPACING)
    assert 0.2 < scale.correlation[0, place] < 1.0
    # Without the stated value the answer is nearly the same.
    assert scale.free_spacing_pm == pytest.approx(spacing.value, abs=0.02)


def test_free_spacing_tells_a_wrong_one():
    """The sheet is sure of its spacing, and wrong by 0.3 %."""
    run, _ = copper(3, {"spacing_pm": 201.95})
    scale = angle_scale(run)
    off = (scale.free_spacing_pm - 201.35) / scale.free_spacing_u_pm
    assert off > 10.0
    assert scale.free_spacing_pm == pytest.approx(201.95, abs=4.0 * scale.free_spacing_u_pm)
    assert any("scatter" in remark for remark in scale.remarks)


def test_lines_close_together_leave_the_spacing_alone():
    run, _ = five_voltages()
    scale = angle_scale(run)
    assert scale.zero_from == "lines, spacing as stated"
    spacing = next(q for q in scale.inputs if q.name == names.SPACING)
    assert spacing == run.apparatus.crystal.spacing_pm
    # An error of the spacing is an error of the zero, with the same sign.
    place = [q.name for q in scale.inputs].index(names.SPACING)
    assert 0.05 < scale.correlation[0, place] < 1.0


def test_zero_answers_to_the_spacing_as_refits_do():
    """Another spacing in the sheet: the zero moves as the correlation says."""
    run, _ = five_voltages()
    ends = []
    for sign in (1.0, -1.0):
        crystal = run.apparatus.crystal
        moved = replace(crystal, spacing_pm=replace(crystal.spacing_pm, value=282.01 + 0.2 * sign))
        ends.append(angle_scale(replace(run, apparatus=replace(run.apparatus, crystal=moved))))
    slope = (ends[0].zero.value - ends[1].zero.value) / 0.4
    scale = angle_scale(run)
    place = [q.name for q in scale.inputs].index(names.SPACING)
    told = (
        scale.correlation[0, place]
        * scale.zero.standard_uncertainty
        / scale.inputs[place].standard_uncertainty
    )
    assert slope == pytest.approx(told, rel=0.05)


def test_a_loose_spacing_loosens_the_zero():
    """Lines of one order: all of the spacing's uncertainty comes back as one of the zero."""
    run, _ = five_voltages()
    crystal = run.apparatus.crystal
    u = {}
    for stated in (1e-4, 0.02, 0.3):
        loose = replace(crystal, spacing_pm=crystal.spacing_pm.with_uncertainty(stated))
        scale = angle_scale(replace(run, apparatus=replace(run.apparatus, crystal=loose)))
        assert scale.zero_from == "lines, spacing as stated"
        u[stated] = scale.zero.standard_uncertainty
    # K-L3 at 7.22 degrees: d(theta)/d(ln d) is -tan(theta), 0.0257 degrees a pm.
    assert u[0.3] == pytest.approx(math.hypot(u[1e-4], 0.3 * 0.0257), rel=0.05)
    assert u[0.02] == pytest.approx(math.hypot(u[1e-4], 0.02 * 0.0257), rel=0.05)


def test_scatter_of_lines_and_stated_spacing():
    """Hand-worked: lines want three standard uncertainties of the spacing, stated as well as that.

    The compromise leaves 1.5 to each side: chi-square 4.5, one degree of freedom.
    """
    by_spacing = np.array([-10.0, -60.0])
    design = np.stack([np.ones(2), by_spacing], axis=1)
    weight = np.full(2, 1e6)
    u_rho = math.sqrt(2.0) * 1e-3 / 50.0
    shift = 0.05 + 3.0 * u_rho * by_spacing
    assert _inflation(design, shift, weight, u_rho**2) == pytest.approx(4.5, rel=1e-6)
    # A loosely stated spacing gives way, and nothing scatters.
    assert _inflation(design, shift, weight, 1.0) == 1.0
    assert _inflation(design[:1], shift[:1], weight[:1], 1.0) == 1.0


def test_zero_answers_to_the_reference_wavelengths():
    """A relative change of all wavelengths is one of the spacing with the other sign."""
    run, _ = five_voltages()
    scale = angle_scale(run)
    place = [q.name for q in scale.inputs].index(names.SPACING)
    by_spacing = (
        scale.correlation[0, place]
        * scale.zero.standard_uncertainty
        / scale.inputs[place].standard_uncertainty
    )
    assert scale.zero_by_wavelength_deg == pytest.approx(-282.01 * by_spacing, rel=0.01)
    wavelength = scale.inputs[-1]
    assert wavelength.name == names.WAVELENGTH_SCALE
    assert 2e-5 <= wavelength.standard_uncertainty < 1e-4


def test_correlation_is_one():
    for run in (five_voltages()[0], copper()[0]):
        scale = angle_scale(run)
        assert [q.name for q in scale.inputs] == [
            names.ZERO, names.SPACING, names.TEMPERATURE, names.EXPANSION,
            names.WAVELENGTH_SCALE,
        ]  # fmt: skip
        matrix = scale.correlation
        assert matrix.shape == (5, 5)
        np.testing.assert_allclose(matrix, matrix.T)
        np.testing.assert_allclose(np.diag(matrix), 1.0)
        assert np.linalg.eigvalsh(matrix)[0] > -1e-9


REFERENCE = [
    *voltages(24, 28, 33),
    {"name": "reference", "tube_voltage_kV": 35.0, "edge": False, "dwell_s": 5.0},
]


def reference_run(shift):
    """Edge scans with lines, and a reference scan whose readings are shifted."""
    run, simulation = simulated(REFERENCE, TRUTH, seed=6)
    scans = tuple(
        scan if scan.edge else replace(scan, reading_deg=scan.reading_deg + shift)
        for scan in run.scans
    )
    return replace(run, scans=scans), simulation


def test_a_reference_scan_with_another_zero_is_not_used_and_said():
    run, simulation = reference_run(0.12)
    scale = angle_scale(run)
    assert scale.zero.value == pytest.approx(
        simulation.truth.zero_deg, abs=4.0 * scale.zero.standard_uncertainty
    )
    assert any(
        "reference scan reference has another zero offset" in remark for remark in scale.remarks
    )
    by_scan = {line.scan: line for line in scale.lines}
    assert not by_scan["reference"].used
    assert "zero differs by +0.1" in by_scan["reference"].reason
    assert by_scan["u33"].used


def test_a_reference_scan_that_agrees_is_used():
    run, _ = reference_run(0.0)
    scale = angle_scale(run)
    assert {line.scan for line in scale.lines if line.used} >= {"reference", "u33"}
    assert not any("another zero offset" in remark for remark in scale.remarks)


@pytest.mark.parametrize("stated", [None, {"value": 0.3, "u": 0.02}])
def test_without_lines_the_run_sheet_counts(stated):
    run, _ = simulated(
        voltages(28, 35),
        {**TRUTH, "to_deg": 5.8},
        seed=1,
        goniometer={"resolution_deg": stated} if stated else {},
    )
    scale = angle_scale(run)
    assert scale.zero == run.apparatus.goniometer.zero_deg
    assert scale.zero_from == "run sheet"
    assert scale.lines == ()
    assert any("no characteristic line" in remark for remark in scale.remarks)
    assert scale.kernel == run.apparatus.goniometer.kernel_triangular_fraction
    assert np.array_equal(scale.correlation, np.eye(4))
    if stated:
        assert scale.resolution.value == 0.3
        assert scale.resolution_from == "run sheet"
    else:
        assert math.isinf(scale.resolution.standard_uncertainty)
        assert scale.resolution_from == "edges"


def test_the_prior_of_the_kernel_is_counted_once(monkeypatch):
    """Four lines that each say 0.9 with the weight of the prior (0.5 +- 0.29): 4.1/5 together."""
    from hdetermine.inference.linefit import FittedLine
    from hdetermine.inference.linesearch import scan_features

    run, _ = five_voltages()
    (feature,) = [f for f in scan_features(run, run.scans[-1]) if f.label == "Mo K-L2,3"]
    # Each fit carried the prior: its answer is the mean of 0.9 and 0.5, its u smaller by sqrt 2.
    lines = tuple(
        FittedLine("u38", feature, 0.07, 0.003, 0.25, 0.01, 0.7, 0.29 / math.sqrt(2), 50.0, 1.0)
        for _ in range(4)
    )
    monkeypatch.setattr("hdetermine.inference.anglescale.find_lines", lambda _: lines)
    kernel = angle_scale(run).kernel
    assert kernel.value == pytest.approx((4 * 0.9 + 0.5) / 5, abs=0.01)
    assert kernel.standard_uncertainty == pytest.approx(
        math.hypot(0.29 / math.sqrt(5.0), 0.05), rel=0.02
    )
