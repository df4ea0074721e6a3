"""A run: the scans of one measurement and the apparatus that made them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from hdetermine.records.apparatus import Apparatus
from hdetermine.records.scan import Scan


@dataclass(frozen=True, slots=True)
class InputFile:
    """A file that was read, by name and checksum."""

    name: str
    sha256: str


@dataclass(frozen=True, slots=True)
class SheetEntry:
    """One line of the run sheet as it was understood.

    Attributes
    ----------
    key : str
        Dotted key, for instance ``tube.voltage.gain``.
    text : str
        What was understood, as text with its unit.
    is_default : bool
        True if the value, or its uncertainty, is the documented default.
    """

    key: str
    text: str
    is_default: bool


@dataclass(frozen=True, slots=True)
class Run:
    """A multi-voltage run as read.

    Attributes
    ----------
    title, date, operator, laboratory : str
        As stated in the run sheet (`date` in ISO form, or empty).
    apparatus : Apparatus
        Inputs with their uncertainties.
    scans : tuple of Scan
        In the order of the run sheet.
    files : tuple of InputFile
        Every file that was read.
    sheet : tuple of SheetEntry
        The run sheet as understood, defaults marked.
    remarks : tuple of str
        What the reader noticed about the run as a whole.
    truth : mapping
        Truth table of a simulated run, empty for a measurement. Nothing in the analysis
        reads it.
    """

    title: str
    date: str
    operator: str
    laboratory: str
    apparatus: Apparatus
    scans: tuple[Scan, ...]
    files: tuple[InputFile, ...] = ()
    sheet: tuple[SheetEntry, ...] = ()
    remarks: tuple[str, ...] = ()
    truth: Mapping[str, object] = field(default_factory=dict)
