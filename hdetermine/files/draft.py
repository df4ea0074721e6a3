"""A run sheet drafted from what a folder holds, every guess marked as one."""

from __future__ import annotations

import json
import re
from collections.abc import Iterable, Iterator
from pathlib import Path

from hdetermine.errors import InputError
from hdetermine.files import defaults
from hdetermine.files.findings import Finding, Findings, look_through, own_name
from hdetermine.files.plaintext import plain_text, quoted
from hdetermine.files.sheetcheck import PLACEHOLDER
from hdetermine.physics.crystals import KINDS, find_kind
from hdetermine.physics.lines import anodes

GUESS = "# GUESS"
FILL_IN = "# FILL IN"

_METAL_NAMES = {
    "Cr": "chromium chrom chrome cromo",
    "Fe": "iron eisen fer hierro ferro",
    "Co": "cobalt kobalt cobalto",
    "Cu": "copper kupfer cuivre cobre",
    "Mo": "molybdenum molybdan molybdän molybdène molibdeno molibdênio",
    "Rh": "rhodium rodio",
    "Ag": "silver silber argent plata prata",
    "W": "tungsten wolfram tungstène tungsteno tungstênio wolframio",
}
_EXPLANATION = """\
# Drafted from the tables in this folder; nothing in it was measured or checked.
# Lines marked GUESS were guessed: read each, correct it, and take the mark away.
# Lines marked FILL IN hold a "?" that only you can replace; until then the run is refused.
# CHECK says what is wrong with a table.
# Lines that are commented out show the default that applies; state your own where you can.
"""


def draft_sheet(folder: str | Path) -> str:
    """Draft a run sheet for a folder of scan tables.

    Parameters
    ----------
    folder : str or Path
        Folder with the tables.

    Returns
    -------
    str
        The text of a run sheet. `read_run` accepts it once its "?" are filled in.

    Raises
    ------
    InputError
        If there is no such folder or no table in it.
    """
    path = Path(folder)
    findings = look_through(path)
    if not findings.scans:
        reason = f" (first trouble: {findings.left_out[0][:-1]})" if findings.left_out else ""
        raise InputError(
            f"{quoted(path)}: there is no scan table in this folder{reason}; put "
            "the counts into it as CSV, text, xlsx or ods."
        )
    lines = [_EXPLANATION, "schema = 1", "", "[run]"]
    lines.append(_line("title", Finding(own_name(path), "the folder's name")))
    lines += ["# date = 2026-01-31", '# operator = ""', '# laboratory = ""', ""]
    lines += _tube(findings)
    lines += _crystal(findings)
    lines += ["[goniometer]", *_silent(defaults.ZERO), _silent_resolution(), ""]
    lines += ["[counter]", *_silent(defaults.DEAD_TIME)]
    lines += ['# dead_time_model = "nonparalysable"', ""]
    lines += _scans(findings)
    if findings.left_out:
        lines += ["", "# Not read as a scan:"]
        lines += [f"# {plain_text(reason)}" for reason in findings.left_out]
    return "\n".join(lines).rstrip() + "\n"


def _tube(findings: Findings) -> Iterator[str]:
    anode = _only(_anodes_in(findings.words))
    yield "[tube]"
    yield _line("anode", _named(anode), 'symbol of the anode, for instance "Cu"')
    yield from _silent(defaults.WORK_FUNCTION)
    yield from ("", "[tube.voltage]   # true = gain * displayed + offset")
    for rule in (defaults.GAIN, defaults.OFFSET, defaults.REPEATABILITY, defaults.RIPPLE):
        yield from _silent(rule)
    yield ""


