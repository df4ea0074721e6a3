"""The run sheet: what is understood, what is assumed, and one sentence for every fault."""

from __future__ import annotations

import math
import os
from pathlib import Path

import pytest
from sheet_text import SHEET, TABLE, changed, refused, write_run

from hdetermine.files import defaults, limits
from hdetermine.files.plaintext import quoted
from hdetermine.files.quantities import parse_stated, settle
from hdetermine.files.runsheet import read_run

REAL = Path(__file__).resolve().parents[2] / "shared" / "real"

GAIN = 'gain = { value = 1.0, u = 0.004, source = "supply calibration" }'


def refusal(folder: Path, sheet: str | None = None) -> str:
    """The sentence with which a run is refused."""
    return refused(lambda: read_run(folder, sheet))


# --- what is understood -----------------------------------------------------------------------


def test_a_sound_sheet(tmp_path):
    run = read_run(write_run(tmp_path / "run"))
    assert (run.title, run.date, run.operator) == ("Bench 3", "2026-03-12", "")
    tube, crystal = run.apparatus.tube, run.apparatus.crystal
    assert tube.anode == "Cu"
    assert tube.gain.standard_uncertainty == 0.004
    assert tube.gain.source == "supply calibration"
    assert not tube.gain.is_default
    assert crystal.spacing_pm.value == 201.36
    assert crystal.elements == ("Li", "F")
    assert crystal.reference_temperature_C == 25.0
    assert run.apparatus.goniometer.resolution_deg is None
    assert not run.apparatus.tube.repeatability_kV.common
    (scan,) = run.scans
    assert (scan.name, scan.file, scan.tube_voltage_kV) == ("a", "a.csv", 20.0)
    assert list(scan.counts) == list(range(20))
    assert scan.reading_deg[0] == 5.0
    assert set(scan.dwell_s) == {10.0}
    assert scan.rate_rounding is None
    assert [file.name for file in run.files] == ["run.toml", "a.csv"]
    assert run.truth == {}


# value, standard uncertainty, distribution, evaluation, degrees of freedom.
# Divisors: JCGM 100:2008, 4.3.7 and 4.3.9; JCGM 101:2008, 6.4.6 (arcsine), 6.4.9 (t).
FORMS = [
    ("{ value = 1.0, u = 0.01 }", 0.01, "normal", "B", math.inf),
    ("{ value = 1, u = 0 }", 0.0, "normal", "B", math.inf),
    ("{ value = 1.0, half_width = 0.03 }", 0.03 / math.sqrt(3), "rectangular", "B", math.inf),
    (
        '{ value = 1.0, half_width = 0.03, distribution = "triangular" }',
        0.03 / math.sqrt(6),
        "triangular",
        "B",
        math.inf,
    ),
    (
        '{ value = 1.0, half_width = 0.03, distribution = "arcsine" }',
        0.03 / math.sqrt(2),
        "arcsine",
        "B",
        math.inf,
    ),
    ("{ value = 1.0, expanded = 0.02, k = 2 }", 0.01, "normal", "B", math.inf),
    ("{ value = 1.0, u = 0.01, dof = 9 }", 0.01, "t", "A", 9.0),
    ("{ value = 1.0, expanded = 0.02, k = 2.26, dof = 9 }", 0.02 / 2.26, "t", "A", 9.0),
    ("{ value = 1.0, half_width = 0.03, dof = 8 }", 0.03 / math.sqrt(3), "rectangular", "B", 8.0),
    ("{ value = 1.0, u = 0.01, dof = inf }", 0.01, "normal", "B", math.inf),
]


