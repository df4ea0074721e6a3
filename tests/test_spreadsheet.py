"""Spreadsheets: cells of every kind, several sheets, and archives that mean harm."""

from __future__ import annotations

import datetime
import io
import zipfile

import openpyxl
import pytest
from odf.opendocument import OpenDocumentSpreadsheet
from odf.table import Table as OdfTable
from odf.table import TableCell, TableRow
from odf.text import P
from sheet_text import refusal, scan_of

from hdetermine.files import limits

PLAIN = [(5.0, 3), (5.1, 0), (5.2, 12)]


def xlsx(**sheets: list[list[object]]) -> bytes:
    book = openpyxl.Workbook()
    book.remove(book.active)
    for name, rows in sheets.items():
        sheet = book.create_sheet(name)
        for row in rows:
            sheet.append(row)
    stream = io.BytesIO()
    book.save(stream)
    return stream.getvalue()


def ods(**sheets: list[list[object]]) -> bytes:
    document = OpenDocumentSpreadsheet()
    for name, rows in sheets.items():
        table = OdfTable(name=name)
        for row in rows:
            line = TableRow()
            for cell in row:
                if isinstance(cell, str):
                    made = TableCell(valuetype="string")
                elif cell is None:
                    made = TableCell()
                else:
                    made = TableCell(valuetype="float", value=cell)
                if cell is not None:
                    made.addElement(P(text=str(cell)))
                line.addElement(made)
            table.addElement(line)
        document.spreadsheet.addElement(table)
    stream = io.BytesIO()
    document.write(stream)
    return stream.getvalue()


ROWS: list[list[object]] = [["θ / °", "counts"], [5.0, 3], [5.1, 0], [5.2, 12]]
MAKERS = pytest.mark.parametrize("make", [xlsx, ods], ids=["xlsx", "ods"])


@MAKERS
def test_spreadsheets(tmp_path, make):
    scan = scan_of(tmp_path, make(Run=ROWS))
    assert list(zip(scan.reading_deg, scan.counts, strict=True)) == PLAIN


@MAKERS
def test_spreadsheet_with_title_and_empty_cells(tmp_path, make):
    rows = [["Bench 3", None, None], [None, None, None], [None, "theta", "counts"]]
    rows += [[None, *row] for row in ROWS[1:]]
    assert list(scan_of(tmp_path, make(Run=rows, Notes=[["nothing", "here"]])).counts) == [3, 0, 12]


@MAKERS
def test_counts_as_text_in_a_spreadsheet(tmp_path, make):
    rows = [["theta", "counts"], ["5,0", "3"], ["5,1", "0"], ["5,2", " 12 "]]
    scan = scan_of(tmp_path, make(Run=rows))
    assert list(zip(scan.reading_deg, scan.counts, strict=True)) == PLAIN
    rows[2][1] = "1,234"
    rows[1][0], rows[2][0], rows[3][0] = 5.0, 5.1, 5.2
    assert "decimal" in refusal(tmp_path, make(Run=rows))


@MAKERS
def test_several_sheets_ask(tmp_path, make):
    other = [*ROWS[:1], [6.0, 9], [6.1, 8]]
    data = make(A=ROWS, B=other)
    sentence = refusal(tmp_path, data)
    assert '"A", "B"' in sentence
    assert "state sheet" in sentence
    assert list(scan_of(tmp_path, data, 'sheet = "B"\n').counts) == [9, 8]
    assert 'did you mean "B"' not in refusal(tmp_path, data, 'sheet = "Cxy"\n')
    assert "text file" in refusal(tmp_path, "theta,counts\n5,3\n6,4\n", 'sheet = "A"\n')
    assert "no sheet has rows of numbers" in refusal(tmp_path, make(A=[["a", "b"]]))


def test_cells_that_are_no_numbers(tmp_path):
    for cell, word in (
        (datetime.date(2026, 5, 1), "date"),
        (datetime.datetime(2026, 5, 1, 12), "date"),
        (datetime.time(1, 5), "date"),
        (datetime.timedelta(hours=3), "date"),
        (True, '"True"'),
        ("x", '"x"'),
        ("#DIV/0!", "no number"),
        ("=1/0", "no number"),
        (None, "no number"),
    ):
        rows = [["theta", "counts"], [5.0, 3], [5.1, cell], [5.2, 12]]
        sentence = refusal(tmp_path, xlsx(Run=rows))
        assert "cell B3" in sentence
        assert word in sentence


def with_part(data: bytes, name: str, content: bytes) -> bytes:
    """Replace one part of a spreadsheet."""
    stream = io.BytesIO()
    with (
        zipfile.ZipFile(io.BytesIO(data)) as old,
        zipfile.ZipFile(stream, "w", zipfile.ZIP_DEFLATED) as new,
    ):
        for part in old.namelist():
            new.writestr(part, content if part == name else old.read(part))
        if name not in old.namelist():
            new.writestr(name, content)
    return stream.getvalue()


SHEET_XML = (
    '<worksheet xmlns="http://schemas.openxmlformats.org/spreadsheetml/2006/main"><sheetData>'
    "{}</sheetData></worksheet>"
)
BOMBS = {
    "far corner": '<row r="1"><c r="A1"><v>1</v></c></row>'
    '<row r="1048576"><c r="XFD1048576"><v>1</v></c></row>',
    "far corner behind an attribute": '<row r="1"><c r="A1"><v>1</v></c>'
    '<c t=">" r="XFD1048576"><v>1</v></c></row>',
    "no address": "<row r='1048576'><c><v>1</v></c></row><row r='2'><c r='ZZZ1'><v>1</v></c></row>",
    "address that cannot be": '<row r="1"><c r="A99999999"><v>1</v></c></row>',
    "odd row": '<row r="x"><c><v>1</v></c></row>',
    "deep": "<a>" * 500 + "</a>" * 500,
    "broken": "<row>",
}


