"""Scan tables as people have them: separators, encodings, headers, and one sentence a fault."""

from __future__ import annotations

import numpy as np
import pytest
from sheet_text import refusal, scan_of

from hdetermine.files import limits

# --- text in its many forms -------------------------------------------------------------------

PLAIN = [(5.0, 3), (5.1, 0), (5.2, 12)]

TEXTS = {
    "csv": "theta_deg,counts\n5.0,3\n5.1,0\n5.2,12\n",
    "no end of line": "theta_deg,counts\n5.0,3\n5.1,0\n5.2,12",
    "windows": "theta_deg,counts\r\n5.0,3\r\n5.1,0\r\n5.2,12\r\n",
    "old mac": "theta_deg,counts\r5.0,3\r5.1,0\r5.2,12\r",
    "tabs": "theta\tcounts\n5.0\t3\n5.1\t0\n5.2\t12\n",
    "semicolons, decimal comma": "θ/°;Impulse\n5,0;3\n5,1;0\n5,2;12\n",
    "tabs, decimal comma": "Glanzwinkel\tImpulse\n5,0\t3\n5,1\t0\n5,2\t12\n",
    "blanks": "  theta   counts\n  5.0     3\n  5.1     0\n  5.2    12\n",
    "blanks, decimal comma": "theta counts\n5,0 3\n5,1 0\n5,2 12\n",
    "wide blanks in the header": "glancing angle   counts per step\n5.0  3\n5.1  0\n5.2  12\n",
    "bars": "theta|counts\n5.0|3\n5.1|0\n5.2|12\n",
    "comma and blank": "theta, counts\n5.0, 3\n5.1, 0\n5.2, 12\n",
    "quotes": '"theta, read","counts"\n"5.0","3"\n"5.1","0"\n"5.2","12"\n',
    "quoted decimal comma": '"theta","counts"\n"5,0","3"\n"5,1","0"\n"5,2","12"\n',
    "separator at the end": "theta;counts;\n5.0;3;\n5.1;0;\n5.2;12;\n",
    "separator at the end of the data only": "theta;counts\n5.0;3;\n5.1;0;\n5.2;12;\n",
    "empty column": "theta;;counts\n5.0;;3\n5.1;;0\n5.2;;12\n",
    "comments": "# bench 3\n# 20 kV\ntheta,counts\n5.0,3\n# pause\n5.1,0\n5.2,12\n# end\n",
    "header in a comment": "# theta counts\n5.0 3\n5.1 0\n5.2 12\n",
    "header in a comment with commas": "% theta / deg, counts\n5.0,3\n5.1,0\n5.2,12\n",
    "title above": "Bench 3, 12 March, 20 kV\n\ntheta;counts\n5.0;3\n5.1;0\n5.2;12\n",
    "title with separators": "Bench 3;\ntheta;counts\n5.0;3\n5.1;0\n5.2;12\n",
    "units in a second line": "theta;N\n°;counts\n5.0;3\n5.1;0\n5.2;12\n",
    "three header lines": "Lauf;Rohr\nWinkel θ;Impulse\nin Grad;je Schritt\n5,0;3\n5,1;0\n5,2;12\n",
    "run data above": "Rate;1\nAngle from;5\nU;20 kV\ntheta;counts\n5.0;3\n5.1;0\n5.2;12\n",
    "index and spread": "No.;theta;counts;error\n1;5.0;3;1.7\n2;5.1;0;1\n3;5.2;12;3.5\n",
    "exponents": "theta;counts\n5.0e0;3\n51E-1;0\n.52e1;1.2e1\n",
    "degree signs": "theta;counts\n5.0°;3\n5.1 °;0\n5.2°;12\n",
    "blank lines": "theta;counts\n\n5.0;3\n\n \n5.1;0\n5.2;12\n\n\n",
    "descending": "theta;counts\n5.2;12\n5.1;0\n5.0;3\n",
    "rows of nothing but separators": "theta;counts\n;\n5.0;3\n;;\n5.1;0\n5.2;12\n;\n",
    "blank cells at the ends": "theta;counts\n4.9;\n5.0;3\n5.1;0\n5.2;12\n5.3;\n",
    "end-of-file sign": "theta;counts\n5.0;3\n5.1;0\n5.2;12\n\x1a",
}  # fmt: skip


@pytest.mark.parametrize("text", TEXTS.values(), ids=TEXTS.keys())
def test_text_forms(tmp_path, text):
    scan = scan_of(tmp_path, text)
    assert list(zip(scan.reading_deg, scan.counts, strict=True)) == PLAIN


