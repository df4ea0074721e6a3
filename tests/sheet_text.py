"""A small sound run folder for tests, and ways to change a piece of it and read it."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from hdetermine.errors import InputError
from hdetermine.files.plaintext import plain_text
from hdetermine.files.runsheet import read_run
from hdetermine.records.scan import Scan

SHEET = """\
schema = 1

[run]
title = "Bench 3"
date = 2026-03-12

[tube]
anode = "Cu"
cathode_work_function_eV = { value = 4.5, half_width = 0.3 }

[tube.voltage]
gain = { value = 1.0, u = 0.004, source = "supply calibration" }

[crystal]
material = "LiF"
reflection = "200"
spacing_pm = { value = 201.36, u = 0.02 }

[goniometer]
step_deg = 0.1

[counter]
dead_time_us = { value = 90.0, u = 10.0 }

[[scan]]
file = "a.csv"
tube_voltage_kV = 20.0
dwell_s = 10.0
"""

TABLE = "glancing angle / deg;counts\n" + "".join(f"{5 + i / 10:.1f};{i}\n" for i in range(20))


def write_run(folder: Path, sheet: str = SHEET, table: str | bytes = TABLE) -> Path:
    """Write a run folder with one table, ``a.csv``."""
    folder.mkdir(exist_ok=True)
    (folder / "run.toml").write_text(sheet, encoding="utf-8")
    data = table if isinstance(table, bytes) else table.encode("utf-8")
    (folder / "a.csv").write_bytes(data)
    return folder


def changed(old: str, new: str) -> str:
    """The sound sheet with one piece replaced; the piece must be there."""
    assert SHEET.count(old) == 1, old
    return SHEET.replace(old, new)


_FILE = 'file = "a.csv"\n'


def scan_of(
    folder: Path, table: str | bytes, more: str = "", dwell: str = "dwell_s = 10.0\n"
) -> Scan:
    """Read one table with extra lines in its entry of the run sheet."""
    sheet = SHEET.replace("dwell_s = 10.0\n", dwell).replace(_FILE, _FILE + more)
    (scan,) = read_run(write_run(folder / "run", sheet, table)).scans
    return scan


def refused(read: Callable[[], object]) -> str:
    """The sentence of the refusal that a reading ends in: one line, plain, with a full stop."""
    with pytest.raises(InputError) as caught:
        read()
    sentence = str(caught.value)
    assert "\n" not in sentence
    assert sentence.endswith(".")
    assert sentence == plain_text(sentence)
    return sentence


def refusal(
    folder: Path, table: str | bytes, more: str = "", dwell: str = "dwell_s = 10.0\n"
) -> str:
    """The sentence with which a table is refused."""
    return refused(lambda: scan_of(folder, table, more, dwell))
