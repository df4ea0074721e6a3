"""Numbers as people write them, and what leaves their decimal mark open."""

from __future__ import annotations

import pytest
from sheet_text import refusal, scan_of

from hdetermine.files.numerals import Marks, decimals_of, looks_numeric, parse_numeral


@pytest.mark.parametrize(
    ("text", "decimal", "value"),
    [
        ("5", "point", 5.0),
        ("+5.25", "point", 5.25),
        ("\u22125,25", "comma", -5.25),
        (".5", "point", 0.5),
        ("5.", "point", 5.0),
        ("1,234.5", "point", 1234.5),
        ("1.234,5", "comma", 1234.5),
        ("1.234", "comma", 1234.0),
        ("1 234", "point", 1234.0),
        ("1'234'567", "point", 1234567.0),
        ("1\u202f234,5", "comma", 1234.5),
        ("1e-3", "point", 1e-3),
        ("1,5E2", "comma", 150.0),
    ],
)
def test_numerals(text, decimal, value):
    assert looks_numeric(text)
    assert parse_numeral(text, decimal) == value


@pytest.mark.parametrize(
    "text",
    ["", "x", "1.2.3", "1,2,3", "12,34.5", "1e", "--5", "5-", "nan", "inf", "0x10", "1_000", "٣",
     "５", "1 2", "12.03.2026", "1" * 80, "1e99999", "1.234,5.6"],
)  # fmt: skip
def test_what_is_no_numeral(text):
    with pytest.raises(ValueError, match="not a number"):
        parse_numeral(text, "point")


def test_decimals():
    texts = ("5", "5.10", "5.125", "1e-3", "1.5e-2", "1.25e1")
    assert [decimals_of(text, "point") for text in texts] == [0, 1, 3, 3, 3, 1]


@pytest.mark.parametrize(
    ("cells", "settled"),
    [
        (["5.1", "12"], "point"),
        (["5,1", "12"], "comma"),
        (["5", "12"], "point"),
        (["0,125"], "comma"),
        (["0.125", "1.234"], "point"),
        (["5,25", "1,234"], "comma"),
        (["1234,567"], "comma"),
    ],
)
def test_decimal_mark_that_is_certain(cells, settled):
    marks = Marks()
    marks.note(cells)
    assert marks.settle() == settled


@pytest.mark.parametrize(
    "cells",
    [
        ["1,234"],
        ["1.234"],
        ["1,234.5"],
        ["1.234,5"],
        ["5.1", "1,234"],
        ["5,1", "5.1"],
        ["1,234,567"],
    ],
)
def test_decimal_mark_that_is_not(tmp_path, cells):
    marks = Marks()
    marks.note(cells)
    with pytest.raises(ValueError, match=r"thousand|decimal"):
        marks.settle()
    rows = "".join(f"{i};{cell}\n" for i, cell in enumerate(cells, start=5))
    table = f"theta/deg;rate\n{rows}"
    if len(cells) == 1:
        assert 'decimal = "point"' in refusal(tmp_path, table)


def test_angles_with_three_decimals_settle_the_mark(tmp_path):
    scan = scan_of(tmp_path, "theta;rate\n5,125;1,234\n5,250;2,345\n")
    assert list(scan.counts) == [12, 23]
