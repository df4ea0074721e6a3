"""``hdetermine check`` as a command: the demo class, hostile classes, the same bytes again."""

from __future__ import annotations

import csv
import html
import io
import json
import re
import shutil
import signal
import subprocess
import sys
import zipfile
from concurrent.futures import ProcessPoolExecutor
from pathlib import Path

import openpyxl
import pytest
from click.testing import CliRunner
from closure.demo_class import make_files

from hdetermine.classcheck.groupcheck import GroupTask
from hdetermine.classcheck.groups import Group
from hdetermine.classcheck.workers import check_groups
from hdetermine.cli import root
from hdetermine.errors import InputError
from hdetermine.files.shipped import shipped_folder

FILES = {"class.html", "class.csv", "class.xlsx", "class.json", "feedback"}
HOSTILE = ["=HYPERLINK(1)", "<img src=x onerror=alert(1)>", "n" * 200, "$x_$", "a\x1b]0;b\x07"]


def run(*arguments):
    return CliRunner().invoke(root, ["check", *map(str, arguments)], standalone_mode=False)


@pytest.fixture(scope="module")
def demo(tmp_path_factory):
    top = tmp_path_factory.mktemp("class") / "class_of_twelve"
    shutil.copytree(shipped_folder("demo_runs") / "class_of_twelve", top)
    out = top.parent / "out"
    result = run(top, "-o", out, "--jobs", 2)
    assert result.exception is None, result.exception
    return top, out, result.output


def groups_of(out):
    return {one["group"]: one for one in json.loads((out / "class.json").read_text())["groups"]}


def test_demo_verdicts_are_those_of_the_truth_table(demo):
    top, out, output = demo
    found = groups_of(out)
    with (top / "truth_table.csv").open() as stream:
        truth = list(csv.DictReader(stream))
    assert len(truth) == len(found) == 12
    for row in truth:
        one = found[row["group"]]
        assert one["verdict"] == row["verdict"], row["group"]
        first = "+".join(one["slips"][0]["codes"]) if one["slips"] else ""
        assert first == row["first_slip"], row["group"]
        alarms = {remark["title"] for remark in one["screening"] if remark["is_alarm"]}
        assert alarms == ({row["screening"]} if row["screening"] else set()), row["group"]
        assert row["group"] in output
    assert "twelve" in found["pine"]["data_fault"]
    assert found["hazel"]["claim"]["uncertainty_ratio"] < 1.0 / 3.0


def test_demo_files_are_what_the_script_makes():
    folder = shipped_folder("demo_runs") / "class_of_twelve"
    made = make_files()
    assert {p.relative_to(folder).as_posix() for p in folder.rglob("*") if p.is_file()} == set(made)
    for name, content in made.items():
        assert (folder / name).read_bytes() == content, name


def test_outputs_agree_with_each_other(demo):
    _, out, _ = demo
    assert {path.name for path in out.iterdir()} == FILES
    rows = list(csv.DictReader(io.StringIO((out / "class.csv").read_text())))
    sheet = openpyxl.load_workbook(out / "class.xlsx").active
    table = list(sheet.iter_rows(values_only=True))
    found = groups_of(out)
    assert [row["group"] for row in rows] == [line[0] for line in table[1:]] == list(found)
    for row in rows:
        reanalysis = found[row["group"]]["reanalysis"]
        if reanalysis:
            assert float(row["h_data_J_s"]) == reanalysis["planck_J_s"]
        assert (out / row["feedback"]).is_file()
    with zipfile.ZipFile(out / "class.xlsx") as archive:
        assert {info.date_time[0] for info in archive.infolist()} == {1980}


def test_codes_in_place_of_names_everywhere(demo, tmp_path):
    top, _, _ = demo
    result = run(top, "-o", tmp_path, "--anonymise", "--seed", 7, "--pdf")
    assert result.exception is None
    names = [path.name for path in top.iterdir() if path.is_dir()] + ["rowan", "class_of_twelve"]
    for path in [*tmp_path.rglob("*")]:
        assert not any(name in path.name for name in names)
        if path.suffix in (".html", ".csv", ".json"):
            text = path.read_text().casefold()
            assert [name for name in names if name in text] == [], path
    assert not any(name in result.output for name in names)
    assert json.loads((tmp_path / "class.json").read_text())["provenance"]["seed"] is None


def feedback_text(out, group):
    """Text of a page of feedback, without markup and with plain blanks."""
    page = (out / "feedback" / f"{group}.html").read_text()
    bare = re.sub(r"<(style|script)>.*?</\1>|<[^>]+>", " ", page, flags=re.S)
    return " ".join(html.unescape(bare).split())