@pytest.mark.parametrize(
    "encoding",
    ["utf-8", "utf-8-sig", "utf-16", "utf-16-le", "utf-16-be", "latin-1", "cp1252"],
)
def test_encodings(tmp_path, encoding):
    data = "Glanzwinkel θ/°;Zählrate R\n"
    if encoding in ("latin-1", "cp1252"):
        data = "Glanzwinkel in °;Zählrate R\n"
    data += "5,0;0,3\n5,1;0\n5,2;1,2\n"
    scan = scan_of(tmp_path, data.encode(encoding))
    assert list(scan.counts) == [3, 0, 12]


# --- columns ----------------------------------------------------------------------------------


def test_wide_table(tmp_path):
    table = "theta;20 kV;25,5 kV\n°;counts;counts\n5,0;1;4\n5,1;2;5\n5,2;3;6\n"
    assert list(scan_of(tmp_path, table, 'column = "25,5 kV"\n').counts) == [4, 5, 6]
    assert scan_of(tmp_path, table, 'column = "25,5 KV"\n').name == "a:25,5 KV"
    assert list(scan_of(tmp_path, table, "column = 2\n").counts) == [1, 2, 3]
    # unnamed, the voltage in the header tells
    assert list(scan_of(tmp_path, table).counts) == [1, 2, 3]
    assert 'did you mean "25,5 kV counts"' in refusal(tmp_path, table, 'column = "25,5 kV coun"\n')
    assert "is the angle" in refusal(tmp_path, table, "column = 1\n")


def test_wide_table_with_shorter_columns(tmp_path):
    table = "theta,20 kV counts,25 kV counts\n5.0,1,\n5.1,2,5\n5.2,,6\n"
    scan = scan_of(tmp_path, table, "column = 2\n")
    assert list(scan.reading_deg) == [5.0, 5.1]
    scan = scan_of(tmp_path, table, "column = 3\n")
    assert list(scan.reading_deg) == [5.1, 5.2]


def test_two_theta_is_halved(tmp_path):
    scan = scan_of(tmp_path, "2theta;counts\n10.0;3\n10.2;0\n10.4;12\n")
    assert scan.reading_deg == pytest.approx([5.0, 5.1, 5.2])
    assert any("halved" in remark for remark in scan.remarks)
    told = scan_of(tmp_path, "angle;counts\n10.0;3\n10.2;0\n10.4;12\n", 'abscissa = "two_theta"\n')
    assert told.reading_deg == pytest.approx([5.0, 5.1, 5.2])


def test_both_angles_given(tmp_path):
    table = "2theta;theta;counts\n10.0;5.0;3\n10.2;5.1;0\n"
    assert scan_of(tmp_path, table).reading_deg == pytest.approx([5.0, 5.1])
    assert not scan_of(tmp_path, table).remarks


def test_a_bare_angle_is_taken_for_theta_and_said_so(tmp_path):
    scan = scan_of(tmp_path, "angle;counts\n5.0;3\n5.1;0\n")
    assert any("glancing angle" in remark for remark in scan.remarks)


@pytest.mark.parametrize(
    ("header", "factor"), [("lambda / pm", 1.0), ("wavelength_nm", 1e-3), ("λ in Å", 1e-2)]
)
def test_wavelengths_become_readings(tmp_path, header, factor):
    """LiF (200), d = 201.36 pm: 35.0961 pm stands at asin(35.0961/402.72) = 5.0 deg."""
    wavelengths = 402.72 * np.sin(np.radians([5.0, 5.1, 5.2])) * factor
    rows = "".join(f"{w:.8f};{n}\n" for w, n in zip(wavelengths, (3, 0, 12), strict=True))
    scan = scan_of(tmp_path, f"{header};counts\n{rows}")
    assert scan.reading_deg == pytest.approx([5.0, 5.1, 5.2], abs=1e-4)
    assert any("nominal spacing" in remark for remark in scan.remarks)


def test_radians(tmp_path):
    rows = "".join(f"{np.radians(a):.7f};{n}\n" for a, n in PLAIN)
    assert scan_of(tmp_path, f"theta/rad;counts\n{rows}").reading_deg == pytest.approx(
        [5.0, 5.1, 5.2], abs=1e-4
    )
    assert "abscissa_unit" in refusal(tmp_path, f"theta;counts\n{rows}")
    small = "theta;counts\n0.5;1\n0.6;2\n0.7;3\n"
    assert scan_of(tmp_path, small, 'abscissa_unit = "deg"\n').reading_deg[0] == 0.5


def test_no_header_asks(tmp_path):
    table = "5.0 3\n5.1 0\n5.2 12\n"
    assert "abscissa" in refusal(tmp_path, table)
    assert "ordinate" in refusal(tmp_path, table, 'abscissa = "theta"\n')
    scan = scan_of(tmp_path, table, 'abscissa = "theta"\nordinate = "counts"\n')
    assert list(zip(scan.reading_deg, scan.counts, strict=True)) == PLAIN


