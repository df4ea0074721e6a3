"""Counts from tables: whole numbers, rates rounded for print, dropouts of the counter."""

from __future__ import annotations

import numpy as np
import pytest
from sheet_text import refusal, scan_of

from hdetermine.files.counts import without_dropouts


def test_rates_become_whole_counts(tmp_path):
    scan = scan_of(tmp_path, "theta;R / 1/s\n5.0;0.3\n5.1;0.0\n5.2;1.2\n")
    assert list(scan.counts) == [3, 0, 12]
    assert scan.rate_rounding == pytest.approx(0.5)
    assert not any("miss" in remark for remark in scan.remarks)


def test_rates_that_do_not_fit_are_remarked(tmp_path):
    table = "theta;cps\n5.0;0.33\n5.1;0.00\n5.2;1.25\n"
    scan = scan_of(tmp_path, table)
    assert list(scan.counts) == [3, 0, 12]
    assert any("miss whole counts by up to 0.5 at 2 of 3" in remark for remark in scan.remarks)


def test_rates_without_dwell_ask(tmp_path):
    sentence = refusal(tmp_path, "theta;cps\n5.0;0.3\n5.1;0.0\n", dwell="")
    assert "dwell_s" in sentence
    assert "rates" in sentence


@pytest.mark.parametrize("rate", ["1e308", "1e13", "-1", "-1e308"])
def test_rates_that_no_counter_gives(tmp_path, rate):
    """1e308 per second times 10 s printed a warning of numpy above the sentence."""
    sentence = refusal(tmp_path, f"theta;cps\n5.0;0.3\n5.1;{rate}\n5.2;1\n")
    assert "line 3, column 2" in sentence
    assert "correct it" in sentence


def test_counts_or_rate_unclear_asks(tmp_path):
    table = "theta;20 kV\n5.0;3\n5.1;1\n5.2;12\n"
    assert 'ordinate = "counts"' in refusal(tmp_path, table)
    assert list(scan_of(tmp_path, table, 'ordinate = "rate"\n').counts) == [30, 10, 120]
    # fractions can only be rates
    assert list(scan_of(tmp_path, table.replace(";3", ";0.3")).counts) == [3, 10, 120]


def test_the_run_sheet_outranks_the_header(tmp_path):
    scan = scan_of(tmp_path, "theta;cps\n5.0;3\n5.1;0\n", 'ordinate = "counts"\n')
    assert list(scan.counts) == [3, 0]
    assert any("as the run sheet says" in remark for remark in scan.remarks)


# chance of a Poisson zero below 1e-8 means more than 18.4 expected counts
@pytest.mark.parametrize(
    ("counts", "dropped"),
    [
        ([40, 44, 38, 0, 41, 39, 43], True),
        ([19, 20, 19, 0, 19, 20, 19], True),
        ([17, 18, 18, 0, 18, 17, 18], False),
        ([40, 44, 38, 0, 0, 41, 39], False),
        ([0, 0, 0, 0, 50, 90, 120], False),
        ([0, 0, 60, 0, 90, 120, 130], True),
        ([0, 40, 40], False),
        ([40, 40, 0], False),
        ([90, 60, 4, 0, 3, 50, 80], False),
    ],
)
def test_dropouts(counts, dropped):
    array = np.array(counts)
    keep, remarks = without_dropouts(np.arange(array.size) / 10.0, array)
    assert (array[~keep].size == 1) is dropped
    assert len(remarks) == int(dropped)
    assert not array[~keep].any()
