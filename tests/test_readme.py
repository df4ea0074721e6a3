"""The README says what the program does: tables, limits, commands and code are compared."""

from __future__ import annotations

import importlib
import re
from pathlib import Path

import click
import pytest

from hdetermine.cli import COMMANDS, root
from hdetermine.files import limits
from hdetermine.files.defaults import RULES, InputRule
from hdetermine.files.sheetmodel import (
    ContinuumPart,
    CounterPart,
    CrystalPart,
    GoniometerPart,
    RunPart,
    ScanPart,
    TableReading,
    TubePart,
    VoltagePart,
)
from hdetermine.physics.crystals import KINDS
from hdetermine.physics.lines import anodes

ROOT = Path(__file__).resolve().parents[1]
README = (ROOT / "README.md").read_text("utf-8")
ROWS = {
    tuple(cell.strip() for cell in line.strip("|").split("|"))
    for line in README.splitlines()
    if line.startswith("|")
}


def default_text(rule: InputRule) -> str:
    """A default as the README's tables write it."""
    unit = "" if rule.unit == "1" else f" {rule.unit}"
    if rule.value is None:
        return "none" if rule.u is None and rule.half_width is None else "see the crystals"
    spread = f"± {rule.half_width:g}" if rule.half_width is not None else f"u = {rule.u:g}"
    return f"{rule.value:g}{unit}, {spread}"


@pytest.mark.parametrize("rule", RULES, ids=lambda rule: rule.key)
def test_every_input_stands_with_its_default_and_reason(rule):
    (row,) = [row for row in ROWS if row[0] == f"`{rule.key}`"]
    if rule.key == "crystal.spacing_pm":
        assert "crystals" in row[2]
        return
    assert row[2] == default_text(rule)
    assert row[3] == rule.reason


SECTIONS = {
    "run.": RunPart,
    "tube.": TubePart,
    "tube.voltage.": VoltagePart,
    "crystal.": CrystalPart,
    "goniometer.": GoniometerPart,
    "counter.": CounterPart,
    "continuum.": ContinuumPart,
    "every_scan.": TableReading,
    "scan.": ScanPart,
}


@pytest.mark.parametrize("section", SECTIONS)
def test_every_key_of_the_run_sheet_is_explained(section):
    for name in SECTIONS[section].model_fields:
        if (section, name) == ("tube.", "voltage"):
            continue
        # What may stand in [every_scan] is explained once, with [[scan]].
        place = "scan." if section == "every_scan." else section
        assert any(row[0] == f"`{place}{name}`" for row in ROWS), f"{section}{name}"


@pytest.mark.parametrize("kind", KINDS, ids=lambda kind: kind.material)
def test_every_crystal_stands_with_its_spacing(kind):
    for reflection, spacing in kind.spacings_pm.items():
        (row,) = [row for row in ROWS if row[:2] == (kind.material, reflection)]
        assert row[2] == f"{spacing:.3f} ± {kind.half_width_relative * spacing:.3f}"
        assert float(row[3]) == kind.reference_temperature_C
        assert row[4] == (
            f"{1e6 * kind.expansion_per_K:.2f} ± {1e6 * kind.expansion_half_width_per_K:.2f}"
        )


def test_every_anode_is_named():
    for element in anodes():
        assert re.search(rf"\b{element}\b", README)


def test_every_limit_stands_with_its_number():
    for name, value in vars(limits).items():
        if name.startswith("MAX_"):
            assert any(
                row[0] == f"`{name}`" and row[2] == f"{value:,}".replace(",", " ") for row in ROWS
            ), name


@pytest.mark.parametrize("name", COMMANDS)
def test_every_command_and_option_is_explained(name):
    command = importlib.import_module(COMMANDS[name][0]).command
    section = re.search(rf"^### `hdetermine {name}\b.*?(?=^##)", README, re.M | re.S)
    assert section, name
    for parameter in command.params:
        if isinstance(parameter, click.Option):
            for option in parameter.opts:
                assert f"`{option}" in section[0], f"{name} {option}"


def test_commands_named_in_the_readme_exist():
    for name in re.findall(r"(?:`|bin/)hdetermine ([a-z]+)\b", README):
        assert name in COMMANDS or name in ("analyze",), name
    assert root.name == "root"


def block(marker: str) -> str:
    found = re.search(rf"<!-- ci: {marker} -->\n+```\w*\n(.*?)```", README, re.S)
    assert found, marker
    return found[1]


def test_the_commands_that_are_run_on_every_change_are_there():
    assert "hdetermine analyse demo_runs/molybdenum_rocksalt -o out" in block("demo")
    assert len(block("demo").strip().splitlines()) == 1
    assert len(block("tests").strip().splitlines()) == 1
    assert len(block("python").strip().splitlines()) <= 4


def test_the_python_lines_run(monkeypatch, capsys):
    monkeypatch.chdir(ROOT)
    exec(compile(block("python"), "README.md", "exec"), {})
    assert "e-34" in capsys.readouterr().out


def test_the_cautions_are_there():
    for words in ("interlock", "type-approved", "radiation protection", "not a calibration cert"):
        assert words in README