@pytest.mark.parametrize("rows", BOMBS.values(), ids=BOMBS.keys())
def test_xlsx_that_would_exhaust_the_machine(tmp_path, rows):
    data = with_part(xlsx(Run=ROWS), "xl/worksheets/sheet1.xml", SHEET_XML.format(rows).encode())
    assert "a.csv" in refusal(tmp_path, data)


def test_xml_entities_are_refused(tmp_path):
    bomb = b'<!DOCTYPE x [<!ENTITY a "aaaa"><!ENTITY b "&a;&a;">]><x>&b;</x>'
    data = with_part(xlsx(Run=ROWS), "xl/worksheets/sheet1.xml", bomb)
    assert "entities" in refusal(tmp_path, data)


def test_zip_bomb(tmp_path):
    data = with_part(xlsx(Run=ROWS), "xl/media/x.xml", b" " * (limits.MAX_EXPANDED_BYTES + 1))
    assert len(data) < 1_000_000
    assert "bytes when unpacked" in refusal(tmp_path, data)


def test_zip_bomb_that_understates_its_size(tmp_path):
    """A part said to unpack to 100 bytes is not unpacked further."""
    data = bytearray(with_part(xlsx(Run=ROWS), "xl/media/x.xml", b" " * 10_000_000))
    entry = data.rindex(b"xl/media/x.xml") - 46
    assert data[entry : entry + 4] == b"PK\x01\x02"
    data[entry + 24 : entry + 28] = (100).to_bytes(4, "little")
    assert "damaged" in refusal(tmp_path, bytes(data))


def test_many_sheets_rows_and_columns(tmp_path):
    sheets = {f"s{i}": ROWS for i in range(limits.MAX_SHEETS + 1)}
    assert "101 sheets" in refusal(tmp_path, xlsx(**sheets))
    wide = ["theta"] + ["counts"] * limits.MAX_COLUMNS
    assert "301 columns" in refusal(tmp_path, xlsx(Run=[wide, [1.0] * len(wide)]))
    deep = f'<row r="{limits.MAX_ROWS + 1}"><c><v>1</v></c></row>'
    deep = SHEET_XML.format(deep)
    data = with_part(xlsx(Run=ROWS), "xl/worksheets/sheet1.xml", deep.encode())
    assert "100001 rows" in refusal(tmp_path, data)


def test_many_parts(tmp_path):
    stream = io.BytesIO()
    with zipfile.ZipFile(stream, "w") as archive:
        for i in range(limits.MAX_ARCHIVE_ENTRIES + 1):
            archive.writestr(f"{i}.xml", b"<a/>")
    assert "parts of a spreadsheet" in refusal(tmp_path, stream.getvalue())


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ("<table:table-cell", '<table:table-cell table:number-columns-repeated="16384"'),
        ("<table:table-row", '<table:table-row table:number-rows-repeated="1048576"'),
        ("<table:table-row", '<table:table-row table:number-rows-repeated="4294967295"'),
        ("<table:table-cell", '<table:table-cell table:number-columns-repeated="-1"'),
    ],
)
def test_ods_that_would_exhaust_the_machine(tmp_path, old, new):
    data = ods(Run=ROWS * 80)
    content = zipfile.ZipFile(io.BytesIO(data)).read("content.xml").decode()
    sentence = refusal(tmp_path, with_part(data, "content.xml", content.replace(old, new).encode()))
    assert "cells" in sentence or "addresses" in sentence


def test_ods_with_many_sheets_of_repeated_rows(tmp_path):
    """A hundred sheets, each within the limit, took 1.7 GB together."""
    data = ods(Run=ROWS)
    content = zipfile.ZipFile(io.BytesIO(data)).read("content.xml").decode()
    more = "".join(
        f'<table:table table:name="t{i}"><table:table-row table:number-rows-repeated="100000">'
        '<table:table-cell office:value-type="float" office:value="1"/></table:table-row>'
        "</table:table>"
        for i in range(99)
    )
    content = content.replace("</office:spreadsheet>", more + "</office:spreadsheet>")
    sentence = refusal(tmp_path, with_part(data, "content.xml", content.encode()))
    assert "cells in all its sheets" in sentence


def test_ods_with_the_usual_empty_repeats(tmp_path):
    """Spreadsheet programs fill the sheet up with repeated empty cells and rows."""
    data = ods(Run=ROWS)
    content = zipfile.ZipFile(io.BytesIO(data)).read("content.xml").decode()
    tail = (
        '<table:table-row table:number-rows-repeated="1048570">'
        '<table:table-cell table:number-columns-repeated="16384"/></table:table-row></table:table>'
    )
    content = content.replace("</table:table>", tail)
    scan = scan_of(tmp_path, with_part(data, "content.xml", content.encode()))
    assert list(scan.counts) == [3, 0, 12]


def test_archives_that_are_no_spreadsheets(tmp_path):
    stream = io.BytesIO()
    with zipfile.ZipFile(stream, "w") as archive:
        archive.writestr("letter.txt", "Dear all")
    assert "no spreadsheet" in refusal(tmp_path, stream.getvalue())
    whole = xlsx(Run=ROWS)
    assert "damaged" in refusal(tmp_path, whole[: len(whole) // 2])
    lost = with_part(xlsx(Run=ROWS), "xl/workbook.xml", b"<workbook/>")
    assert "a.csv" in refusal(tmp_path, lost)