def test_dwell_column(tmp_path):
    table = "theta;counts;dwell\n5.0;3;10\n5.1;0;10\n5.2;12;20\n"
    scan = scan_of(tmp_path, table, dwell="")
    assert list(scan.dwell_s) == [10.0, 10.0, 20.0]
    assert "counting time" in refusal(tmp_path, table.replace("20\n", "0\n"), dwell="")


# --- faults -----------------------------------------------------------------------------------

FAULTS = {
    "empty": ("", ["a.csv", "empty"]),
    "blank": (" \n\n\t\n", ["a.csv", "empty"]),
    "header only": ("theta;counts\n", ["a.csv", "no rows of numbers"]),
    "words": ("This is\nnot a table\n", ["a.csv", "no rows of numbers"]),
    "a letter": ("Dear all,\nat 5 o'clock, 3 of us\n", ["a.csv", "no rows of numbers"]),
    "picture": (b"\x89PNG\r\n\x1a\n" + bytes(range(256)), ["a.csv", "a picture"]),
    "jpeg": (b"\xff\xd8\xff\xe0" + bytes(300), ["a.csv", "a picture"]),
    "pdf": (b"%PDF-1.7\n1 0 obj\n", ["a.csv", "a PDF"]),
    "old spreadsheet": (b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1" + bytes(600), ["old kind", "xlsx"]),
    "web page": (b"<!DOCTYPE html><table><tr><td>5</td></tr></table>", ["a web page"]),
    "binary": (bytes(range(1, 256)) * 4, ["a.csv", "neither text nor a spreadsheet"]),
    "zeros": (b"\0" * 400, ["a.csv", "neither text nor a spreadsheet"]),
    "archive": (b"PK\x03\x04" + bytes(100), ["a.csv", "damaged"]),
    "one column": ("counts\n5\n6\n7\n", ["only one column", "an angle"]),
    "short row": ("theta;counts\n5.0;3\n5.1\n5.2;4\n", ["line 3", "1 columns", "equally long"]),
    "long row": ("theta;counts\n5.0;3\n5.1;4;5\n5.2;4\n", ["line 3"]),
    "text in a row": ("theta;counts\n5.0;3\n5.1;x\n5.2;4\n", ["line 3, column 2", '"x"']),
    "text in the first row": ("theta;counts\n5.0;x\n5.1;3\n5.2;4\n", ["line 2, column 2", '"x"']),
    "broken first angle": ("theta;counts\n5.x;3\n5.1;3\n5.2;4\n", ["line 2, column 1", "5.x"]),
    "footer": ("theta;counts\n5.0;3\n5.1;4\nmean is 3.5 of all\n", ["line 4", "#"]),
    "nan": ("theta;counts\n5.0;3\n5.1;nan\n5.2;4\n", ["line 3, column 2", '"nan"']),
    "inf": ("theta;counts\n5.0;3\ninf;3\n5.2;4\n", ["line 3, column 1", '"inf"']),
    "1e308": ("theta;counts\n5.0;3\n5.1;1e308\n5.2;4\n", ["line 3, column 2", "any counter"]),
    "1e999": ("theta;counts\n5.0;3\n5.1;1e999\n5.2;4\n", ["line 3, column 2", "finite"]),
    "beyond 2^63": ("theta;counts\n5.0;9223372036854775809\n5.1;4\n", ["line 2", "any counter"]),
    "other digits": ("theta;counts\n٥;٣\n٦;٤\n", ["another script", "0 to 9"]),
    "other digits in one cell": ("theta;counts\n5.0;3\n5.1;٣\n", ["line 3, column 2"]),
    "negative": ("theta;counts\n5.0;3\n5.1;-1\n", ["line 3, column 2", "-1 is negative"]),
    "fractional": ("theta;counts\n5.0;3\n5.1;1.5\n", ["line 3", "1.5", "whole number", "rate"]),
    "negative rate": ("theta;cps\n5.0;3\n5.1;-1\n", ["line 3, column 2", "negative"]),
    "repeated angle": ("theta;counts\n5.0;3\n5.1;1\n5.1;2\n5.2;2\n", ["line 4", "repeats"]),
    "unordered": ("theta;counts\n5.0;3\n5.2;1\n5.1;2\n5.3;2\n", ["line 4", "out of order"]),
    "two sweeps": ("theta;counts\n5.0;3\n5.1;1\n5.0;2\n5.1;2\n", ["line 4", "out of order"]),
    "angle of 200": ("theta;counts\n5.0;3\n200;1\n", ["line 3, column 1", '"200"', "two_theta"]),
    "2theta of 200": ("2theta;counts\n5.0;3\n200;1\n", ["line 3, column 1", '"200"']),
    "missing count": ("theta;counts\n5.0;3\n5.1;\n5.2;4\n", ["line 3, column 2", "no number"]),
    "missing first angle": ("theta;counts\n;3\n5.1;3\n5.2;4\n", ["line 2, column 1", "no number"]),
    "missing angle": ("theta;counts\n5.0;3\n;3\n5.2;4\n", ["line 3, column 1", "no number"]),
    "unknown columns": ("a;b\n5.0;3\n5.1;4\n", ['"a", "b"', "abscissa", "run.toml"]),
    "two counts": ("theta;counts;counts\n5.0;3;4\n5.1;4;5\n", ["state column"]),
    "two angles": ("theta;theta;counts\n5.0;3;4\n5.1;4;5\n", ["abscissa_column"]),
    "intensity": ("theta;intensity\n5.0;3\n5.1;4\n", ['ordinate = "counts"']),
    "metres": ("wavelength / m;counts\n3.5e-11;3\n3.6e-11;4\n", ["in m", "pm", "abscissa_unit"]),
    "no unit": ("wavelength;counts\n35.1;3\n36.1;4\n", ["without a unit", "abscissa_unit"]),
    "too long wave": ("lambda/pm;counts\n35.1;3\n500;4\n", ["line 3", "500", "402.7 pm"]),
    "nm taken for pm": ("lambda/pm;counts\n0.0351;3\n0.0361;4\n", ["line 2", "abscissa_unit"]),
    "mrad": ("theta/mrad;counts\n35.1;3\n36.1;4\n", ["in mrad", "degrees"]),
    "long line": ("theta;counts\n5.0;3" + " " * 30_000 + "\n", ["line 2", "characters"]),
    "many columns": (";".join(["theta"] + ["counts"] * 400) + "\n" + ";".join(["5"] * 401) + "\n",
                     ["401 columns", "300"]),
    "unbalanced quote": ('theta;counts\n5.0;3\n"5.1;4\n5.2;5\n', ["line 3"]),
    "terminal escape": ("theta;counts\n5.0;3\n5.1;\x1b]0;x\x07\n5.2;3\n" + "#\n" * 50, ["line 3"]),
}  # fmt: skip


@pytest.mark.parametrize(("table", "named"), FAULTS.values(), ids=FAULTS.keys())
def test_faults_are_named_in_one_sentence(tmp_path, table, named):
    sentence = refusal(tmp_path, table)
    for word in named:
        assert word in sentence


MANY = {
    "lines": ("theta;counts\n" + "5;1\n" * limits.MAX_ROWS, "100001 lines"),
    "cells": ((";".join(["5"] * 250) + "\n") * 8001, "2000250 cells"),
    "counts": (f"theta;counts\n5;1\n6;{limits.MAX_COUNTS + 1}\n", "line 3, column 2"),
    "counts of a rate": (f"theta;cps\n5;1\n6;{limits.MAX_COUNTS // 10 + 1}\n", "any counter"),
}


@pytest.mark.parametrize(("table", "words"), MANY.values(), ids=MANY)
def test_more_than_is_read(tmp_path, table, words):
    assert words in refusal(tmp_path, table)


def test_table_too_large(tmp_path, monkeypatch):
    assert "larger than" in refusal(tmp_path, b"5 3\n" * (limits.MAX_TABLE_BYTES // 4 + 1))
    rows = "".join(f"{i / 1000:.3f};1\n" for i in range(1, limits.MAX_POINTS + 2))
    assert "points of a scan" in refusal(tmp_path, "theta;counts\n" + rows)


@pytest.mark.parametrize("header", ["theta/rad", "2theta/rad", "lambda/nm", "theta/deg"])
@pytest.mark.parametrize("value", ["1e308", "-1e308"])
def test_an_abscissa_that_overflows(tmp_path, header, value):
    """Turned into other units it printed a warning of numpy above the sentence."""
    sentence = refusal(tmp_path, f"{header};counts\n0.1;3\n{value};4\n0.3;5\n")
    assert "line 3, column 1" in sentence


def test_twenty_thousand_points(tmp_path):
    rows = "".join(f"{2 + i / 1000:.3f};1\n" for i in range(20_000))
    assert scan_of(tmp_path, "theta/deg;counts\n" + rows).counts.size == 20_000


def test_a_cell_with_many_commas_is_not_echoed_whole(tmp_path):
    """Found by the campaign: the sentence about the decimal mark repeated the cell as it was."""
    sentence = refusal(tmp_path, "theta;rate\n5;" + "1,2341\x86" * 300 + "\n6;3\n7;4\n8;5\n")
    assert len(sentence) < 200
