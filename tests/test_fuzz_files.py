"""Damaged run sheets, tables and claims: a run, or one sentence, and quickly.

The longer campaign is ``python tests/campaign/fuzz.py``.
"""

from __future__ import annotations

import random
import tempfile
import time
from pathlib import Path

import file_specimens
import numpy as np
import pytest
from file_mutations import change_digits, damaged, damaged_archive
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from sheet_text import SHEET, write_run

from hdetermine.classcheck.claimalone import check_alone
from hdetermine.classcheck.groups import find_groups
from hdetermine.determination import determine
from hdetermine.errors import InputError
from hdetermine.files.draft import draft_sheet
from hdetermine.files.plaintext import plain_text
from hdetermine.files.runsheet import read_run

LONGEST_s = 10.0
SPREADSHEETS = {"xlsx": file_specimens.xlsx(), "ods": file_specimens.ods()}
CLAIMS_XLSX = file_specimens.claims_xlsx()
COMMON = settings(
    deadline=None, derandomize=True, suppress_health_check=[HealthCheck.too_slow], database=None
)


def assert_plain(sentence: str) -> None:
    """One line of bounded length that no terminal obeys."""
    assert sentence == plain_text(sentence)
    assert sentence.endswith(".")
    assert len(sentence) < 1500


def read_or_refuse(sheet: bytes, table: bytes) -> str:
    """Read a run folder; return the refusal, or nothing; check whatever comes."""
    with tempfile.TemporaryDirectory() as name:
        folder = write_run(Path(name) / "run", table=table)
        (folder / "run.toml").write_bytes(sheet)
        began = time.process_time()
        try:
            run = read_run(folder)
        except InputError as error:
            sentence = str(error)
            assert_plain(sentence)
            return sentence
        finally:
            assert time.process_time() - began < LONGEST_s
        for scan in run.scans:
            assert scan.reading_deg.size == scan.counts.size == scan.dwell_s.size > 0
            assert np.all(np.diff(scan.reading_deg) > 0)
            assert np.all(scan.counts >= 0)
            assert np.all(np.isfinite(scan.reading_deg))
        for quantity in run.apparatus.quantities():
            assert np.isfinite(quantity.value)
            assert quantity.standard_uncertainty >= 0
        return ""


def claims_or_refusals(files: dict[str, bytes]) -> list[str]:
    """Read a class of claims without data; return what is refused; check whatever comes."""
    with tempfile.TemporaryDirectory() as name:
        top = Path(name)
        for path, content in files.items():
            (top / path).parent.mkdir(exist_ok=True)
            (top / path).write_bytes(content)
        began = time.process_time()
        try:
            groups, remarks = find_groups(top, top / "out")
        except InputError as error:
            assert_plain(str(error))
            return [str(error)]
        finally:
            assert time.process_time() - began < LONGEST_s
        faults = []
        for group in groups:
            if group.claim_fault:
                assert_plain(group.claim_fault)
                faults.append(group.claim_fault)
            if group.claim is not None:
                check_alone(group.claim, None)
        for remark in remarks:
            assert_plain(remark)
        assert time.process_time() - began < LONGEST_s
        return faults


@settings(COMMON, max_examples=100)
@given(st.integers(0, 2**32))
def test_damaged_claim_sheets(seed):
    sheet = damaged(file_specimens.CLAIM_SHEET.encode(), random.Random(seed))
    claims_or_refusals({"alder/claim.toml": sheet})


@settings(COMMON, max_examples=150)
@given(st.integers(0, 2**32))
def test_damaged_claim_tables(seed):
    chance = random.Random(seed)
    table = damaged(chance.choice(file_specimens.CLAIM_TABLES).encode(), chance)
    claims_or_refusals({"claims.csv": table})


@settings(COMMON, max_examples=50)
@given(st.integers(0, 2**32))
def test_damaged_claim_spreadsheets(seed):
    data = damaged_archive(CLAIMS_XLSX, random.Random(seed))
    claims_or_refusals({"claims.xlsx": data})


@settings(COMMON, max_examples=150)
@given(st.integers(0, 2**32))
def test_damaged_run_sheets(seed):
    chance = random.Random(seed)
    more, table = chance.choice(file_specimens.TABLES)
    sheet = damaged(file_specimens.sheet_for(more).encode(), chance)
    read_or_refuse(sheet, table.encode())


@settings(COMMON, max_examples=200)
@given(st.integers(0, 2**32))
def test_damaged_tables(seed):
    chance = random.Random(seed)
    more, table = chance.choice(file_specimens.TABLES)
    read_or_refuse(file_specimens.sheet_for(more).encode(), damaged(table.encode(), chance))


@settings(COMMON, max_examples=100)
@given(st.integers(0, 2**32), st.sampled_from(sorted(SPREADSHEETS)))
def test_damaged_spreadsheets(seed, kind):
    data = damaged_archive(SPREADSHEETS[kind], random.Random(seed))
    read_or_refuse(SHEET.encode(), data)


@settings(COMMON, max_examples=50)
@given(st.binary(max_size=400))
def test_arbitrary_bytes(data):
    read_or_refuse(SHEET.encode(), data or b"\n")
    read_or_refuse(data or b"\n", file_specimens.TABLES[0][1].encode())


@settings(COMMON, max_examples=50)
@given(st.integers(0, 2**32))
def test_drafts_of_damaged_tables(seed):
    chance = random.Random(seed)
    _, table = chance.choice(file_specimens.TABLES)
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        (folder / "20kV.csv").write_bytes(damaged(table.encode(), chance))
        try:
            text = draft_sheet(folder)
        except InputError as error:
            sentence = str(error)
            assert_plain(sentence)
            return
        (folder / "run.toml").write_text(text, encoding="utf-8")
        with pytest.raises(InputError, match='it still says "\\?"'):
            read_run(folder)


@settings(COMMON, max_examples=20)
@given(st.integers(0, 2**32))
def test_damaged_runs_are_analysed_or_refused(seed):
    chance = random.Random(seed)
    files = dict(file_specimens.small_run())
    name = chance.choice(sorted(name for name in files if name.endswith(".csv")))
    files[name] = change_digits(files[name], chance)
    with tempfile.TemporaryDirectory() as folder:
        for path, content in files.items():
            (Path(folder) / path).write_bytes(content)
        try:
            found = determine(read_run(folder), posterior=False, monte_carlo=False)
        except InputError as error:
            assert_plain(str(error))
        else:
            assert found.h.value_J_s > 0.0
            assert 0.0 < found.h.standard_uncertainty_J_s < np.inf


def test_specimens_are_sound():
    """Undamaged, every specimen is read; else the campaign would test refusals only."""
    for more, table in file_specimens.TABLES:
        assert not read_or_refuse(file_specimens.sheet_for(more).encode(), table.encode())
    for data in SPREADSHEETS.values():
        assert not read_or_refuse(SHEET.encode(), data)
    assert not claims_or_refusals({"alder/claim.toml": file_specimens.CLAIM_SHEET.encode()})
    for text in file_specimens.CLAIM_TABLES:
        assert not claims_or_refusals({"claims.csv": text.encode()})
    assert not claims_or_refusals({"claims.xlsx": CLAIMS_XLSX})
