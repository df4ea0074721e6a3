"""`hdetermine analyse` as people call it: outputs, exit statuses, nothing half-written."""

from __future__ import annotations

import csv
import json
import os
import shutil
import signal

import jsonschema
import pytest
from click.testing import CliRunner

from hdetermine import cli
from hdetermine.files.shipped import shipped_folder

OUTPUTS = {"result.json", "cutoffs.csv", "budget.csv", "report.html", "report.pdf"}


@pytest.fixture(scope="module")
def run_folder(tmp_path_factory):
    """Three voltages of a demo, to be quick."""
    folder = tmp_path_factory.mktemp("runs") / "run"
    shutil.copytree(shipped_folder("demo_runs") / "molybdenum_rocksalt", folder)
    head, *scans = (folder / "run.toml").read_text("utf-8").split("[[scan]]")
    (folder / "run.toml").write_text("[[scan]]".join([head, *scans[2::3]]), "utf-8")
    return folder


def call(*arguments):
    """Call the command line as the shell would: status, output, errors."""
    handlers = {number: signal.getsignal(number) for number in (signal.SIGINT, signal.SIGTERM)}
    try:
        result = CliRunner().invoke(_Main(), [str(argument) for argument in arguments])
    finally:
        for number, handler in handlers.items():
            signal.signal(number, handler)
    return result.exit_code, result.stdout, result.stderr


class _Main:
    """`cli.main` in the shape that click's runner calls."""

    name = "hdetermine"

    def main(self, args=(), **_):
        cli.main(list(args))


@pytest.fixture(scope="module")
def analysed(run_folder, tmp_path_factory):
    out = tmp_path_factory.mktemp("out") / "result"
    return out, *call("analyse", run_folder, "-o", out, "--linear-only")


def test_outputs_are_complete(analysed):
    out, status, stdout, stderr = analysed
    assert status == 0, stderr
    assert {path.name for path in out.iterdir()} == OUTPUTS
    assert str(out) in stdout.splitlines()[-1]
    assert (out / "report.pdf").read_bytes().startswith(b"%PDF-")
    assert (out / "report.html").read_text("utf-8").lower().startswith("<!doctype html>")
    for name in OUTPUTS:
        assert name in stdout.splitlines()[-1]


def test_result_keeps_to_its_schema(analysed):
    out = analysed[0]
    _, schema, _ = call("schema")
    result = json.loads((out / "result.json").read_text("utf-8"))
    jsonschema.validate(result, json.loads(schema))
    assert result["schema"] == "hdetermine-result/1"
    h = result["h"]
    assert abs(h["value_J_s"] - 6.62607015e-34) < h["expanded_uncertainty_J_s"]
    assert result["provenance"]["settings"] == {"monte_carlo": False, "posterior": False}


def test_linear_only_takes_one_route(analysed):
    result = json.loads((analysed[0] / "result.json").read_text("utf-8"))
    assert result["h"]["route"] == "linear"
    taken = [name for name, route in result["routes"].items() if route]
    assert taken == ["linear"]


def test_tables_have_a_row_each(analysed):
    out = analysed[0]
    result = json.loads((out / "result.json").read_text("utf-8"))
    for name, key in (("cutoffs.csv", "cutoffs"), ("budget.csv", "budget")):
        rows = list(csv.DictReader((out / name).read_text("utf-8").splitlines()))
        assert len(rows) == len(result[key]) > 0
    names = [row["scan"] for row in result["cutoffs"]]
    assert names == ["mo_25.0kV", "mo_32.5kV", "mo_40.0kV"]


def test_summary_is_printed(analysed):
    _, _, stdout, _ = analysed
    assert "h = " in stdout
    for scan in ("mo_25.0kV", "mo_32.5kV", "mo_40.0kV"):
        assert scan in stdout


