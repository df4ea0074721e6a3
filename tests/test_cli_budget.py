"""hdetermine budget: terminal, files, what-if, bad input."""

import csv
import io
import json
import re
from dataclasses import replace
from pathlib import Path

import click.testing
import numpy as np
import pytest
from hand_model import make_model

from hdetermine import cli
from hdetermine.budget.planck import planck_budget
from hdetermine.budget.suppose import study
from hdetermine.cli.budget import command
from hdetermine.errors import InputError
from hdetermine.files.modelrecord import model_document
from hdetermine.report.budget_files import budget_files, markdown_text
from hdetermine.report.budget_tables import condensed, source_table
from hdetermine.report.latex import latex_text
from hdetermine.report.rows_budget import budget_rows

MODEL = make_model(4, scatter_seed=7)
DEMO = Path(__file__).resolve().parents[1] / "demo_runs" / "molybdenum_rocksalt"


def plain(value):
    if isinstance(value, dict):
        return {key: plain(item) for key, item in value.items()}
    if isinstance(value, list):
        return [plain(item) for item in value]
    if isinstance(value, np.generic):
        value = value.item()
    return None if isinstance(value, float) and not np.isfinite(value) else value


@pytest.fixture
def result(tmp_path):
    """A result.json that holds no more than the budget needs."""
    linear = {"diagnostics": {"model": plain(model_document(MODEL))}}
    document = {"schema": "hdetermine-result/1", "routes": {"linear": linear}}
    path = tmp_path / "result.json"
    path.write_text(json.dumps(document))
    return path


def call(*arguments):
    found = click.testing.CliRunner().invoke(command, [str(one) for one in arguments])
    if found.exception is not None and not isinstance(found.exception, SystemExit):
        raise found.exception
    assert found.exit_code == 0, found.output
    return found.output


def test_prints_and_writes_everything(result):
    output = call(result)
    budget = planck_budget(MODEL)
    assert output.startswith("h = (6.")
    for words in ("voltage gain", "counting statistics (4 scans)", "rectangular", "share / %",
                  "With perfect counting statistics U stays at", "is limited by",
                  "common to all voltages"):  # fmt: skip
        assert words in output
    folder = result.parent / "budget"
    assert {path.name for path in folder.iterdir()} >= {
        "budget.csv", "budget.json", "budget.tex", "budget.md",
    }  # fmt: skip
    rows = list(csv.DictReader(io.StringIO((folder / "budget.csv").read_text("utf-8"))))
    assert len(rows) == len(budget.rows)
    assert sum(float(row["variance_share"]) for row in rows) == pytest.approx(1.0)
    document = json.loads((folder / "budget.json").read_text())
    assert document["expanded_uncertainty_J_s"] == pytest.approx(budget.expanded_uncertainty)
    contributions = [row["contribution_J_s"] for row in document["rows"]]
    position = {row["quantity"]: i for i, row in enumerate(document["rows"])}
    variance = sum(c * c for c in contributions)
    for pair in document["correlations"]:
        i, j = (position[name] for name in pair["between"])
        variance += 2.0 * pair["coefficient"] * contributions[i] * contributions[j]
    # The file alone gives the combined uncertainty back.
    assert variance**0.5 == pytest.approx(document["standard_uncertainty_J_s"], rel=1e-12)


def test_folder_with_a_result_and_chosen_formats(result, tmp_path):
    out = tmp_path / "mine"
    call(result.parent, "-o", out, "--format", "md", "--format", "csv")
    assert {path.name for path in out.iterdir() if not path.name.startswith(".")} == {
        "budget.md", "budget.csv",
    }  # fmt: skip


def test_what_if_shows_new_beside_old(result):
    output = call(result, "--suppose", "tube.voltage.gain.u=0.001",
                  "--suppose", "scan.*.counting_deg.u=0")  # fmt: skip
    assert "as supposed" in output
    supposed = study(MODEL, ["tube.voltage.gain.u=0.001", "scan.*.counting_deg.u=0"]).supposed
    document = json.loads((result.parent / "budget" / "budget.json").read_text())
    assert document["what_if"]["expanded_uncertainty_J_s"] == pytest.approx(
        supposed.after.expanded_uncertainty
    )
    assert [one["quantity"] for one in document["what_if"]["suppositions"]] == [
        "tube.voltage.gain", "scan.*.counting_deg",
    ]  # fmt: skip
    ratio = supposed.after.expanded_uncertainty / supposed.before.expanded_uncertainty
    assert f"{100 * (1 - ratio):.1f}" in output


def test_each_scan_lists_all(result):
    assert call(result, "--each-scan").count("counting statistics") >= 4


def test_a_result_of_a_stranger_does_not_steer_the_terminal(result):
    """Units were printed as they stand in the file."""
    document = json.loads(result.read_text())
    for quantity in document["routes"]["linear"]["diagnostics"]["model"]["inputs"]:
        for field in ("symbol", "unit", "source", "note"):
            quantity[field] += "\x1b]0;x\x07\u202e"
    result.write_text(json.dumps(document))
    output = call(result, "--each-scan")
    assert "kV]0;x" in output
    assert not {"\x1b", "\x07", "\u202e"} & set(output)


