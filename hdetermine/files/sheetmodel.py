"""The run sheet's keys: what each may hold, checked before anything is computed."""

from __future__ import annotations

import datetime
from pathlib import Path
from typing import Annotated, Any, Literal

from pydantic import BaseModel, ConfigDict, Field, PlainValidator

from hdetermine.files.limits import MAX_TEXT_CHARACTERS
from hdetermine.files.plaintext import plain_text, quoted
from hdetermine.files.quantities import StatedQuantity, finite_number, nearest, parse_stated
from hdetermine.physics.elements import ATOMIC_NUMBER

_MAX_NAME = 80


def _text(found: object) -> str:
    if not isinstance(found, str):
        raise ValueError(f"found {quoted(found)}; allowed is a text in quotation marks")
    if len(found) > MAX_TEXT_CHARACTERS:
        raise ValueError(f"found {len(found)} characters; allowed are up to {MAX_TEXT_CHARACTERS}")
    return plain_text(found)


def _full_text(found: object) -> str:
    text = _text(found)
    if not text:
        raise ValueError("found an empty text; allowed is a text of at least one character")
    return text


def _name(found: object) -> str:
    name = _full_text(found)
    if len(name) > _MAX_NAME:
        raise ValueError(f"found {len(name)} characters; allowed are up to {_MAX_NAME}")
    return name


def _element(found: object) -> str:
    symbol = _full_text(found)
    if symbol not in ATOMIC_NUMBER:
        near = symbol[:2].capitalize()
        hint = next((f" (did you mean {s}?)" for s in (near, near[:1]) if s in ATOMIC_NUMBER), "")
        raise ValueError(
            f"found {quoted(symbol)}{hint}; allowed is the symbol of an element, for instance "
            '"Cu", "Mo" or "W"'
        )
    return symbol


def _filter(found: object) -> str:
    return "" if found == "" else _element(found)


def _date(found: object) -> str:
    if isinstance(found, datetime.datetime):
        return found.date().isoformat()
    if isinstance(found, datetime.date):
        return found.isoformat()
    if isinstance(found, str):
        try:
            return datetime.date.fromisoformat(found.strip()).isoformat()
        except ValueError:
            if not found.strip():
                return ""
    raise ValueError(f"found {quoted(found)}; allowed is a date such as 2026-03-12")


def _one_of(*allowed: str) -> PlainValidator:
    def check(found: object) -> str:
        if not isinstance(found, str) or found not in allowed:
            hint = nearest(found, allowed) if isinstance(found, str) else ""
            raise ValueError(
                f"found {quoted(found)}{hint}; allowed are "
                + ", ".join(f'"{word}"' for word in allowed)
            )
        return found

    return PlainValidator(check)


def _within(low: float, high: float, unit: str, hint: str = "") -> PlainValidator:
    def check(found: object) -> float:
        number = finite_number(found, f"a number of {unit}")
        if not low <= number <= high:
            tail = f" ({hint})" if hint else ""
            raise ValueError(f"found {number:g}; allowed are {low:g} to {high:g} {unit}{tail}")
        return number

    return PlainValidator(check)


def _column(found: object) -> str | int:
    if isinstance(found, int) and not isinstance(found, bool):
        if found < 1:
            raise ValueError(f"found {found}; columns are counted from 1")
        return found
    return _full_text(found)


def _flag(found: object) -> bool:
    if not isinstance(found, bool):
        raise ValueError(f"found {quoted(found)}; allowed are true and false")
    return found


Stated = Annotated[StatedQuantity | None, PlainValidator(parse_stated)]
Text = Annotated[str, PlainValidator(_text)]
Voltage = Annotated[
    float, _within(0.5, 500.0, "kV", "kilovolts: 20 000 V are tube_voltage_kV = 20")
]
Angle = Annotated[float | None, _within(-10.0, 90.0, "degrees", "glancing angle, not twice it")]
Column = Annotated[str | int | None, PlainValidator(_column)]


class _Part(BaseModel):
    model_config = ConfigDict(extra="forbid", strict=True, frozen=True)