@pytest.mark.parametrize(("form", "u", "distribution", "evaluation", "dof"), FORMS)
def test_forms_of_a_quantity(tmp_path, form, u, distribution, evaluation, dof):
    run = read_run(write_run(tmp_path / "run", changed(GAIN, f"gain = {form}")))
    gain = run.apparatus.tube.gain
    assert gain.value == 1.0
    assert gain.standard_uncertainty == pytest.approx(u, rel=1e-12, abs=0)
    assert (gain.distribution, gain.evaluation) == (distribution, evaluation)
    assert gain.degrees_of_freedom == dof
    assert not gain.is_default


def test_a_plain_number_takes_the_default_uncertainty(tmp_path):
    run = read_run(write_run(tmp_path / "run", changed(GAIN, "gain = 0.98")))
    gain = run.apparatus.tube.gain
    assert (gain.value, gain.standard_uncertainty, gain.is_default) == (0.98, 0.01, True)
    entry = next(e for e in run.sheet if e.key == "tube.voltage.gain")
    assert entry.is_default
    assert entry.text == "0.98, u = 0.01, normal"


@pytest.mark.parametrize("rule", [r for r in defaults.RULES if r.value is not None])
def test_every_default_stands_in_the_table_with_a_reason(tmp_path, rule):
    sheet = "\n".join(
        line for line in SHEET.splitlines() if not line.startswith(("gain", "cath", "dead_time"))
    )
    run = read_run(write_run(tmp_path / "run", sheet))
    quantity = next(q for q in run.apparatus.quantities() if q.name == rule.key)
    assert quantity.is_default
    assert quantity.note
    assert rule.reason
    assert len([e for e in run.sheet if e.key == rule.key and e.is_default]) == 1
    if not rule.key.startswith("crystal.") or rule.key == "crystal.temperature_C":
        assert quantity.value == rule.value
        u = rule.u if rule.u is not None else rule.half_width / math.sqrt(3)
        assert quantity.standard_uncertainty == pytest.approx(u)


def test_default_spread_never_leaves_the_support():
    """A dead time of 10 us given plainly cannot be 10 +- 60 us."""
    quantity = settle(defaults.DEAD_TIME, parse_stated(10.0), "run.toml")
    assert quantity.half_width == pytest.approx(10.0)
    none = settle(defaults.DEAD_TIME, parse_stated(0.0), "run.toml")
    assert none.standard_uncertainty == 0.0
    kernel = settle(defaults.KERNEL, parse_stated(1.9), "run.toml")
    assert kernel.half_width == pytest.approx(0.1)


def test_spacing_from_the_table_when_silent(tmp_path):
    sheet = changed("spacing_pm = { value = 201.36, u = 0.02 }\n", "")
    spacing = read_run(write_run(tmp_path / "run", sheet)).apparatus.crystal.spacing_pm
    assert (spacing.value, spacing.is_default) == (pytest.approx(201.35), True)
    assert "NBS" in spacing.note


def test_a_plain_spacing_of_kbr_covers_the_other_one_in_circulation(tmp_path):
    sheet = changed('"LiF"', '"KBr"').replace("{ value = 201.36, u = 0.02 }", "329.5")
    spacing = read_run(write_run(tmp_path / "run", sheet)).apparatus.crystal.spacing_pm
    assert spacing.value == 329.5
    assert spacing.value + spacing.half_width > 330.03
    assert spacing.is_default


def test_unknown_crystal(tmp_path):
    sheet = changed('"LiF"', '"CaF2"').replace('reflection = "200"\n', "")
    crystal = read_run(write_run(tmp_path / "run", sheet)).apparatus.crystal
    assert (crystal.material, crystal.elements, crystal.reflection) == ("CaF2", ("Ca", "F"), "")
    assert crystal.refraction.value == 0.0
    assert crystal.refraction.half_width == pytest.approx(3e-4)
    sheet = sheet.replace("spacing_pm = { value = 201.36, u = 0.02 }\n", "")
    assert "crystal.spacing_pm" in refusal(write_run(tmp_path / "other", sheet))