def test_narrow_terminals_leave_columns_out(result, monkeypatch):
    import rich.console

    monkeypatch.setattr(rich.console.Console, "is_terminal", property(lambda self: True))
    monkeypatch.setenv("COLUMNS", "80")
    monkeypatch.setenv("TERM", "dumb")
    output = call(result)
    assert "distribution" not in output
    assert max(len(line) for line in output.splitlines()[:-1]) <= 80


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["--suppose", "tube.voltage.gian.u=1"], "the nearest is tube.voltage.gain"),
        (["--suppose", "tube.voltage.gain.u=1", "--suppose", "tube.voltage.gain.half_width=1"],
         "two forms of uncertainty"),
        (["--suppose", "tube.voltage.gain.half_width=-1"], "not a positive number"),
        (["--suppose", "crystal.spacing_pm.u=100"], "reaches d <= 0"),
    ],
)  # fmt: skip
def test_bad_suppositions_end_with_status_2_and_write_nothing(result, arguments, words, capsys):
    with pytest.raises(SystemExit) as end:
        cli.main(["budget", str(result), *arguments])
    assert end.value.code == 2
    told = capsys.readouterr()
    assert words in told.err
    assert told.err.count("\n") == 1
    assert told.out == ""
    assert not (result.parent / "budget").exists()


def test_a_link_in_the_place_of_the_outputs_is_not_followed(result, tmp_path):
    (tmp_path / "run").mkdir()
    (tmp_path / "run" / "budget").symlink_to(tmp_path / "outside")
    beside = result.rename(tmp_path / "run" / "result.json")
    with pytest.raises(InputError, match="link that leads out of the folder"):
        call(beside)
    assert not (tmp_path / "outside").exists()
    assert "Written to" in call(beside, "-o", tmp_path / "outside")


def test_a_folder_without_anything(tmp_path):
    with pytest.raises(InputError, match=r"holds neither run\.toml nor result\.json"):
        call(tmp_path)


def test_a_missing_file(tmp_path):
    with pytest.raises(InputError, match="cannot be read"):
        call(tmp_path / "nothing.json")


def test_a_run_folder_is_analysed_first(tmp_path):
    output = call(DEMO, "-o", tmp_path / "out", "--format", "json")
    document = json.loads((tmp_path / "out" / "budget.json").read_text())
    assert sum(row["variance_share"] for row in document["rows"]) == pytest.approx(1.0)
    assert "is limited by" in output
    assert not (DEMO / "budget").exists()


def test_condensed_table_keeps_the_sums():
    budget = planck_budget(MODEL)
    full = budget_rows(budget)
    short = condensed(full, budget)
    assert len(short.rows) == len(full.rows) - 4 * 4 + 4
    share = {False: 0.0, True: 0.0}
    for one, which in ((full, False), (short, True)):
        share[which] = sum(float(row[-1].text.replace("−", "-")) for row in one.rows)
    assert share[True] == pytest.approx(share[False], abs=0.1)
    single = make_model(1)
    table = budget_rows(planck_budget(single))
    assert condensed(table, planck_budget(single)) is table


def test_source_table_sums_to_hundred():
    table = source_table(planck_budget(MODEL))
    total = sum(float(row[-1].text.replace("−", "-")) for row in table.rows)
    assert total == pytest.approx(100.0, abs=0.5)
    assert table.rows[0][0].text == "voltage gain"


NASTY = "a|b_%$#{}\\`<b>\x1b[31m=1+1"


def test_strangers_text_is_data_everywhere():
    inputs = tuple(
        replace(q, name=q.name.replace("scan.v0.", f"scan.{NASTY}."), source="=cmd|' /C calc'!A0")
        for q in MODEL.inputs
    )
    model = replace(MODEL, inputs=inputs, scans=(NASTY, *MODEL.scans[1:]))
    files = {name: content.decode("utf-8") for name, content in
             budget_files(study(model), ("csv", "json", "tex", "md")).items()}  # fmt: skip
    assert all("\x1b" not in content for content in files.values() if content)
    cells = [cell for row in csv.reader(io.StringIO(files["budget.csv"])) for cell in row]
    assert not any(cell.startswith(("=", "+", "@")) for cell in cells)
    assert "<b>" not in files["budget.md"]
    assert "\\textbackslash{}" in files["budget.tex"]
    table = [line for line in files["budget.md"].splitlines() if line.startswith("|")]
    columns = {len(re.findall(r"(?<!\\)\|", line)) for line in table}
    assert columns <= {4 + 1, 11 + 1, 5 + 1}


def test_latex():
    content = budget_files(study(MODEL), ["tex"])["budget.tex"].decode()
    for word in (r"\toprule", r"\midrule", r"\bottomrule", r"\begin{longtable}"):
        assert word in content
    assert content.count(r"\begin{longtable}") == content.count(r"\end{longtable}") == 3
    # Nothing but ASCII is left: any engine sets it.
    assert content.isascii(), sorted({one for one in content if not one.isascii()})
    body = [line for line in content.splitlines() if not line.startswith("%")]
    for line in body:
        assert line.count("$") % 2 == 0
        assert line.count("{") == line.count("}")


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("2.1 × 10⁻³⁶", r"2.1 $\times$ 10$^{-36}$"),
        ("−0.5 %", r"$-$0.5 \%"),
        ("a_b & 100%", r"a\_b \& 100\%"),
        ("\\input{x}", r"\textbackslash{}input\{x\}"),
        ("δθ", r"$\delta$$\theta$"),
        ("E₀", "E$_{0}$"),
        ("x\nfoo", "x foo"),
        ("~^", r"\textasciitilde{}\textasciicircum{}"),
    ],
)
def test_latex_text(text, expected):
    assert latex_text(text) == expected


def test_markdown_text():
    assert markdown_text("a|b*c_<i>&") == r"a\|b\*c\_&lt;i&gt;&amp;"
