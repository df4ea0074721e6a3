"""Lines through all scans: which are looked for, which are used, and what betrays 2 theta."""

from dataclasses import replace

import numpy as np
import pytest
from simulated import TRUTH, simulated, voltages

from hdetermine.errors import InputError
from hdetermine.inference.features import features
from hdetermine.inference.linefit import FittedLine
from hdetermine.inference.linesearch import (
    energy_eV,
    find_lines,
    line_measures,
    scan_features,
    select_lines,
)

LINES_TRUTH = {**TRUTH, "to_deg": 9.5}


def labels(run):
    return {(line.scan, line.feature.label) for line in find_lines(run)}


def test_lines_are_looked_for_only_where_they_are_excited():
    """Mo K at 20 kV: 20 000 eV (xraydb). At 19.5 and 20.05 kV nothing is looked for."""
    run, _ = simulated(voltages(19.5, 20.05, 24, 35), LINES_TRUTH, seed=4)
    found = labels(run)
    assert {scan for scan, _ in found} == {"u24", "u35"}
    assert ("u35", "Mo K-L2,3") in found


def test_a_scan_without_lines_in_range():
    run, _ = simulated(voltages(30, 35), {**LINES_TRUTH, "to_deg": 5.8}, seed=4)
    assert find_lines(run) == ()


@pytest.mark.parametrize(("kV", "looked_for"), [(19.0, 0), (20.1, 0), (20.3, 2), (35.0, 2)])
def test_a_voltage_just_above_the_threshold_shows_nothing(kV, looked_for):
    """Mo K: 20 000 eV; so little above it the lines are too weak to be looked for."""
    run, _ = simulated(voltages(kV), LINES_TRUTH, seed=4)
    first = [f for f in scan_features(run, run.scans[0]) if f.order == 1]
    assert len(first) == looked_for


@pytest.mark.parametrize(("end", "used"), [(7.45, False), (7.9, True)])
def test_a_line_cut_by_the_end_of_the_scan_is_not_used(end, used):
    """K-L3 reads 7.29 degrees, and the line is 0.25 degrees wide."""
    run, _ = simulated(
        voltages(35), {**LINES_TRUTH, "from_deg": 5.5, "to_deg": end, "step_deg": 0.02}, seed=4
    )
    assert any(line.feature.group.name == "K-L2,3" for line in find_lines(run)) is used


def test_energy_of_a_displayed_voltage():
    run, _ = simulated(voltages(30), TRUTH, seed=1)
    apparatus = run.apparatus
    tube = replace(
        apparatus.tube,
        gain=replace(apparatus.tube.gain, value=1.01),
        offset_kV=replace(apparatus.tube.offset_kV, value=0.1),
        ripple=replace(apparatus.tube.ripple, value=0.002),
        cathode_work_function_eV=replace(apparatus.tube.cathode_work_function_eV, value=4.5),
    )
    energy = energy_eV(replace(apparatus, tube=tube), 30.0)
    assert energy == pytest.approx((1.01 * 30.0 + 0.1) * 1.002 * 1e3 + 4.5)


def doubled(run):
    """The same counts over twice the angle, as many goniometers show it."""
    return replace(
        run,
        scans=tuple(replace(scan, reading_deg=2.0 * scan.reading_deg) for scan in run.scans),
    )


@pytest.mark.parametrize(
    ("anode", "crystal", "more"),
    [
        ("Mo", "NaCl", {}),
        ("Cu", "LiF", {"from_deg": 15.0, "to_deg": 30.0}),
        ("Cu", "NaCl", {"from_deg": 10.0, "to_deg": 20.0, "resolution_deg": 0.4}),
    ],
    ids=["Mo NaCl", "Cu LiF", "Cu NaCl"],
)
def test_two_theta_betrayed_by_the_lines(anode, crystal, more):
    run, _ = simulated(voltages(35, dwell_s=5.0), {**LINES_TRUTH, **more}, 3, anode, crystal)
    assert find_lines(run)
    with pytest.raises(InputError) as caught:
        find_lines(doubled(run))
    sentence = str(caught.value)
    assert "twice their glancing angle" in sentence
    assert 'abscissa = "two_theta"' in sentence
    assert "scan u35 (u35.csv)" in sentence


def test_two_theta_is_not_suspected_without_lines():
    run, _ = simulated(voltages(30, 35), {**LINES_TRUTH, "to_deg": 5.8}, seed=4)
    assert find_lines(doubled(run)) == ()
    low, _ = simulated(voltages(19), LINES_TRUTH, seed=4)
    assert find_lines(doubled(low)) == ()


FEATURE = next(f for f in features("Mo", 35_000.0, 282.01, 0.0) if f.group.name == "K-L2,3")


def line(scan, shift, u=0.003):
    return FittedLine(scan, FEATURE, shift, u, 0.25, 0.01, 0.5, 0.2, 50.0, 1.0)


SELECTIONS = {
    # found, scans with edges, indices that are used, words of a remark
    "all agree": ([("a", 0.07), ("b", 0.072), ("c", 0.069)], {"a", "b", "c"}, [0, 1, 2], ""),
    "reference agrees": ([("a", 0.07), ("r", 0.073)], {"a"}, [0, 1], ""),
    "reference differs": ([("a", 0.07), ("b", 0.071), ("r", 0.12)], {"a", "b"}, [0, 1],
                          "reference scan r has another zero offset"),
    "reference alone": ([("r", 0.12)], set(), [0], ""),
    "one far off": ([("a", 0.07), ("b", 0.071), ("c", 0.069), ("d", 0.2)], {"a", "b", "c", "d"},
                    [0, 1, 2], ""),
    "two only": ([("a", 0.0), ("b", 0.3)], {"a", "b"}, [0, 1], ""),
    "nothing": ([], {"a"}, [], ""),
}  # fmt: skip


@pytest.mark.parametrize("case", SELECTIONS)
def test_selection(case):
    pairs, own, wanted, words = SELECTIONS[case]
    found = tuple(line(scan, shift) for scan, shift in pairs)
    used, reasons, remarks = select_lines(found, own)
    assert used == tuple(found[i] for i in wanted)
    dropped = [one for i, one in enumerate(found) if i not in wanted]
    assert all(reasons[id(one)] for one in dropped)
    assert len(reasons) == len(dropped)
    assert (words in remarks[0]) if words else remarks == ()


def test_a_reference_scan_with_a_large_uncertainty_is_kept():
    found = (line("a", 0.07), line("r", 0.12, u=0.03))
    used, _, remarks = select_lines(found, {"a"})
    assert used == found
    assert remarks == ()


def test_line_measures_stand_beside_their_expectation():
    found = (line("a", 0.07), line("r", 0.12))
    used, reasons, _ = select_lines(found, {"a"})
    measures = line_measures(found, used, reasons, 0.07, 1e-4)
    assert [measure.used for measure in measures] == [True, False]
    assert measures[0].reason == ""
    assert "zero differs by +0.050°" in measures[1].reason
    assert measures[0].reading_deg == pytest.approx(FEATURE.angle_deg + 0.07)
    expected = FEATURE.angle_deg + 0.07 + FEATURE.by_spacing * 1e-4
    assert measures[0].expected_deg == pytest.approx(expected)
    assert measures[0].residual_deg == pytest.approx(-FEATURE.by_spacing * 1e-4)
    assert measures[0].label == "Mo K-L2,3"
    assert measures[0].wavelength_pm == pytest.approx(70.9317, abs=1e-4)
    assert np.isfinite(measures[0].wavelength_u_pm)
