"""Text tables: encoding, separator, and lines split into cells."""

from __future__ import annotations

import codecs
import csv
import re
import unicodedata
from collections import Counter
from dataclasses import dataclass

from hdetermine.errors import InputError
from hdetermine.files.limits import (
    MAX_CELLS,
    MAX_COLUMNS,
    MAX_LINE_CHARACTERS,
    MAX_ROWS,
    check_limit,
)
from hdetermine.files.numerals import looks_numeric

_COMMENTS = ("#", "%", "!", "//")
_BLANKS = re.compile(r"[ \t\u00a0]+")
_WIDE_BLANKS = re.compile(r"\t+| {2,}")
_NUMBER_LINE = re.compile(r"[0-9.,;|'\"eE+\-\u2212°\s\u00a0\u202f\u2009]*$")
_STRANGE = [chr(i) for i in (*range(32), *range(127, 160)) if chr(i) not in "\t\n\r\f\v\x1a"]
_SAMPLE = 1000
_FAMILIES = {
    b"\x89PNG": "a picture",
    b"\xff\xd8\xff": "a picture",
    b"GIF8": "a picture",
    b"BM": "a picture",
    b"II*\0": "a picture",
    b"MM\0*": "a picture",
    b"%PDF": "a PDF document",
    b"\xd0\xcf\x11\xe0": "a spreadsheet or document of an old kind",
    b"\x1f\x8b": "a compressed file",
    b"7z\xbc\xaf": "a compressed file",
    b"Rar!": "a compressed file",
    b"\x7fELF": "a program",
    b"MZ\x90": "a program",
    b"{\\rtf": "a word-processor document",
    b"<!DOCTYPE": "a web page",
    b"<html": "a web page",
    b"<?xml": "an XML document",
    b"<svg": "a picture",
}


@dataclass(frozen=True, slots=True)
class TextLines:
    """A text file as cells.

    Attributes
    ----------
    rows : list of (int, list of str)
        Line number and cells of every line that is split like the data, and of lines of numbers
        that are not.
    other : list of (int, str)
        Lines that are not rows: titles and comments, with their numbers.
    width : int
        Cells of a row.
    """

    rows: list[tuple[int, list[str]]]
    other: list[tuple[int, str]]
    width: int


def family_of(data: bytes) -> str:
    """Say what kind of file this is if it is certainly no table; empty otherwise."""
    for start, family in _FAMILIES.items():
        if data.lstrip(b"\xef\xbb\xbf \r\n\t").lower().startswith(start.lower()):
            return "" if family == "a picture" and start == b"BM" and b"\0" not in data else family
    return ""


def decode(data: bytes, where: str) -> str:
    """Turn bytes into text: UTF-8, UTF-16, or the western code pages.

    Raises
    ------
    InputError
        If this is no text.
    """
    family = family_of(data)
    if family:
        raise InputError(
            f"{where}: this is {family} and not a table; export the counts as CSV or xlsx."
        )
    text = _decoded(data)
    if sum(map(text.count, _STRANGE)) > 0.05 * len(text):
        raise InputError(
            f"{where}: this is neither text nor a spreadsheet; export the counts as CSV or xlsx."
        )
    return text.replace("\x1a", "")


def _decoded(data: bytes) -> str:
    for mark, encoding in (
        (codecs.BOM_UTF8, "utf-8-sig"),
        (codecs.BOM_UTF16_LE, "utf-16"),
        (codecs.BOM_UTF16_BE, "utf-16"),
    ):
        if data.startswith(mark):
            return data.decode(encoding, errors="replace")
    head = data[:2000]
    for encoding, zeros in (("utf-16-le", head[1::2]), ("utf-16-be", head[::2])):
        if zeros and zeros.count(0) > 0.9 * len(zeros):
            return data.decode(encoding, errors="replace")
    try:
        return data.decode("utf-8")
    except UnicodeDecodeError:
        # Western code page, a superset of Latin-1. Numbers and separators are the same in all of
        # them; another guess could only change a letter of a header.
        return data.decode("cp1252", errors="replace")