def test_stated_resolution(tmp_path):
    sheet = changed("step_deg = 0.1", "resolution_deg = 0.2")
    run = read_run(write_run(tmp_path / "run", sheet))
    resolution = run.apparatus.goniometer.resolution_deg
    assert resolution.standard_uncertainty == pytest.approx(0.04)
    assert run.apparatus.goniometer.step_deg == pytest.approx(0.1)


def test_odd_spacing_is_remarked(tmp_path):
    sheet = changed('"LiF"', '"KBr"').replace("201.36, u = 0.02", "327.0, u = 0.2")
    run = read_run(write_run(tmp_path / "run", sheet))
    assert "-0.92%" in run.remarks[0]


def test_every_scan_fills_in_what_a_scan_leaves_out(tmp_path):
    sheet = SHEET.replace("dwell_s = 10.0\n", "edge = false\n\n[every_scan]\ndwell_s = 4.0\n")
    sheet += '\n[[scan]]\nfile = "a.csv"\nname = "again"\ntube_voltage_kV = 20\ndwell_s = 7\n'
    run = read_run(write_run(tmp_path / "run", sheet))
    assert [scan.name for scan in run.scans] == ["a", "again"]
    assert [scan.dwell_s[0] for scan in run.scans] == [4.0, 7.0]
    assert [scan.edge for scan in run.scans] == [False, True]


def test_shared_sheet_elsewhere(tmp_path):
    write_run(tmp_path / "group")
    shared = tmp_path / "shared.toml"
    shared.write_text(SHEET)
    (tmp_path / "group" / "run.toml").unlink()
    run = read_run(tmp_path / "group", shared)
    assert [file.name for file in run.files] == ["shared.toml", "a.csv"]


def test_truth_in_the_sheet_and_beside_it(tmp_path):
    run = read_run(write_run(tmp_path / "run", SHEET + "\n[truth]\ngain = 1.01\n"))
    assert run.truth == {"gain": 1.01}
    folder = write_run(tmp_path / "other")
    (folder / "truth.toml").write_text("[truth]\nzero_deg = 0.1\n")
    run = read_run(folder)
    assert run.truth == {"zero_deg": 0.1}
    assert "truth.toml" not in [file.name for file in run.files]


def test_text_is_data(tmp_path):
    title = r"\u001b]0;x\u0007 <b>=1+1\u202e"
    run = read_run(write_run(tmp_path / "run", changed("Bench 3", title)))
    assert run.title == "]0;x <b>=1+1"


# --- what is refused --------------------------------------------------------------------------