def _crystal(findings: Findings) -> Iterator[str]:
    material = _only(_crystals_in(findings.words))
    yield "[crystal]"
    yield _line("material", _named(material), 'the crystal, for instance "LiF" or "NaCl"')
    kind = find_kind(material) if material else None
    reflection = next(iter(kind.spacings_pm)) if kind else None
    yield _line(
        "reflection", Finding(reflection, "the usual one"), 'Miller indices, for instance "200"'
    )
    if kind and reflection:
        yield f"# spacing_pm = {{ value = {kind.spacings_pm[reflection]:.6g}, u = … }}"
    else:
        yield "# spacing_pm = { value = …, u = … }   # needed if the crystal is not a known one"
    yield from (*_silent(defaults.TEMPERATURE), "")


def _scans(findings: Findings) -> Iterator[str]:
    """What holds for every scan, then the scans one by one."""
    scans = findings.scans
    dwell = _common(scan.dwell_s for scan in scans)
    needed = [scan for scan in scans if not scan.has_dwell_column]
    if dwell is not None or all(scan.dwell_s.value is None for scan in needed):
        if needed:
            yield "[every_scan]"
            yield _line("dwell_s", dwell or Finding(), "counting time of each point, seconds")
            yield ""
        needed = []
    for scan in scans:
        yield "[[scan]]"
        yield _line("file", Finding(scan.file, is_guess=False))
        yield _line("tube_voltage_kV", scan.voltage_kV, "displayed tube voltage, kV")
        if scan.current_mA.value is not None:
            yield _line("emission_current_mA", scan.current_mA)
        if scan in needed:
            yield _line("dwell_s", scan.dwell_s, "counting time of each point, seconds")
        for key, finding in scan.settings.items():
            yield _line(key, finding, finding.whence)
        if scan.trouble:
            yield f"# CHECK: {scan.trouble}"
        yield ""


def _common(findings: Iterable[Finding]) -> Finding | None:
    """The one finding that all share, if they do."""
    found = list(findings)
    values = {finding.value for finding in found}
    return found[0] if len(values) == 1 and found[0].value is not None else None


def _line(key: str, finding: Finding, needed: str = "") -> str:
    """One line of the sheet, with its mark."""
    if finding.value is None:
        return f'{key} = "{PLACEHOLDER}"   {FILL_IN}: {needed}'
    value = finding.value
    text = json.dumps(value, ensure_ascii=False) if isinstance(value, str | bool) else f"{value:g}"
    if isinstance(value, float) and "." not in text:
        text += ".0"
    whence = plain_text(finding.whence)
    return f"{key} = {text}" + (f"   {GUESS}: {whence}" if finding.is_guess else "")


def _silent(rule: defaults.InputRule) -> Iterator[str]:
    """A commented line that shows a default and its reason."""
    name, value = rule.key.rpartition(".")[2], rule.value
    spread = f"u = {rule.u:g}" if rule.u is not None else f"half_width = {rule.half_width:g}"
    yield f"# {name} = {{ value = {value:g}, {spread} }}   # default: {rule.reason}"


def _silent_resolution() -> str:
    return "# resolution_deg = { value = …, u = … }   # only if known; the lines usually tell"


def _named(name: str | None) -> Finding:
    return Finding(name, "named in the folder, a file's name or a title")


def _only(names: set[str]) -> str | None:
    return next(iter(names)) if len(names) == 1 else None


def _tokens(words: Iterable[str]) -> set[str]:
    return {token for word in words for token in re.split(r"[\W\d_]+", word) if token}


def _anodes_in(words: Iterable[str]) -> set[str]:
    tokens = _tokens(words)
    lower = {token.casefold() for token in tokens}
    found = set()
    for symbol in anodes():
        spelled = set(_METAL_NAMES.get(symbol, "").split())
        as_symbol = symbol in tokens or (len(symbol) > 1 and symbol.casefold() in lower)
        if as_symbol or lower & spelled:
            found.add(symbol)
    return found


def _crystals_in(words: Iterable[str]) -> set[str]:
    lower = {token.casefold() for token in _tokens(words)}
    return {
        kind.material
        for kind in KINDS
        if lower & {kind.material.casefold(), *kind.other_names}
        and len(kind.material) > 2  # Si and Ge are syllables too often
    }
