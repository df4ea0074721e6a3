"""The check of a run sheet: every fault as one sentence that names file, key and remedy."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from pydantic import ValidationError

from hdetermine.errors import InputError
from hdetermine.files.limits import MAX_SCANS
from hdetermine.files.plaintext import plain_text, quoted
from hdetermine.files.quantities import nearest
from hdetermine.files.sheetmodel import RunSheet, ScanPart

PLACEHOLDER = "?"
"""What stands in a drafted run sheet where its owner has to fill something in."""


def check_sheet(content: dict[str, Any], where: str) -> RunSheet:
    """Check the content of a run sheet.

    Parameters
    ----------
    content : dict
        As the TOML reader returned it.
    where : str
        Name of the file, for messages.

    Returns
    -------
    RunSheet

    Raises
    ------
    InputError
        Naming the file, the key, what was found and what is allowed.
    """
    version = content.get("schema")
    if version != 1 or isinstance(version, bool):
        found = "nothing" if version is None else quoted(version)
        raise InputError(f"{where}: key schema: found {found}; allowed is schema = 1.")
    unfilled = next(_unfilled(content, ""), None)
    if unfilled is not None:
        raise InputError(
            f'{where}: key {unfilled}: it still says "?"; put the true value in its place.'
        )
    scans = content.get("scan")
    if not isinstance(scans, list) or not scans:
        raise InputError(
            f"{where}: no scan is listed; add a [[scan]] with file and tube_voltage_kV for each."
        )
    if len(scans) > MAX_SCANS:
        raise InputError(
            f"{where}: {len(scans)} scans are more than the {MAX_SCANS} that a run may have; "
            "split the run."
        )
    try:
        return RunSheet.model_validate(content)
    except ValidationError as error:
        raise InputError(_sentence(error, where)) from None


def _unfilled(value: object, key: str) -> Iterator[str]:
    """Keys that a drafted run sheet leaves to its owner."""
    if value == PLACEHOLDER:
        yield key
    elif isinstance(value, dict):
        for name, inner in value.items():
            shown = plain_text(str(name)[:80])
            yield from _unfilled(inner, f"{key}.{shown}" if key else shown)
    elif isinstance(value, list):
        for number, inner in enumerate(value, start=1):
            yield from _unfilled(inner, f"{key}[{number}]")


def _sentence(error: ValidationError, where: str) -> str:
    """Turn the first of pydantic's findings into one sentence."""
    findings = error.errors(include_url=False)
    first = min(findings, key=lambda finding: finding["type"] != "extra_forbidden")
    place = [part for part in first["loc"] if part != "schema_"]
    key = _key(place)
    kind = first["type"]
    if kind == "extra_forbidden":
        known = _known_keys(place[:-1])
        said = f"there is no such key{nearest(str(place[-1]), known)}"
        if not nearest(str(place[-1]), known):
            said += f"; known here are {', '.join(known)}"
    elif kind == "missing":
        said = "it is missing; add it"
    elif kind == "value_error":
        said = str(first["ctx"]["error"])
    elif kind in ("model_type", "model_attributes_type", "dict_type"):
        said = f"found {quoted(first['input'])}; allowed is a table of keys"
    else:
        said = f"found {quoted(first['input'])}; {first['msg'][0].lower()}{first['msg'][1:]}"
    more = f" (and {len(findings) - 1} more)" if len(findings) > 1 else ""
    return f"{where}: key {key}: {said}{more}."


def _key(place: list[int | str]) -> str:
    text = ""
    for part in place:
        text += f"[{part + 1}]" if isinstance(part, int) else f".{plain_text(part[:80])}"
    return text.lstrip(".")


def _known_keys(place: list[int | str]) -> tuple[str, ...]:
    """Keys that the model allows at a place of the sheet."""
    model: Any = RunSheet
    for part in place:
        if isinstance(part, int):
            continue
        model = ScanPart if part == "scan" else model.model_fields[part].annotation
    return tuple(field.alias or name for name, field in model.model_fields.items())