# the sound piece, the broken piece, and what the sentence has to name
FAULTS = [
    ("schema = 1", "schema = 2", ["key schema", '"2"', "schema = 1"]),
    ("schema = 1\n", "", ["key schema", "found nothing"]),
    ("schema = 1", "schema = true", ["key schema"]),
    ("schema = 1", 'schema = "1"', ["key schema"]),
    ("[run]", "[rum]", ["key rum", "did you mean run"]),
    ("title", "titel", ["key run.titel", "did you mean title"]),
    ('"Bench 3"', "3", ["run.title", '"3"', "text"]),
    ('"Bench 3"', '"' + "x" * 600 + '"', ["run.title", "600 characters"]),
    ("2026-03-12", '"yesterday"', ["run.date", "yesterday", "2026-03-12"]),
    ('anode = "Cu"', "", ["tube.anode", "missing"]),
    ('anode = "Cu"', 'anode = "copper"', ["tube.anode", "did you mean Co", "symbol"]),
    ('anode = "Cu"', 'anode = "?"', ["tube.anode", "put the true value"]),
    ('anode = "Cu"', 'anode = "Cu"\nfilter = "Xx"', ["tube.filter", '"Xx"']),
    (GAIN, "gain = 20", ["tube.voltage.gain", "found 20", "0.5 to 2"]),
    (GAIN, "gain = true", ["tube.voltage.gain", '"True"', "a number"]),
    (GAIN, 'gain = "1,0"', ["tube.voltage.gain", '"1,0"']),
    (GAIN, "gain = nan", ["tube.voltage.gain", "finite"]),
    (GAIN, "gain = inf", ["tube.voltage.gain", "finite"]),
    (GAIN, "gain = 1" + "0" * 400, ["tube.voltage.gain", "finite"]),
    (GAIN, "gain = { value = 1.0 }", ["tube.voltage.gain", "no uncertainty", "exactly one"]),
    (GAIN, "gain = { u = 0.1 }", ["tube.voltage.gain", "without value"]),
    (GAIN, "gain = { value = 1.0, u = 0.1, half_width = 0.1 }", ["u and half_width"]),
    (GAIN, "gain = { value = 1.0, u = -0.1 }", ["gain", "u = -0.1", "above zero"]),
    (GAIN, "gain = { value = 1.0, u = nan }", ["gain", "finite"]),
    (GAIN, "gain = { value = 1.0, half_width = 0 }", ["half_width = 0", "above zero"]),
    (GAIN, "gain = { value = 1.0, half_width = -1 }", ["half_width = -1", "above zero"]),
    (GAIN, "gain = { value = 1.0, half_with = 1 }", ["half_with", "did you mean half_width"]),
    (GAIN, "gain = { value = 1.0, expanded = 0.1 }", ["expanded without k"]),
    (GAIN, "gain = { value = 1.0, expanded = 0.1, k = 0 }", ["k = 0", "coverage factor"]),
    (GAIN, "gain = { value = 1.0, u = 0.1, k = 2 }", ["k beside u", "belongs to expanded"]),
    (
        GAIN,
        'gain = { value = 1.0, half_width = 0.1, distribution = "rectangle" }',
        ["did you mean rectangular", "triangular, arcsine"],
    ),
    (
        GAIN,
        'gain = { value = 1.0, u = 0.1, distribution = "triangular" }',
        ["distribution beside u", "belongs to half_width"],
    ),
    (GAIN, "gain = { value = 1.0, u = 0.1, dof = 0 }", ["dof = 0", "from 1 up"]),
    (GAIN, "gain = { value = 1.0, u = 0.5 }", ["tube.voltage.gain", "reach -0.5", "smaller"]),
    (GAIN, "gain = { value = 1.0, u = 0.1, source = 3 }", ["source", '"3"']),
    # Uncertainties so large that their squares overflow ended in a traceback.
    (GAIN, "repeatability_kV = { value = 0, u = 1e308 }", ["repeatability_kV", "beyond -100 kV"]),
    (GAIN, "offset_kV = { value = 0, half_width = 1e308 }", ["offset_kV", "beyond -100 kV"]),
    ("90.0, u = 10.0", "90.0, u = 1e308", ["dead_time_us", "smaller uncertainty"]),
    (
        "value = 4.5, half_width = 0.3",
        "value = 4.5, u = 1e308",
        ["work_function", "smaller uncertainty"],
    ),
    (
        "step_deg = 0.1",
        "kernel_triangular_fraction = { value = 0.5, u = 1e308 }",
        ["kernel", "beyond 0 it has no meaning"],
    ),
    (GAIN, "repeatability_kV = 0.1", ["repeatability_kV", "found 0.1", "offset_kV"]),
    (GAIN, "ripple = 5", ["ripple", "found 5", "not percent"]),
    (GAIN, "offset_kV = 150", ["offset_kV", "found 150", "kV"]),
    ("value = 4.5, half_width = 0.3", "value = 4500, u = 1", ["work_function", "eV", "tungsten"]),
    ('material = "LiF"', 'material = ""', ["crystal.material", "empty"]),
    ('reflection = "200"', 'reflection = "100"', ["crystal.reflection", '"100"', "200"]),
    ("201.36, u = 0.02", "2.0136, u = 0.0002", ["crystal.spacing_pm", "2.0136", "(200)"]),
    ("201.36, u = 0.02", "402.72, u = 0.02", ["crystal.spacing_pm", "did you give 2d"]),
    ("201.36, u = 0.02", "-201.36, u = 0.02", ["crystal.spacing_pm", "-201.36"]),
    ("201.36, u = 0.02", "201.36, u = 80", ["crystal.spacing_pm", "reach -38.64"]),
    ("201.36, u = 0.02", "201.36, half_width = 202", ["crystal.spacing_pm", "no meaning"]),
    ('reflection = "200"', "temperature_C = 295", ["temperature_C", "295", "not kelvin"]),
    ('reflection = "200"', "expansion_per_K = 33.5", ["expansion_per_K", "33.5e-6"]),
    ('reflection = "200"', "refraction = 53", ["crystal.refraction", "1e-4"]),
    ("step_deg = 0.1", "zero_deg = 200", ["zero_deg", "found 200"]),
    ("step_deg = 0.1", "step_deg = 0", ["step_deg", "found 0"]),
    ("step_deg = 0.1", "resolution_deg = -1", ["resolution_deg", "found -1"]),
    ("step_deg = 0.1", "kernel_triangular_fraction = 3", ["kernel", "0 to 2"]),
    (
        "step_deg = 0.1",
        "kernel_triangular_fraction = { value = 0.5, half_width = 0.7 }",
        ["kernel", "reach -0.2"],
    ),
    ("90.0, u = 10.0", "90.0, half_width = 100", ["dead_time_us", "reach -10 us"]),
    ("90.0, u = 10.0", "-1, u = 10.0", ["dead_time_us", "found -1"]),
    ("[counter]", '[counter]\ndead_time_model = "paralyzable"', ["did you mean paralysable"]),
    ("[counter]", "[continuum]\nnear_limit_energy_keV = 400\n[counter]", ["near_limit_energy_keV"]),
    (
        "tube_voltage_kV = 20.0",
        "tube_voltage_kV = 20000",
        ["scan[1]", "20000", "tube_voltage_kV = 20"],
    ),
    ("tube_voltage_kV = 20.0", "", ["scan[1].tube_voltage_kV", "missing"]),
    (
        "tube_voltage_kV = 20.0",
        "tube_voltage_kV = 20.0\nfit_from_deg = 200",
        ["fit_from_deg", "200"],
    ),
    (
        "tube_voltage_kV = 20.0",
        "tube_voltage_kV = 20.0\nfit_from_deg = 8\nfit_to_deg = 6",
        ["scan[1]", "fit_from_deg = 8", "swap"],
    ),
    (
        "tube_voltage_kV = 20.0",
        "tube_voltage_kV = 20.0\nedge = 1",
        ["scan[1].edge", "true and false"],
    ),
    ("tube_voltage_kV = 20.0", "tube_voltage_kV = 20.0\ncolumn = 0", ["column", "counted from 1"]),
    ("tube_voltage_kV = 20.0", 'tube_voltage_kV = 20.0\nname = ""', ["scan[1].name", "empty"]),
    (
        "tube_voltage_kV = 20.0",
        'tube_voltage_kV = 20.0\nabscissa = "2theta"',
        ["abscissa", "did you mean theta", '"two_theta"'],
    ),
    ("dwell_s = 10.0", "", ["a.csv", "counting time", "dwell_s", "run.toml"]),
    ("dwell_s = 10.0", "dwell_s = 0", ["scan[1].dwell_s", "found 0", "seconds"]),
    ("dwell_s = 10.0", "dwel_s = 10.0", ["scan[1].dwel_s", "did you mean dwell_s"]),
    ("dwell_s = 10.0", "dwell_s = 10.0\nemission_current_mA = -1", ["emission_current_mA"]),
    ('"a.csv"', '"b.csv"', ["b.csv", "no such file", 'did you mean "a.csv"']),
    ('"a.csv"', '"../a.csv"', ["scan[1].file", "inside the run folder"]),
    ('"a.csv"', '"x/../../a.csv"', ["inside the run folder"]),
    ('"a.csv"', '"/etc/hostname"', ["inside the run folder"]),
    ('"a.csv"', r'"..\\a.csv"', ["inside the run folder"]),
    ('"a.csv"', '"C:/a.csv"', ["inside the run folder"]),
    ('"a.csv"', '"."', ["a folder", "name a file"]),
    ('"a.csv"', '"' + "a" * 400 + '"', ["cannot be read"]),
    ("[[scan]]", "[scan]", ["no scan is listed"]),
    ("[counter]", "[counter", ["not valid TOML", "line "]),
    ("[counter]", "x = " + "[" * 300 + "]" * 300, ["nested"]),
    ("[counter]", "[" + "a." * 900 + "b]\n[counter]", ["nested deeper"]),
    ("[counter]", "x = " + "1" * 5000, ["number is too long"]),
    ("[counter]", "# " + "x" * 30000, ["line ", "30002 characters"]),
]


