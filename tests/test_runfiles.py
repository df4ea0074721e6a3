"""Files of simulated runs, the command that writes them, and the two demo runs."""

import tomllib
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner

from hdetermine.cli.simulate import command
from hdetermine.errors import InputError
from hdetermine.files.runsheet import read_run
from hdetermine.planning.runfiles import run_files, write_run
from hdetermine.planning.simulation import simulate
from hdetermine.planning.specification import check_specification, read_specification
from hdetermine.planning.tomltext import toml_text

DEMO = Path(__file__).parents[1] / "demo_runs"

SPEC = """
schema = 1
[run]
title = 'a "quoted" title with \\ and é'
date = 2026-03-12
[tube]
anode = "Cu"
[tube.voltage]
gain = { value = 1.0, u = 0.004, source = "a [truth] of its own" }
[crystal]
material = "LiF"
reflection = "200"
[goniometer]
step_deg = 0.1
[[scan]]
file = "a.csv"
tube_voltage_kV = 25.0
dwell_s = 10.0
[[scan]]
file = "sub/b.csv"
tube_voltage_kV = 35.0
dwell_s = 3.0
abscissa = "two_theta"
ordinate = "rate"
[truth]
draw = true
from_deg = 4.0
to_deg = 9.0
[truth.sweep.b]
step_deg = 0.2
"""


@pytest.fixture
def simulated():
    return simulate(check_specification(tomllib.loads(SPEC)), 4)


def test_folder_reads_back_as_the_same_run(tmp_path, simulated):
    write_run(simulated, tmp_path / "run")
    read, direct = read_run(tmp_path / "run"), simulated.as_run()
    assert read.apparatus == direct.apparatus
    assert (read.title, read.date) == ('a "quoted" title with \\ and é', "2026-03-12")
    for one, two in zip(read.scans, direct.scans, strict=True):
        assert (one.name, one.tube_voltage_kV) == (two.name, two.tube_voltage_kV)
        assert one.reading_deg == pytest.approx(two.reading_deg, abs=1e-9)
        assert (one.counts == two.counts).all()
        assert (one.dwell_s == two.dwell_s).all()
    assert read.truth["zero_deg"] == simulated.truth.zero_deg


def test_truth_file_makes_the_run_again(simulated):
    """The truth table, put back into the specification, draws nothing and changes nothing."""
    content = tomllib.loads(run_files(simulated)["truth.toml"].decode())
    assert content["limit"][1]["reading_deg"] == simulated.limits[1].reading_deg
    spec = {**tomllib.loads(SPEC), "truth": content["truth"]}
    again = simulate(check_specification(spec), 4)
    assert again.truth == simulated.truth
    assert all((a == b).all() for a, b in zip(again.counts, simulated.counts, strict=True))


def test_same_seed_same_bytes(tmp_path):
    (tmp_path / "s.toml").write_text(SPEC, "utf-8")
    for name, seed in (("one", "5"), ("two", "5"), ("three", "6")):
        done = CliRunner().invoke(
            command, [str(tmp_path / "s.toml"), "-o", str(tmp_path / name), "--seed", seed]
        )
        assert done.exit_code == 0, done.output
    files = {p.relative_to(tmp_path / "one") for p in (tmp_path / "one").rglob("*.*")}
    assert {str(f) for f in files} == {"run.toml", "truth.toml", "a.csv", "sub/b.csv"}
    for file in files:
        assert (tmp_path / "one" / file).read_bytes() == (tmp_path / "two" / file).read_bytes()
    assert (tmp_path / "one/a.csv").read_bytes() != (tmp_path / "three/a.csv").read_bytes()


def test_nothing_is_replaced_unasked(tmp_path, simulated):
    folder = tmp_path / "run"
    folder.mkdir()
    (folder / "run.toml").write_text("mine", "utf-8")
    with pytest.raises(InputError, match=r'already holds "run\.toml".*--force'):
        write_run(simulated, folder)
    assert [p.name for p in folder.iterdir()] == ["run.toml"]
    write_run(simulated, folder, replace=True)
    assert read_run(folder).scans[0].counts.size == 51


def test_replacing_removes_the_tables_of_before(tmp_path, simulated):
    folder = tmp_path / "run"
    write_run(simulated, folder)
    (folder / "notes.txt").write_text("keep", "utf-8")
    fewer = tomllib.loads(SPEC)
    del fewer["scan"][1], fewer["truth"]["sweep"]
    write_run(simulate(check_specification(fewer), 1), folder, replace=True)
    assert not (folder / "sub" / "b.csv").exists()
    assert (folder / "notes.txt").exists()
    (folder / "truth.toml").write_text('made = "simulated"\nfile = ["../outside.csv", 3]', "utf-8")
    (tmp_path / "outside.csv").write_text("keep", "utf-8")
    write_run(simulate(check_specification(fewer), 1), folder, replace=True)
    assert (tmp_path / "outside.csv").exists()


def test_command_writes_nothing_on_bad_input(tmp_path):
    (tmp_path / "s.toml").write_text(SPEC.replace("to_deg", "upto_deg"), "utf-8")
    done = CliRunner().invoke(command, [str(tmp_path / "s.toml"), "-o", str(tmp_path / "run")])
    assert isinstance(done.exception, InputError)
    assert not (tmp_path / "run").exists()


@pytest.mark.parametrize(
    "content",
    [
        {"a": 1, "b": {"c": 1.5, "d": {"value": 1.0, "u": 0.1}}, "e": [{"f": "x"}, {"f": "y"}]},
        {"x": {"y": {"z": {"K-L2,3": 1.0}}}, "list": [1.0, 2.0], "empty": []},
        {"quote": 'a"b\\c\n\t\x7f\x00é', "flag": True, "big": 10**15, "tiny": 1e-300, "t": {}},
        {"inf": float("inf"), "minus": -0.0, "nested": {"k": [["a"], ["b"]]}},
    ],
)
def test_toml_text_reads_back(content):
    assert tomllib.loads(toml_text(content)) == content


@pytest.mark.parametrize(
    ("name", "seed"), [("copper_lithium_fluoride", 29), ("molybdenum_rocksalt", 42)]
)
def test_demo_runs_are_what_their_note_says(name, seed):
    simulated = simulate(read_specification(DEMO / name), seed)
    files = run_files(simulated)
    assert f"--seed {seed}" in (DEMO / name / "PROVENANCE.md").read_text("utf-8")
    assert (DEMO / name / "run.toml").read_bytes() == files["run.toml"]
    stored = tomllib.loads((DEMO / name / "truth.toml").read_text("utf-8"))
    made = tomllib.loads(files["truth.toml"].decode())
    assert stored["truth"].keys() == made["truth"].keys()
    assert stored["limit"][0]["reading_deg"] == pytest.approx(made["limit"][0]["reading_deg"])
    run = read_run(DEMO / name)
    for scan, mean in zip(run.scans, simulated.expected_counts, strict=True):
        # Drawn from these means, whichever random stream numpy has by then.
        pull = (scan.counts - mean) / np.sqrt(mean)
        assert abs(pull.mean()) < 5 / np.sqrt(pull.size)
        assert pull.std() == pytest.approx(1.0, abs=0.35)
