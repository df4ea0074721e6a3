"""Drafted run sheets: what is found, what is marked, and that they can be read once filled in."""

from __future__ import annotations

import io
import re
import tomllib
from pathlib import Path

import openpyxl
import pytest
from click.testing import CliRunner
from sheet_text import refused

from hdetermine.cli.draft import command
from hdetermine.errors import InputError
from hdetermine.files import limits
from hdetermine.files.draft import draft_sheet
from hdetermine.files.runsheet import read_run

COUNTS = "theta/deg;counts\n5.0;3\n5.1;1\n5.2;12\n"
FILLED = {
    "anode": '"Cu"',
    "material": '"LiF"',
    "reflection": '"200"',
    "dwell_s": "5.0",
    "tube_voltage_kV": "33.0",
    "decimal": '"comma"',
    "abscissa_unit": '"pm"',
}


def folder_of(path: Path, **files: str | bytes) -> Path:
    path.mkdir()
    for name, content in files.items():
        data = content if isinstance(content, bytes) else content.encode("utf-8")
        (path / name).write_bytes(data)
    return path


def fill_in(folder: Path) -> str:
    """Draft, fill in every gap, and write the sheet."""
    text = draft_sheet(folder)
    filled = re.sub(
        r'^(\w+) = "\?"   # FILL IN.*$', lambda m: f"{m[1]} = {FILLED[m[1]]}", text, flags=re.M
    )
    (folder / "run.toml").write_text(filled, encoding="utf-8")
    return text


def line_of(text: str, key: str) -> str:
    return next(line for line in text.splitlines() if line.startswith(f"{key} ="))


def test_one_file_a_voltage(tmp_path):
    folder = folder_of(
        tmp_path / "mo_nacl",
        **{"scan_25,5 kV.csv": COUNTS, "scan_20kV.csv": COUNTS, "lines 35 kV.txt": COUNTS},
    )
    text = fill_in(folder)
    assert 'anode = "Mo"   # GUESS' in text
    assert 'material = "NaCl"   # GUESS' in text
    assert 'reflection = "200"   # GUESS' in text
    assert 'dwell_s = "?"   # FILL IN' in text
    run = read_run(folder)
    assert [scan.tube_voltage_kV for scan in run.scans] == [20.0, 25.5, 35.0]
    assert [scan.edge for scan in run.scans] == [True, True, False]
    assert all(scan.dwell_s[0] == 5.0 for scan in run.scans)
    # defaults that are shown are the defaults that apply
    shown = tomllib.loads(
        "".join(
            re.sub(r"   # default.*", "", line[2:]) + "\n"
            for line in text.splitlines()
            if line.startswith("# ") and "# default" in line
        )
    )
    assert len(shown) > 5
    for quantity in run.apparatus.quantities():
        key = quantity.name.rpartition(".")[2]
        if key in shown:
            assert quantity.value == shown[key]["value"], key


def test_unfilled_sheets_are_refused_and_say_why(tmp_path):
    folder = folder_of(tmp_path / "run", **{"a.csv": COUNTS})
    text = draft_sheet(folder)
    for key in ("anode", "material", "reflection", "dwell_s", "tube_voltage_kV"):
        assert line_of(text, key).startswith(f'{key} = "?"   # FILL IN')
        partly = re.sub(
            r'^(\w+) = "\?".*$',
            lambda m, keep=key: m[0] if m[1] == keep else f"{m[1]} = {FILLED[m[1]]}",
            text,
            flags=re.M,
        )
        (folder / "run.toml").write_text(partly)
        sentence = refused(lambda: read_run(folder))
        assert key in sentence
        assert "put the true value" in sentence


def test_wide_table(tmp_path):
    table = "Winkel;20 kV;25,5 kV\n°;;\n5,0;1;4\n5,1;2;5\n5,2;3;6\n"
    folder = folder_of(tmp_path / "run", **{"all.csv": table})
    text = fill_in(folder)
    assert 'abscissa = "theta"   # GUESS' in text
    assert 'ordinate = "counts"   # GUESS' in text
    first, second = read_run(folder).scans
    assert (first.name, first.tube_voltage_kV, list(first.counts)) == ("all:20 kV", 20.0, [1, 2, 3])
    assert (second.name, list(second.counts)) == ("all:25,5 kV", [4, 5, 6])