@pytest.mark.parametrize(("old", "new", "named"), FAULTS)
def test_faults_are_named_in_one_sentence(tmp_path, old, new, named):
    sentence = refusal(write_run(tmp_path / "run", changed(old, new)))
    for word in named:
        assert word in sentence


def test_more_than_one_fault_is_counted(tmp_path):
    sheet = changed('"Bench 3"', "3").replace("step_deg = 0.1", "step_deg = 0")
    assert refusal(write_run(tmp_path / "run", sheet)).endswith("(and 1 more).")


def test_two_scans_of_one_name(tmp_path):
    sheet = SHEET + '\n[[scan]]\nfile = "a.csv"\ntube_voltage_kV = 20\ndwell_s = 7\n'
    sentence = refusal(write_run(tmp_path / "run", sheet))
    assert "scan[2]" in sentence
    assert "name of its own" in sentence


def test_folder_faults(tmp_path):
    assert "no such folder" in refusal(tmp_path / "nowhere")
    (tmp_path / "empty").mkdir()
    assert "no run.toml" in refusal(tmp_path / "empty")
    folder = write_run(tmp_path / "run")
    (folder / "run.toml").write_bytes(b"")
    assert "empty" in refusal(folder)
    (folder / "run.toml").write_bytes(b"title = '\xff\xfe'")
    assert "UTF-8" in refusal(folder)
    (folder / "run.toml").write_bytes(b"#" * (limits.MAX_SHEET_BYTES + 1))
    assert "larger than" in refusal(folder)
    (folder / "run.toml").unlink()
    (folder / "run.toml").mkdir()
    assert "this is a folder" in refusal(folder)


