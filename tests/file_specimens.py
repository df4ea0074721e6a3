"""Sound files of every supported kind, for damage to start from."""

from __future__ import annotations

import functools
import io
from dataclasses import replace

import openpyxl
from closure.settings import BASE
from odf.opendocument import OpenDocumentSpreadsheet
from odf.table import Table, TableCell, TableRow
from odf.text import P
from sheet_text import SHEET

from hdetermine.planning.runfiles import run_files
from hdetermine.planning.simulation import simulate_run

POINTS = [(5.0 + i / 10.0, (7 * i * i) % 41) for i in range(30)]


def _rows(separator: str, comma: bool) -> str:
    lines = (f"{angle:.1f}{separator}{count}" for angle, count in POINTS)
    text = "\n".join(lines) + "\n"
    return text.replace(".", ",") if comma else text


WIDE = "# bench 3\ntheta;20 kV;25 kV\n°;counts;counts\n" + "".join(
    f"{angle:.1f};{count};{count + 5}\n" for angle, count in POINTS
)
TABLES: list[tuple[str, str]] = [
    ("", "theta_deg,counts\n" + _rows(",", False)),
    ("", "Glanzwinkel θ / °;Impulse\n" + _rows(";", True)),
    ("", "theta\tR / 1/s\n" + _rows("\t", False)),
    ("", "# theta counts\n" + _rows(" ", False)),
    ('column = "25 kV"\n', WIDE),
    ('abscissa = "two_theta"\nordinate = "counts"\n', _rows(" ", False)),
    ("", "λ/pm;cps\n" + "".join(f"{35 + i},1;{i},5\n" for i in range(30))),
]
"""Extra lines for the scan's entry, and the table."""


def xlsx() -> bytes:
    """A spreadsheet with a run, a note and a date."""
    book = openpyxl.Workbook()
    sheet = book.active
    for row in (["Bench 3", None], ["theta / deg", "counts"], *POINTS):
        sheet.append(list(row))
    book.create_sheet("notes").append(["nothing here"])
    stream = io.BytesIO()
    book.save(stream)
    return stream.getvalue()


@functools.cache
def small_run() -> dict[str, bytes]:
    """A simulated run of three scans with their edges, file by file."""
    setting = replace(BASE, voltages_kV=(25.0, 29.0, 34.0), from_deg=2.6, to_deg=7.8)
    _, simulated = simulate_run(setting.run_sheet(), setting.truth_table(1), 1)
    return run_files(simulated)


CLAIM_SHEET = """\
schema = 1
note = "read by two of us"

[h]
value = 6.55e-34
unit = "J s"
expanded = 0.08e-34
k = 2

[[cutoff]]
tube_voltage_kV = 20.0
wavelength_pm = 61.2

[[cutoff]]
tube_voltage_kV = 25.0
glancing_angle_deg = 7.1
"""
CLAIM_TABLES: list[str] = [
    "group,h,unit,u,wavelength 20 kV [pm],theta 25 kV [deg]\n"
    "alder,6.55e-34,J s,0.04e-34,61.2,7.08\n"
    "birch,4.13e-15,eV s,2e-17,61.8,\n"
    "cedar,,,,62.0,7.15\n",
    "# bench 3\ngroup;h [eV s];U;k;2 theta 20 kV [deg];wavelength 25 kV [nm]\n"
    "alder;4,1e-15;0,1e-15;2;17,6;0,0497\n",
]


def claims_xlsx() -> bytes:
    """The first table of claims as a spreadsheet."""
    book = openpyxl.Workbook()
    sheet = book.active
    for line in CLAIM_TABLES[0].splitlines():
        sheet.append([_cell(text) for text in line.split(",")])
    stream = io.BytesIO()
    book.save(stream)
    return stream.getvalue()


def _cell(text: str) -> str | float:
    try:
        return float(text)
    except ValueError:
        return text


def ods() -> bytes:
    """The same as an OpenDocument spreadsheet."""
    document = OpenDocumentSpreadsheet()
    table = Table(name="run")
    for row in (["theta / deg", "counts"], *POINTS):
        line = TableRow()
        for cell in row:
            if isinstance(cell, str):
                made = TableCell(valuetype="string")
            else:
                made = TableCell(valuetype="float", value=cell)
            made.addElement(P(text=str(cell)))
            line.addElement(made)
        table.addElement(line)
    document.spreadsheet.addElement(table)
    stream = io.BytesIO()
    document.write(stream)
    return stream.getvalue()


def sheet_for(more: str = "") -> str:
    """The run sheet of a specimen."""
    return SHEET.replace('file = "a.csv"\n', 'file = "a.csv"\n' + more)
