"""Limits of claim sheets and claim tables: a sentence, and no long wait."""

from __future__ import annotations

import pytest

from hdetermine.classcheck.groups import find_groups
from hdetermine.errors import InputError
from hdetermine.files.limits import (
    MAX_COLUMNS,
    MAX_GROUPS,
    MAX_LINE_CHARACTERS,
    MAX_LINE_DOTS,
    MAX_SCANS,
    MAX_SHEET_BYTES,
    MAX_TEXT_CHARACTERS,
)

HEAD = "group,h [J s]\n"
TABLES = {
    "groups": (HEAD + "g,6.6e-34\n" * (MAX_GROUPS + 1), "1001 groups"),
    "columns": ("group,h [J s]" + ",x" * MAX_COLUMNS + "\n", "302 columns"),
    "line": (HEAD + "g," + "6" * MAX_LINE_CHARACTERS + "\n", "20002 characters"),
}
CUTOFF = "[[cutoff]]\ntube_voltage_kV = 20.0\nwavelength_pm = 61.0\n"
SHEETS = {
    "bytes": ("#\n" * (MAX_SHEET_BYTES // 2 + 1), "larger than"),
    "line": ("#" * (MAX_LINE_CHARACTERS + 1), "20001 characters"),
    # A dotted key as long as the sheet may be took a minute, or all memory.
    "dots": ("a." * (MAX_LINE_DOTS + 1) + "b = 1", "1001 dots"),
    "cutoffs": (CUTOFF * (MAX_SCANS + 1), "201 cutoffs"),
}


@pytest.mark.parametrize(("text", "words"), TABLES.values(), ids=TABLES)
def test_a_claim_table_with_more_than_is_read(tmp_path, text, words):
    (tmp_path / "claims.csv").write_text(text)
    with pytest.raises(InputError, match=words):
        find_groups(tmp_path, tmp_path / "out")


def test_a_long_name_in_a_claim_table_stops_its_own_row_only(tmp_path):
    long = "g" * (MAX_TEXT_CHARACTERS + 1)
    (tmp_path / "claims.csv").write_text(f"{HEAD}{long},6.6e-34\nalder,6.6e-34\n")
    found = find_groups(tmp_path, tmp_path / "out")[0]
    assert [bool(group.claim) for group in found] == [True, False]
    assert "501 characters" in found[1].claim_fault


@pytest.mark.parametrize(("text", "words"), SHEETS.values(), ids=SHEETS)
def test_a_claim_sheet_with_more_than_is_read(tmp_path, text, words):
    (tmp_path / "alder").mkdir()
    (tmp_path / "alder" / "claim.toml").write_text(text)
    (group,) = find_groups(tmp_path, tmp_path / "out")[0]
    assert group.claim is None
    assert words in group.claim_fault