def test_too_many_scans(tmp_path):
    sheet = SHEET + '\n[[scan]]\nfile = "a.csv"\ntube_voltage_kV = 20\n' * limits.MAX_SCANS
    assert "201 scans are more than the 200" in refusal(write_run(tmp_path / "run", sheet))


def test_too_many_points_in_all_scans_together(tmp_path, monkeypatch):
    monkeypatch.setattr("hdetermine.files.runsheet.MAX_RUN_POINTS", 30)
    assert read_run(write_run(tmp_path / "run")).scans[0].counts.size == 20
    other = '\n[[scan]]\nname = "b"\nfile = "a.csv"\ntube_voltage_kV = 20\ndwell_s = 1\n'
    sentence = refusal(write_run(tmp_path / "run", SHEET + other))
    assert "40 points in all its scans are more than the 30" in sentence


def test_many_large_files(tmp_path, monkeypatch):
    monkeypatch.setattr("hdetermine.files.runfolder.MAX_RUN_BYTES", len(SHEET) + len(TABLE) - 1)
    assert "bytes in this and the files before it" in refusal(write_run(tmp_path / "run"))


def test_links_out_of_the_folder_are_refused(tmp_path):
    (tmp_path / "secret.csv").write_text(TABLE)
    folder = write_run(tmp_path / "run")
    (folder / "a.csv").unlink()
    (folder / "a.csv").symlink_to("../secret.csv")
    assert "link that leads out" in refusal(folder)
    (folder / "a.csv").unlink()
    (folder / "b.csv").write_text(TABLE)
    (folder / "a.csv").symlink_to("b.csv")
    assert read_run(folder).scans[0].counts.size == 20
    (folder / "a.csv").unlink()
    (folder / "a.csv").symlink_to("a.csv")
    assert "cannot be read" in refusal(folder)
    (folder / "run.toml").rename(tmp_path / "elsewhere.toml")
    (folder / "run.toml").symlink_to(tmp_path / "elsewhere.toml")
    assert "link that leads out" in refusal(folder)