def split_lines(text: str, where: str) -> TextLines:
    """Split a text into cells by the separator that its numbers betray.

    Raises
    ------
    InputError
        If there are no lines of numbers, or no separator splits them alike.
    """
    lines = _logical_lines(text, where)
    candidates = [
        (number, line)
        for number, line in lines
        if _NUMBER_LINE.match(line) and any(c in "0123456789" for c in line)
    ]
    if not candidates:
        raise InputError(f"{where}: {_no_numbers(text)}")
    every = 1 + len(candidates) // _SAMPLE
    separator = _separator([line for _, line in candidates[::every]])
    if separator is None and all(looks_numeric(line) for _, line in candidates):
        raise InputError(
            f"{where}: it has only one column of numbers; a scan needs an angle and a count in "
            "each row."
        )
    if separator is None:
        raise InputError(
            f"{where}: no separator (tab, semicolon, comma or blanks) splits its lines into "
            "columns of numbers; export it with semicolons or tabs between the columns."
        )
    raw_width = _commonest([len(_cells(line, separator)) for _, line in candidates])
    check_limit(raw_width, MAX_COLUMNS, where, "columns")
    check_limit(raw_width * len(lines), MAX_CELLS, where, "cells")
    split = [(number, line, _cells(line, separator)) for number, line in lines]
    # A separator at the end of every line makes an empty last column: it is none.
    width = max(_filled_width(cells) for *_, cells in split if len(cells) == raw_width)
    result = TextLines([], [], width)
    for number, line, found in split:
        cells = found
        if separator == " " and len(cells) != width:
            cells = [cell for cell in _WIDE_BLANKS.split(line.strip()) if cell]
        if not any(cells):
            continue
        if is_comment(line):
            result.other.append((number, line))
        elif len(cells) in (width, raw_width) and _filled_width(cells) <= width:
            result.rows.append((number, (cells + [""] * width)[:width]))
        elif all(looks_numeric(cell) for cell in cells if cell):
            result.rows.append((number, cells))
        else:
            result.other.append((number, line))
    return result


def is_comment(line: str) -> bool:
    """Whether a line starts with a comment sign."""
    return line.lstrip().startswith(_COMMENTS)


def _commonest(numbers: list[int]) -> int:
    return max(Counter(numbers).items(), key=lambda item: (item[1], item[0]))[0]


def _filled_width(cells: list[str]) -> int:
    return max((i for i, cell in enumerate(cells, start=1) if cell), default=0)


def comment_cells(line: str, width: int) -> list[str] | None:
    """Split a comment or title line into `width` cells, if any separator does."""
    line = line.strip()
    for mark in _COMMENTS:
        line = line.lstrip(mark[0]).strip() if line.startswith(mark) else line
    for separator in ("\t", ";", "|", ",", "  ", " "):
        if separator == "  ":
            cells = [cell for cell in _WIDE_BLANKS.split(line) if cell]
        else:
            cells = _cells(line, separator)
        if len(cells) == width:
            return cells
    return None


def _logical_lines(text: str, where: str) -> list[tuple[int, str]]:
    """Lines that are not blank, with their numbers; quoted cells may run over line ends."""
    lines: list[tuple[int, str]] = []
    ends = text.count("\n") + text.count("\r") - text.count("\r\n")
    check_limit(ends, MAX_ROWS, where, "lines")
    for number, line in enumerate(re.split(r"\r\n|\n|\r", text), start=1):
        if len(line) > MAX_LINE_CHARACTERS:
            raise InputError(
                f"{where}, line {number}: it has {len(line)} characters, more than the "
                f"{MAX_LINE_CHARACTERS} that are read; export the table with one row a line."
            )
        if line.strip(" \t\f\v\u00a0\ufeff\0"):
            lines.append((number, line.strip("\f\v\ufeff\0")))
    return lines


def _no_numbers(text: str) -> str:
    if any(unicodedata.category(c) == "Nd" and not c.isascii() for c in text):
        return "its numbers are written in digits of another script; write them with 0 to 9."
    return "there are no rows of numbers below its header; put the counts into it."


def _separator(lines: list[str]) -> str | None:
    """The separator that splits lines into numbers, if one does.

    A line without the separator says nothing; one that it splits into anything but numbers speaks
    against it.
    """
    for separator in ("\t", ";", "|", ",", " "):
        good = bad = 0
        for line in lines:
            cells = [cell for cell in _cells(line, separator) if cell]
            if len(cells) > 1:
                numeric = all(looks_numeric(cell) for cell in cells)
                good, bad = good + numeric, bad + (not numeric)
        if good >= 0.5 * len(lines) and bad <= 0.2 * good:
            return separator
    return None


def _cells(line: str, separator: str) -> list[str]:
    """Split one line; quotation marks protect a separator."""
    if separator == " ":
        return [cell.strip('"') for cell in _BLANKS.split(line.strip()) if cell]
    if '"' in line:
        cells = next(csv.reader([line], delimiter=separator, skipinitialspace=True), [])
    else:
        cells = line.split(separator)
    return [cell.strip() for cell in cells]