def test_bare_voltages_as_headers(tmp_path):
    folder = folder_of(tmp_path / "run", **{"all.csv": "theta;20;22.5;25\n5;1;4;2\n6;2;5;3\n"})
    text = fill_in(folder)
    assert "tube_voltage_kV = 22.5   # GUESS: the column's header, a bare number" in text
    assert [scan.tube_voltage_kV for scan in read_run(folder).scans] == [20.0, 22.5, 25.0]


def test_no_header_at_all(tmp_path):
    folder = folder_of(tmp_path / "run", **{"U=20.txt": "5.0 12.5\n5.1 13\n5.2 15\n"})
    text = fill_in(folder)
    assert 'abscissa = "theta"   # GUESS: no header says so' in text
    assert 'ordinate = "rate"   # GUESS: not whole' in text
    assert list(read_run(folder).scans[0].counts) == [62, 65, 75]


def test_gaps_that_one_line_settles(tmp_path):
    folder = folder_of(
        tmp_path / "run",
        **{
            "20kV.csv": "theta;rate\n5;1,234\n6;2,345\n",
            "25kV.csv": "lambda;counts\n35.1;4\n36.1;2\n",
        },
    )
    text = fill_in(folder)
    assert 'decimal = "?"   # FILL IN: "point" or "comma"' in text
    assert 'abscissa_unit = "?"' in text
    assert [list(scan.counts) for scan in read_run(folder).scans] == [[6, 12], [4, 2]]


def test_dwell_and_current_from_names_and_titles(tmp_path):
    folder = folder_of(
        tmp_path / "run",
        **{"20kV_3s.csv": COUNTS, "25kV.csv": "# 0.8 mA, 10 s per step\n" + COUNTS},
    )
    text = fill_in(folder)
    assert "dwell_s = 3.0   # GUESS: the file's name" in text
    assert "dwell_s = 10.0   # GUESS: a line of the file" in text
    first, second = read_run(folder).scans
    assert (first.dwell_s[0], second.dwell_s[0]) == (3.0, 10.0)
    assert second.emission_current_mA == 0.8


def test_dwell_column_needs_no_line(tmp_path):
    table = "theta;counts;dwell\n5;3;2\n6;4;2\n"
    folder = folder_of(tmp_path / "run", **{"20kV.csv": table})
    assert "dwell_s" not in fill_in(folder)
    assert read_run(folder).scans[0].dwell_s[0] == 2.0


def test_spreadsheet_with_a_sheet_a_voltage(tmp_path):
    book = openpyxl.Workbook()
    book.active.title = "20 kV"
    for name in ("20 kV", "25 kV"):
        sheet = book[name] if name in book.sheetnames else book.create_sheet(name)
        for row in (["theta / deg", "counts"], [5.0, 3], [5.1, 4]):
            sheet.append(row)
    stream = io.BytesIO()
    book.save(stream)
    folder = folder_of(tmp_path / "run", **{"all.xlsx": stream.getvalue()})
    text = fill_in(folder)
    assert 'sheet = "20 kV"' in text
    assert [scan.name for scan in read_run(folder).scans] == ["all:20 kV", "all:25 kV"]


def test_files_of_one_stem_get_names_of_their_own(tmp_path):
    folder = folder_of(tmp_path / "run", **{"20kV.csv": COUNTS, "20kV.txt": COUNTS})
    fill_in(folder)
    assert [scan.name for scan in read_run(folder).scans] == ["20kV (1)", "20kV (2)"]