def test_a_page_that_is_handed_back_named_the_other_group(demo):
    _, out, _ = demo
    found = groups_of(out)
    for group in found:
        text = feedback_text(out, group)
        assert [name for name in found if name != group and re.search(rf"\b{name}\b", text)] == []
    rows = csv.DictReader(io.StringIO((out / "class.csv").read_text()))
    screening = {row["group"]: row["screening"] for row in rows}
    assert screening["alder"] == "identical counts (scan 4 (29 kV), as in oak)"
    assert screening["oak"] == "identical counts (scan 4 (29 kV), as in alder)"


def test_claimed_cutoffs_that_do_not_give_h_left_open_what_they_give(demo):
    _, out, _ = demo
    rowan = groups_of(out)["rowan"]
    products = [
        line["claimed_wavelength_pm"] * line["tube_voltage_kV"] for line in rowan["cutoffs"]
    ]
    expected = sum(products) / len(products) * 1e-9 * 1.602176634e-19 / 299792458.0
    assert rowan["planck_of_claimed_cutoffs_J_s"] / expected == pytest.approx(1.0, abs=1e-9)
    text = feedback_text(out, "rowan")
    assert f"They give h = {expected * 1e34:.3f} × 10⁻³⁴ J s." in text
    assert "λ from data" not in text  # no columns of dashes


def test_pages_without_usable_counts_said_that_they_were_analysed(demo):
    _, out, _ = demo
    assert "analysed again" in feedback_text(out, "birch")
    for group in ("pine", "rowan"):
        assert "analysed again" not in feedback_text(out, group)


def test_a_claim_in_electronvolts_was_shown_in_joules_only(demo):
    _, out, _ = demo
    assert "The claim of 4.152 × 10⁻¹⁵ eV s is h = (6.652 ± 0.099)" in feedback_text(out, "birch")
    assert "The claim is h = (6.581 ± 0.099)" in feedback_text(out, "alder")


def test_two_uncertainties_stood_side_by_side_without_saying_which(demo):
    _, out, _ = demo
    text = feedback_text(out, "alder")
    assert "J s, with its expanded uncertainty; it agrees with the SI value." in text
    assert "J s, with its standard uncertainty: 1.27 % below" in text
    page = (out / "class.html").read_text()
    assert page.count("± U") == page.count("± u") == 13  # the heading, and a label in each row


def test_two_slips_together_were_called_one(demo):
    _, out, _ = demo
    text = feedback_text(out, "larch")
    assert "Two slips of the catalogue together would produce these numbers." in text
    assert "Both together give this number" in text
    page = (out / "class.html").read_text()
    assert "eV\N{NO-BREAK SPACE}s against J\N{NO-BREAK SPACE}s" in page
    assert "One slip of the catalogue would produce these numbers." in feedback_text(out, "cedar")


def test_alarms_of_the_screening_were_missing_from_the_summaries(demo):
    _, out, _ = demo
    page = (out / "class.html").read_text()
    assert "<strong>3</strong> <span>with counts to look at again" in page
    assert "asks for a second look" in feedback_text(out, "maple")
    assert "asks for a second look" not in feedback_text(out, "birch")


def small_class(top, names):
    """A class of broken groups: quick, for nothing is analysed."""
    for name in names:
        (top / name).mkdir(parents=True)
        (top / name / "run.toml").write_text("schema = 1\n")
    return top


def test_hostile_names_stay_inside_and_inert(tmp_path):
    top = small_class(tmp_path / "class", HOSTILE)
    (top / "claims.csv").write_text(
        'group,h [J s]\n"../../x",6.6e-34\n"=cmd|x",6.6e-34\n<script>,6.6e-34\n'
    )
    before = set(tmp_path.rglob("*"))
    out = tmp_path / "out"
    result = run(top, "-o", out)
    assert result.exception is None
    new = set(tmp_path.rglob("*")) - before
    assert all(path == out or out in path.parents for path in new)
    assert "\x1b" not in result.output
    for row in csv.reader(io.StringIO((out / "class.csv").read_text())):
        assert not any(cell.startswith(("=", "+", "@")) for cell in row)
    for line in openpyxl.load_workbook(out / "class.xlsx").active.iter_rows():
        assert all(cell.data_type != "f" for cell in line)
    for page in [out / "class.html", *out.glob("feedback/*.html")]:
        text = page.read_text()
        assert "<img src=x" not in text
        assert "\x1b" not in text
        assert text.count("<script>") == (page.name == "class.html")


@pytest.mark.parametrize("far", ["1e299", "1e-299", "6.6(1)e200"])
def test_a_claim_of_1e299_ended_the_check_of_the_whole_class(tmp_path, far):
    top = small_class(tmp_path / "class", ["alder"])
    (top / "claims.csv").write_text(
        f"group,h [J s],u,wavelength 20 kV [pm]\nbirch,{far},,\ncedar,6.6e-34,1e299,\n"
        "elder,6.6e-34,1e-36,1e299\nhazel,6.6e-34,0,62\nlarch,1e99,1e-99,\n"
        "maple,6.6e-34,,1e-99\n"
    )
    assert run(top, "-o", tmp_path / "out").exception is None
    found = groups_of(tmp_path / "out")
    for group in ("birch", "cedar", "elder", "larch", "maple"):
        assert found[group]["verdict"] == "nothing"
        assert "check its exponent" in found[group]["claim_fault"]
    assert not found["hazel"]["claim_fault"]


