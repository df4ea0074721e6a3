"""Same input, version and seed: the same bytes, whatever surrounds the process."""

from __future__ import annotations

import json
import os
import shutil
import subprocess
import sys

import pytest

from hdetermine.files.shipped import shipped_folder

OUTPUTS = {"result.json", "cutoffs.csv", "budget.csv", "report.html", "report.pdf"}
SURROUNDINGS = {
    "PYTHONHASHSEED": ("1", "4711"),
    "OMP_NUM_THREADS": ("1", "2"),
    "OPENBLAS_NUM_THREADS": ("1", "2"),
    "TZ": ("Pacific/Kiritimati", "America/Lima"),
    "LC_ALL": ("C", "C.UTF-8"),
    "COLUMNS": ("40", "200"),
}


def surroundings(which):
    return {**os.environ, **{name: values[which] for name, values in SURROUNDINGS.items()}}


def analysed(run, out, *options, cwd, env):
    command = [sys.executable, "-m", "hdetermine", "analyse", str(run), "-o", str(out), *options]
    done = subprocess.run(command, cwd=cwd, env=env, capture_output=True, text=True)
    assert done.returncode == 0, done.stderr
    target = (cwd / out) if not out.is_absolute() else out
    return {path.name: path.read_bytes() for path in target.iterdir()}, done.stdout


@pytest.fixture(scope="module")
def run_folder(tmp_path_factory):
    """Three voltages of a demo, to be quick."""
    folder = tmp_path_factory.mktemp("runs") / "run"
    shutil.copytree(shipped_folder("demo_runs") / "molybdenum_rocksalt", folder)
    sheet = (folder / "run.toml").read_text("utf-8")
    head, *scans = sheet.split("[[scan]]")
    (folder / "run.toml").write_text("[[scan]]".join([head, *scans[2::3]]), "utf-8")
    return folder


@pytest.fixture(scope="module")
def first(run_folder, tmp_path_factory):
    out = tmp_path_factory.mktemp("first") / "out"
    return analysed(run_folder, out, cwd=run_folder.parent, env=surroundings(0))


@pytest.mark.slow
def test_the_surroundings_do_not_matter(run_folder, first, tmp_path):
    """Other locale, time zone, hash seed, threads, working directory, paths and their spelling."""
    moved = tmp_path / "somewhere else" / "run"
    shutil.copytree(run_folder, moved)
    outputs, summary = analysed(
        moved.relative_to(tmp_path), tmp_path / "out", cwd=tmp_path, env=surroundings(1)
    )
    assert set(outputs) == OUTPUTS
    for name in sorted(OUTPUTS):
        assert outputs[name] == first[0][name], name
    assert summary.splitlines()[:-1] == first[1].splitlines()[:-1]


@pytest.mark.slow
def test_no_path_of_this_machine_is_in_the_outputs(run_folder, first):
    for name, content in first[0].items():
        for trace in (run_folder.parent, os.getcwd(), sys.prefix):
            assert str(trace).encode() not in content, (name, trace)


@pytest.mark.slow
def test_another_seed_changes_the_draws_only(run_folder, first, tmp_path):
    outputs, _ = analysed(
        run_folder, tmp_path / "out", "--seed", "2", cwd=tmp_path, env=surroundings(0)
    )
    one, other = (json.loads(found["result.json"]) for found in (first[0], outputs))
    assert one["routes"]["monte_carlo"] != other["routes"]["monte_carlo"]
    assert one["routes"]["posterior"] != other["routes"]["posterior"]
    assert one["routes"]["linear"] == other["routes"]["linear"]
    assert one["cutoffs"] == other["cutoffs"]


@pytest.mark.slow
def test_the_same_from_python(run_folder, first):
    import hdetermine
    from hdetermine.files.resultfile import result_json

    result = hdetermine.determine(hdetermine.read_run(run_folder), seed=1)
    assert result_json(result) == first[0]["result.json"]


@pytest.mark.slow
def test_a_class_is_the_same_with_any_number_of_processes(run_folder, tmp_path):
    for number, which in enumerate(("one", "other")):
        top = tmp_path / which / "class"
        for group in ("alpha", "beta"):
            shutil.copytree(run_folder, top / group)
        (top / "claims.csv").write_text("group,h [J s],u\nalpha,6.55e-34,0.04e-34\n", "utf-8")
        command = [sys.executable, "-m", "hdetermine", "check", "class", "-o", "out"]
        done = subprocess.run(
            [*command, "--jobs", str(number + 1), "--pdf"],
            cwd=top.parent,
            env=surroundings(number),
            capture_output=True,
            text=True,
        )
        assert done.returncode == 0, done.stderr
    one, other = (
        {
            path.relative_to(tmp_path / which): path.read_bytes()
            for path in sorted((tmp_path / which / "out").rglob("*"))
            if path.is_file()
        }
        for which in ("one", "other")
    )
    assert len(one) >= 8
    for path, content in one.items():
        assert other[path] == content, path