class RunPart(_Part):
    """``[run]``: what and who."""

    title: Text = ""
    date: Annotated[str, PlainValidator(_date)] = ""
    operator: Text = ""
    laboratory: Text = ""


class VoltagePart(_Part):
    """``[tube.voltage]``: from the displayed to the true voltage."""

    gain: Stated = None
    offset_kV: Stated = None
    repeatability_kV: Stated = None
    ripple: Stated = None


class TubePart(_Part):
    """``[tube]``."""

    anode: Annotated[str, PlainValidator(_element)]
    filter: Annotated[str, PlainValidator(_filter)] = ""
    cathode_work_function_eV: Stated = None
    voltage: VoltagePart = VoltagePart()


class CrystalPart(_Part):
    """``[crystal]``."""

    material: Annotated[str, PlainValidator(_name)]
    reflection: Text = ""
    spacing_pm: Stated = None
    temperature_C: Stated = None
    reference_temperature_C: Annotated[
        float | None, _within(-50.0, 150.0, "degrees Celsius", "not kelvin")
    ] = None
    expansion_per_K: Stated = None
    refraction: Stated = None


class GoniometerPart(_Part):
    """``[goniometer]``."""

    zero_deg: Stated = None
    resolution_deg: Stated = None
    kernel_triangular_fraction: Stated = None
    step_deg: Annotated[float | None, _within(1e-4, 10.0, "degrees")] = None


class CounterPart(_Part):
    """``[counter]``."""

    dead_time_us: Stated = None
    dead_time_model: Annotated[
        Literal["nonparalysable", "paralysable"], _one_of("nonparalysable", "paralysable")
    ] = "nonparalysable"


class ContinuumPart(_Part):
    """``[continuum]``: shape close to the limit."""

    near_limit_excess: Stated = None
    near_limit_energy_keV: Stated = None


class TableReading(_Part):
    """How a table is to be read, where its header leaves that open."""

    abscissa: Annotated[
        Literal["theta", "two_theta", "wavelength"] | None,
        _one_of("theta", "two_theta", "wavelength"),
    ] = None
    abscissa_column: Column = None
    abscissa_unit: Annotated[
        Literal["deg", "rad", "pm", "nm", "angstrom"] | None,
        _one_of("deg", "rad", "pm", "nm", "angstrom"),
    ] = None
    ordinate: Annotated[Literal["counts", "rate"] | None, _one_of("counts", "rate")] = None
    decimal: Annotated[Literal["point", "comma"] | None, _one_of("point", "comma")] = None
    sheet: Annotated[str | None, PlainValidator(_full_text)] = None
    dwell_s: Annotated[float | None, _within(1e-3, 1e6, "seconds")] = None
    emission_current_mA: Annotated[float | None, _within(1e-6, 1e4, "milliamperes")] = None


class ScanPart(TableReading):
    """``[[scan]]``: one sweep."""

    file: Annotated[str, PlainValidator(_full_text)]
    tube_voltage_kV: Voltage
    name: Annotated[str | None, PlainValidator(_name)] = None
    column: Column = None
    edge: Annotated[bool, PlainValidator(_flag)] = True
    fit_from_deg: Angle = None
    fit_to_deg: Angle = None
    leave_out: Text = ""


def derived_name(file: str, *within: str | float | None) -> str:
    """Name of a scan that states none: the file's stem, then sheet and column if stated."""
    stem = Path(file.replace("\\", "/")).stem
    return plain_text(":".join([stem, *(str(part) for part in within if part is not None)]))


class RunSheet(_Part):
    """A whole run sheet."""

    schema_: Annotated[int, Field(alias="schema")]
    run: RunPart = RunPart()
    tube: TubePart
    crystal: CrystalPart
    goniometer: GoniometerPart = GoniometerPart()
    counter: CounterPart = CounterPart()
    continuum: ContinuumPart = ContinuumPart()
    every_scan: TableReading = TableReading()
    scan: Annotated[tuple[ScanPart, ...], Field(strict=False)]
    truth: dict[str, Any] = {}