def test_what_is_no_scan_is_named(tmp_path):
    folder = folder_of(
        tmp_path / "run",
        **{
            "20kV.csv": COUNTS,
            "picture.csv": b"\x89PNG\r\n\x1a\n123",
            "notes.txt": "nothing but words",
            "README.txt": "5;3\n6;4\n",
            ".hidden.csv": COUNTS,
            "claims.csv": COUNTS,
        },
    )
    text = draft_sheet(folder)
    assert "# picture.csv: this is a picture" in text
    assert "# notes.txt: there are no rows of numbers" in text
    assert text.count("[[scan]]") == 1


def test_trouble_in_a_table_is_told(tmp_path):
    folder = folder_of(tmp_path / "run", **{"20kV.csv": "theta;counts\n5;3\n5;4\n6;7\n"})
    assert "# CHECK: 20kV.csv, line 3, column 1" in draft_sheet(folder)


def test_hostile_names_and_titles(tmp_path):
    folder = folder_of(
        tmp_path / "run",
        **{
            'a" b = 3 20kV.csv': COUNTS,
            "# x = 1 25kV.csv": "# \x1b]0;x\x07 30 kV\u202e\n" + COUNTS,
            "\x1b[31m.csv": COUNTS,
            "=cmd 30kV.csv": COUNTS,
        },
    )
    text = fill_in(folder)
    assert "\x1b" not in text
    assert "\u202e" not in text
    assert "invisible characters" in text
    content = tomllib.loads((folder / "run.toml").read_text())
    assert {scan["file"] for scan in content["scan"]} == {
        'a" b = 3 20kV.csv',
        "# x = 1 25kV.csv",
        "=cmd 30kV.csv",
    }
    assert len(read_run(folder).scans) == 3


def test_links_out_of_the_folder_are_left_out(tmp_path):
    (tmp_path / "secret 30kV.csv").write_text(COUNTS)
    folder = folder_of(tmp_path / "run", **{"20kV.csv": COUNTS})
    (folder / "30kV.csv").symlink_to("../secret 30kV.csv")
    text = draft_sheet(folder)
    assert text.count("[[scan]]") == 1
    assert "leads out of the run folder" in text


@pytest.mark.parametrize(
    ("files", "word"),
    [
        ({}, "no scan table"),
        ({"a.csv": "x"}, "first trouble"),
        ({"a.doc": COUNTS}, "no scan table"),
    ],
)
def test_nothing_to_draft_from(tmp_path, files, word):
    folder = folder_of(tmp_path / "run", **files)
    assert word in refused(lambda: draft_sheet(folder))


def test_folders_that_are_none(tmp_path, monkeypatch):
    assert "no such folder" in refused(lambda: draft_sheet(tmp_path / "nowhere"))
    (tmp_path / "file").write_text("x")
    assert "name a folder" in refused(lambda: draft_sheet(tmp_path / "file"))
    folder = folder_of(tmp_path / "run", **{"a.csv": COUNTS, "b.csv": COUNTS})
    monkeypatch.setattr("hdetermine.files.findings.MAX_FOLDER_ENTRIES", 1)
    assert "entries of a folder" in refused(lambda: draft_sheet(folder))
    assert limits.MAX_FOLDER_ENTRIES > 1000


def test_command(tmp_path):
    folder = folder_of(tmp_path / "run", **{"20kV.csv": COUNTS})
    printed = CliRunner().invoke(command, [str(folder), "--print"])
    assert printed.exit_code == 0
    assert printed.output == draft_sheet(folder)
    assert not (folder / "run.toml").exists()
    written = CliRunner().invoke(command, [str(folder)])
    assert written.exit_code == 0
    assert "1 scans, 2 guesses to check, 4 lines to fill in" in written.output
    assert (folder / "run.toml").read_text() == printed.output
    (folder / "run.toml").write_text("mine")
    kept = CliRunner().invoke(command, [str(folder)])
    assert isinstance(kept.exception, InputError)
    assert "--force" in str(kept.exception)
    assert (folder / "run.toml").read_text() == "mine"
    assert CliRunner().invoke(command, [str(folder), "--force"]).exit_code == 0
    assert (folder / "run.toml").read_text() == printed.output
    assert sorted(p.name for p in folder.iterdir()) == ["20kV.csv", "run.toml"]