def test_other_spelling_into_the_run_folder_quietly(run_folder, tmp_path):
    folder = tmp_path / "run"
    shutil.copytree(run_folder, folder)
    options = ("--quiet", "--brief", "--paper", "us-letter", "--laboratory", "Bench room <7>")
    assert call("analyze", folder, "--linear-only", *options) == (0, "", "")
    result = folder / "result"
    assert {path.name for path in result.iterdir()} == OUTPUTS
    assert "Bench room &lt;7&gt;" in (result / "report.html").read_text("utf-8")


def test_the_place_of_the_outputs_does_not_steer_the_terminal(run_folder, tmp_path):
    """The last line named the folder as it stands."""
    status, stdout, _ = call(
        "analyse", run_folder, "-o", tmp_path / "a\x1b]0;x\x07b", "--linear-only"
    )
    assert status == 0
    assert stdout.splitlines()[-1].startswith(f"  Written to {tmp_path}/a]0;xb: ")
    assert "\x1b" not in stdout


def refused(status, stdout, stderr):
    assert status == 2
    assert stdout == ""
    assert stderr.startswith("hdetermine: ")
    assert stderr.count("\n") == 1
    assert "Traceback" not in stderr
    return stderr


def test_a_refused_run_leaves_nothing(run_folder, tmp_path):
    folder = tmp_path / "run"
    shutil.copytree(run_folder, folder)
    for table in folder.glob("*.csv"):
        header, *rows = table.read_text("utf-8").splitlines()
        zeros = [f"{row.split(',')[0]},0" for row in rows]
        table.write_text("\n".join([header, *zeros]), "utf-8")
    before = sorted(path.name for path in folder.iterdir())
    said = refused(*call("analyse", folder, "-o", tmp_path / "out"))
    assert "none of the 3 scans carries a usable edge" in said
    assert not (tmp_path / "out").exists()
    assert sorted(path.name for path in folder.iterdir()) == before
    refused(*call("analyse", folder))
    assert not (folder / "result").exists()


def test_a_refused_run_leaves_older_results_alone(run_folder, tmp_path):
    folder, out = tmp_path / "run", tmp_path / "out"
    shutil.copytree(run_folder, folder)
    out.mkdir()
    (out / "result.json").write_text("older", "utf-8")
    (folder / "mo_25.0kV.csv").write_text("no table at all", "utf-8")
    refused(*call("analyse", folder, "-o", out))
    assert [path.name for path in out.iterdir()] == ["result.json"]
    assert (out / "result.json").read_text("utf-8") == "older"


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("{missing}",), "no such folder"),
        (("{run}", "--paper", "a5"), "--paper"),
        (("{run}", "--seed", "one"), "--seed"),
        (("{run}", "--templates", "{missing}"), "template folder"),
        (("{run}", "-o", "{file}"), "notes.txt"),
    ],
    ids=["no folder", "paper", "seed", "templates", "output is a file"],
)
def test_bad_arguments_are_one_sentence(run_folder, tmp_path, arguments, words):
    (tmp_path / "notes.txt").write_text("mine", "utf-8")
    places = {
        "run": run_folder,
        "missing": tmp_path / "missing",
        "file": tmp_path / "notes.txt",
    }
    given = [argument.format(**places) for argument in arguments]
    assert words in refused(*call("analyse", *given, "--linear-only"))
    assert (tmp_path / "notes.txt").read_text("utf-8") == "mine"
    assert [path.name for path in tmp_path.iterdir()] == ["notes.txt"]


@pytest.mark.skipif(os.geteuid() == 0, reason="nothing is unwritable for the superuser")
def test_a_folder_that_cannot_be_written(run_folder, tmp_path):
    locked = tmp_path / "locked"
    locked.mkdir(mode=0o555)
    refused(*call("analyse", run_folder, "-o", locked / "out", "--linear-only"))
    refused(*call("analyse", run_folder, "-o", locked, "--linear-only"))
    assert list(locked.iterdir()) == []


def test_a_place_that_can_hold_no_folder(run_folder):
    """Whoever calls, nobody can make a folder there."""
    refused(*call("analyse", run_folder, "-o", "/dev/null/out", "--linear-only"))