def test_wavelengths_in_metres_ended_the_analysis_unexpectedly(tmp_path):
    top = small_class(tmp_path / "class", ["alder"])
    (top / "claims.csv").write_text(
        "group,h [J s],u,wavelength 20 kV [pm],wavelength 30 kV [pm]\n"
        "birch,6.6e-34,1e-36,6.1e-11,4.1e-11\ncedar,6.6e-34,1e-36,0.061,0.041\n"
    )
    assert run(top, "-o", tmp_path / "out").exception is None
    found = groups_of(tmp_path / "out")
    for group in ("birch", "cedar"):
        assert "unexpectedly" not in found[group]["data_fault"]
        assert [slip["codes"] for slip in found[group]["slips"]] == [["power_of_ten"]]


def test_pages_of_groups_that_are_gone_go(tmp_path):
    top = small_class(tmp_path / "class", ["alder", "birch"])
    out = tmp_path / "out"
    assert run(top, "-o", out).exception is None
    (out / "feedback" / "mine.html").write_text("kept")
    shutil.rmtree(top / "birch")
    assert run(top, "-o", out).exception is None
    assert {p.name for p in (out / "feedback").iterdir()} == {"alder.html", "mine.html"}


def test_default_output_is_not_taken_for_a_group(tmp_path):
    top = small_class(tmp_path / "class", ["alder"])
    for _ in range(2):
        assert run(top).exception is None
    assert list(groups_of(top / "class_check")) == ["alder"]


@pytest.mark.parametrize(
    ("prepare", "words"),
    [
        (lambda top: None, "no such folder"),
        (lambda top: top.mkdir(), "no group"),
        (lambda top: top.write_text("x"), "no such folder"),
        (lambda top: small_class(top, ["a"]) and (top / "claims.csv").write_text("x\n"), "group"),
    ],
)
def test_bad_classes_are_refused_in_one_sentence(tmp_path, prepare, words):
    prepare(tmp_path / "class")
    result = run(tmp_path / "class", "-o", tmp_path / "out")
    assert isinstance(result.exception, InputError)
    assert words in str(result.exception)
    assert not (tmp_path / "out").exists()


def dying_worker(task):
    import os

    if task.number == 1:
        os._exit(3)
    if task.number == 2:
        raise RuntimeError("of no use")
    from hdetermine.classcheck.finding import GroupFinding

    return GroupFinding(name=task.group.name)


def test_workers_start_whole_before_an_interruption_is_obeyed(monkeypatch):
    """One left in the middle of its start printed a traceback (found by the kill campaign)."""
    started = []
    submit = ProcessPoolExecutor.submit

    def submit_interrupted(pool, *arguments):
        signal.raise_signal(signal.SIGINT)
        future = submit(pool, *arguments)
        blocked = signal.pthread_sigmask(signal.SIG_BLOCK, set())
        started.append(signal.SIGINT in blocked)
        return future

    monkeypatch.setattr(ProcessPoolExecutor, "submit", submit_interrupted)
    tasks = [GroupTask(i, Group(f"group {i}", None), 1) for i in range(2)]
    with pytest.raises(KeyboardInterrupt):
        check_groups(tasks, 2, lambda *_: None, dying_worker)
    assert started == [True], "started once, deaf to the interrupts of a terminal, then stopped"
    assert signal.SIGINT not in signal.pthread_sigmask(signal.SIG_BLOCK, set())


def test_a_worker_that_dies_takes_one_group_with_it():
    tasks = [GroupTask(i, Group(f"group {i}", None), 1) for i in range(4)]
    found = check_groups(tasks, 2, lambda *_: None, dying_worker)
    assert [one.name for one in found] == [f"group {i}" for i in range(4)]
    assert "process died" in found[1].data_fault
    assert "RuntimeError" in found[2].data_fault
    assert found[0].data_fault == found[3].data_fault == ""


def test_help_comes_without_the_heavy_libraries():
    code = (
        "import sys; from click.testing import CliRunner; from hdetermine.cli import root; "
        "r = CliRunner().invoke(root, ['check', '--help']); assert r.exit_code == 0, r.output; "
        "print([m for m in ('numpy', 'scipy', 'matplotlib', 'openpyxl') if m in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True,
                          cwd=Path(__file__).parents[1])  # fmt: skip
    assert done.stdout.strip() == "[]"