def test_a_pipe_does_not_hang(tmp_path):
    folder = write_run(tmp_path / "run")
    (folder / "a.csv").unlink()
    os.mkfifo(folder / "a.csv")
    assert "not an ordinary file" in refusal(folder)


def test_hostile_names_stay_plain(tmp_path):
    sheet = changed("title", '"\\u001b[31m\\u202e"')
    assert "\x1b" not in refusal(write_run(tmp_path / "run", sheet))
    assert quoted("a\x1b]0;x\x07\u202eb\nc") == '"a]0;xb c"'
    assert len(quoted("x" * 1000)) == 62


# --- real runs, where they stand beside the project ------------------------------------------


@pytest.mark.skipif(not REAL.exists(), reason="the two public runs are not on this machine")
def test_real_run_in_whole_rates(tmp_path):
    """fe_lif_nine_voltages: whole rates of 2 s steps, dropouts at 20.4 deg of the 17 kV scan."""
    folder = tmp_path / "run"
    folder.mkdir()
    for name in ("fe_lif_17kV.csv", "fe_lif_33kV_reference.csv"):
        (folder / name).write_bytes((REAL / "fe_lif_nine_voltages" / name).read_bytes())
    sheet = SHEET.replace('file = "a.csv"', 'file = "fe_lif_17kV.csv"').replace(
        "dwell_s = 10.0", "dwell_s = 2.0"
    )
    sheet += '\n[[scan]]\nfile = "fe_lif_33kV_reference.csv"\ntube_voltage_kV = 33\ndwell_s = 2\n'
    (folder / "run.toml").write_text(sheet)
    scan, reference = read_run(folder).scans
    assert scan.counts.size == 230
    assert 20.4 not in scan.reading_deg
    assert any("20.4" in remark and "dropout" in remark for remark in scan.remarks)
    assert scan.rate_rounding == 1.0
    gone = {18.2, 34.5, 38.0}
    assert gone.isdisjoint(set(reference.reading_deg))
    assert reference.counts.size == 566 - len(gone)


@pytest.mark.skipif(not REAL.exists(), reason="the two public runs are not on this machine")
def test_real_run_in_rounded_rates(tmp_path):
    """mo_kbr_five_voltages: rates of 3 s steps rounded to 0.1: the counts come back whole."""
    table = (REAL / "mo_kbr_five_voltages" / "mo_kbr_22kV_3s.csv").read_bytes()
    sheet = SHEET.replace("dwell_s = 10.0", "dwell_s = 3.0")
    (scan,) = read_run(write_run(tmp_path / "run", sheet, table)).scans
    assert scan.rate_rounding == pytest.approx(0.15)
    assert not any("miss" in remark for remark in scan.remarks)
    wrong = SHEET.replace("dwell_s = 10.0", "dwell_s = 5.0")
    (scan,) = read_run(write_run(tmp_path / "wrong", wrong, table)).scans
    assert any("check dwell_s" in remark for remark in scan.remarks)
