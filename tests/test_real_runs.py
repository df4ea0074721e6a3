"""Two public runs that others measured, where they lie beside the project.

Their numbers are published without a licence, so they are not part of the project. Neither run
states how well its voltage is known: 1 % on the gain and 0.1 kV on the display are common
practice (no source).
"""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest

from hdetermine.determination import determine
from hdetermine.files.runsheet import read_run

REAL = Path(__file__).resolve().parents[2] / "shared" / "real"
SI = 6.626_070_15e-34  # exact

pytestmark = pytest.mark.skipif(
    not REAL.is_dir(), reason="the public runs do not lie beside the project"
)

HEAD = """\
schema = 1

[tube]
anode = "{anode}"

[tube.voltage]
gain = {{ value = 1.0, u = 0.01 }}
offset_kV = {{ value = 0.0, half_width = 0.1 }}

[crystal]
material = "{material}"
reflection = "200"
spacing_pm = {spacing}

[goniometer]
step_deg = 0.1

[every_scan]
emission_current_mA = 1.0
dwell_s = {dwell}
"""


def scan_entry(file, kV, more=""):
    return f'\n[[scan]]\nfile = "{file}"\ntube_voltage_kV = {kV}\n{more}'


def write_run(folder, source, head, scans):
    shutil.copytree(REAL / source, folder)
    (folder / "run.toml").write_text(head + "".join(scans), "utf-8")
    return read_run(folder)


@pytest.fixture(scope="module")
def iron(tmp_path_factory):
    """Iron and lithium fluoride, nine voltages and a reference scan at 33 kV."""
    head = HEAD.format(anode="Fe", material="LiF", spacing="{ value = 201.4, u = 0.1 }", dwell=2.0)
    scans = [scan_entry(f"fe_lif_{kV}kV.csv", float(kV)) for kV in range(15, 32, 2)]
    scans.append(scan_entry("fe_lif_33kV_reference.csv", 33.0, "edge = false\n"))
    folder = tmp_path_factory.mktemp("iron") / "run"
    run = write_run(folder, "fe_lif_nine_voltages", head, scans)
    return determine(run, posterior=False, monte_carlo=False)


@pytest.fixture(scope="module")
def molybdenum(tmp_path_factory):
    """Molybdenum and potassium bromide, five voltages and a longer scan at 35 kV."""
    head = HEAD.format(anode="Mo", material="KBr", spacing="{ value = 329.5, u = 0.3 }", dwell=3.0)
    scans = [scan_entry(f"mo_kbr_{kV}kV_3s.csv", float(kV)) for kV in (18, 22, 26, 30, 35)]
    scans.append(scan_entry("mo_kbr_35kV_full_1s.csv", 35.0, "dwell_s = 1.0\n"))
    folder = tmp_path_factory.mktemp("molybdenum") / "run"
    run = write_run(folder, "mo_kbr_five_voltages", head, scans)
    return determine(run, posterior=False, monte_carlo=False)


@pytest.fixture(params=["iron", "molybdenum"])
def d(request):
    return request.getfixturevalue(request.param)


def test_h_lies_near_the_si_value(d):
    """The experimenters got 3.5 % too little and 8.1 % too much."""
    assert abs(d.h.value_J_s / SI - 1.0) < 0.03
    assert abs(d.comparison.E_n) <= 1.0
    # One per cent of the gain is the least that can remain.
    assert 0.01 < d.h.relative_standard_uncertainty < 0.03


def test_most_scans_are_usable(d):
    with_edge = [scan for scan in d.run.scans if scan.edge]
    assert len(d.used) >= len(with_edge) - 1
    assert all(cutoff.reason for cutoff in d.refused)


def remarks_of(d, scan):
    (cutoff,) = [one for one in d.cutoffs if one.scan == scan]
    return " ".join(cutoff.remarks)


def test_rates_that_are_no_whole_counts_are_said(d):
    """Both tables hold rounded rates."""
    for scan in d.run.scans:
        assert any("rate" in remark for remark in scan.remarks), scan.name
        assert scan.rate_rounding is not None
    for cutoff in d.cutoffs:
        assert "rate" in remarks_of(d, cutoff.scan)


def test_rounding_coarser_than_a_count_is_said(iron):
    """Whole counts a second over two seconds: each count is known to one only."""
    assert all("known only to ± 1" in remarks_of(iron, scan.name) for scan in iron.run.scans)


# Where a step read zero in the middle of many counts.
DROPOUTS = {
    "fe_lif_17kV": (20.4,),
    "fe_lif_25kV": (14.6,),
    "fe_lif_33kV_reference": (18.2, 34.5, 38.0),
}


def test_dropouts_are_left_out_and_said(iron):
    for scan in iron.run.scans:
        told = [remark for remark in scan.remarks if "dropout" in remark]
        expected = DROPOUTS.get(scan.name, ())
        assert len(told) == len(expected), scan.name
        for angle, remark in zip(expected, told, strict=True):
            assert f"{angle:g}°" in remark
            assert abs(scan.reading_deg - angle).min() > 0.05
        assert all(remark in remarks_of(iron, scan.name) for remark in told)


def test_direct_beam_does_not_pass_for_an_edge(iron):
    """At 31 kV it is ten times as bright at 3.5 degrees as the background at 4.5.

    The counts begin to rise at 5.3 degrees, have doubled by 5.5, and the edges of this run are
    smeared by half a degree; its shortest limits lie several per cent below hc/eU.
    """
    reading = {cutoff.tube_voltage_kV: cutoff.reading_deg for cutoff in iron.used}
    assert 5.3 < reading[31.0] < 5.6
    assert sorted(reading.values(), reverse=True) == [reading[kV] for kV in sorted(reading)]
    for cutoff in iron.used:
        expected = 1239.842 / cutoff.tube_voltage_kV
        assert cutoff.wavelength_pm == pytest.approx(expected, rel=0.07)


def test_line_above_the_edge_is_modelled_or_the_scan_refused(molybdenum):
    """At 22 kV the K-M lines stand one width above the edge; a ruler reads -6 % there."""
    (cutoff,) = [one for one in molybdenum.cutoffs if one.scan == "mo_kbr_22kV_3s"]
    if cutoff.used:
        assert cutoff.windows[0].lines_modelled > 0
        assert cutoff.wavelength_pm == pytest.approx(1239.842 / 22.0, rel=0.04)
    else:
        assert "line" in cutoff.reason


def test_width_of_the_edges_is_known_to_something(d):
    """Edges with few counts tell their width badly, but not to a boundless uncertainty."""
    assert 0.0 < d.angle_scale.edge_resolution_u_deg < 0.3
    assert 0.1 < d.angle_scale.edge_resolution_deg < 1.0


def test_lines_tell_the_zero(d):
    assert d.angle_scale.zero_from.startswith("lines")
    assert any(line.used for line in d.angle_scale.lines)
    assert d.angle_scale.zero.standard_uncertainty < 0.05
