"""The summary for the terminal: what it says, and that names cannot do harm in it."""

import re
import unicodedata
from dataclasses import replace

import pytest
from report_fixture import example

from hdetermine.report.summary import summary_lines

# Titles and names as hostile students write them.
HOSTILE = (
    "\x1b]0;owned\x07title",
    "\x1b[31mred\x1b[0m",
    "two\nlines\rback",
    "tab\there \x00 nul \x9b31m",
    "turned \u202e around \u2066 and \u200f back",
    "x" * 4000,
)


@pytest.fixture(scope="module")
def sound():
    return example()


def text_of(d):
    return "\n".join(summary_lines(d))


def plain_spaces(text):
    """Thin and non-breaking spaces as plain ones, the true minus as a hyphen."""
    return re.sub(r"[\u00a0\u2009\u202f]", " ", text).replace("\u2212", "-")


def test_what_a_person_wants_to_see(sound):
    text = plain_spaces(text_of(sound))
    assert text.startswith("Bench 3, molybdenum tube\n")
    value, expanded = (1e34 * x for x in (sound.h.value_J_s, sound.h.expanded_uncertainty_J_s))
    shown = re.search(r"h = \(([\d.]+) ± ([\d.]+)\) × 10⁻³⁴ J s", text)
    assert float(shown[1]) == pytest.approx(value, abs=0.0006)
    assert float(shown[2]) == pytest.approx(expanded, rel=0.05)
    assert "k = 1.97" in text
    assert "p = 95 %" in text
    assert "linear" in text
    deviation = 100.0 * sound.comparison.relative_deviation
    assert f"deviation from the SI value {deviation:+.2f} %" in text
    assert f"E_n = {sound.comparison.E_n:.2f}" in text
    assert sound.comparison.verdict in text


def rows_of(lines):
    """The lines of the table of cutoffs, split into their columns."""
    split = [re.split(r" {2,}", plain_spaces(line).strip()) for line in lines]
    return {row[0]: row[1:] for row in split if len(row) == 4 and row[0] != "scan"}


def test_every_used_cutoff_has_its_line(sound):
    rows = rows_of(summary_lines(sound))
    assert set(rows) == {cutoff.scan for cutoff in sound.used}
    for cutoff in sound.used:
        voltage, angle, wavelength = rows[cutoff.scan]
        assert float(voltage) == pytest.approx(cutoff.tube_voltage_kV, abs=0.0051)
        assert float(angle) == pytest.approx(cutoff.glancing_angle_deg, abs=0.00051)
        assert float(wavelength.split("(")[0]) == pytest.approx(cutoff.wavelength_pm, abs=0.0051)


def test_refused_scans_are_shown_with_their_reasons(sound):
    assert sound.refused
    for cutoff in sound.refused:
        (line,) = [one for one in summary_lines(sound) if cutoff.reason in one]
        assert line.strip().startswith(cutoff.scan)
    reason = sound.refused[0].reason
    assert reason not in text_of(example(refused=False))


def test_the_largest_contributions_are_named_with_their_shares(sound):
    (line,) = [one for one in map(plain_spaces, summary_lines(sound)) if "is limited by" in one]
    shares = [int(share) for share in re.findall(r"\((\d+) %", line)]
    assert len(shares) == 3
    assert shares == sorted(shares, reverse=True)
    # Voltage gain 45 %, angle zero 23 %, and the two inputs of the shape near the limit 20 %.
    assert shares == [45, 23, 20]
    assert "common to all voltages" in line


def test_failed_checks_and_remarks(sound):
    text = text_of(sound)
    assert "exponent: Wavelength falls with another power of voltage." in text
    assert "The line passes through the origin." not in text  # it passed
    assert "ne dropout to zero was found" in text
    passed = replace(
        sound,
        checks=tuple(replace(check, passed=True) for check in sound.checks),
        run=replace(sound.run, remarks=()),
    )
    assert "another power" not in text_of(passed)
    assert "Remarks" not in text_of(passed)


def test_untitled_run():
    assert text_of(example(title="")).startswith("untitled run\n")


def harmless(text):
    """Only printable characters and newlines; none that turns the direction of writing."""
    for character in text.replace("\n", ""):
        assert unicodedata.category(character) not in {"Cc", "Cf", "Cs", "Co"}, repr(character)


@pytest.mark.parametrize("text", HOSTILE, ids=range(len(HOSTILE)))
def test_control_characters_are_inert(sound, text):
    cutoffs = tuple(
        replace(cutoff, scan=text + str(i), reason=text if not cutoff.used else "")
        for i, cutoff in enumerate(sound.cutoffs)
    )
    run = replace(sound.run, title=text, operator=text, remarks=(text,))
    checks = tuple(replace(check, passed=False, meaning=text) for check in sound.checks)
    scale = replace(sound.angle_scale, remarks=(text,))
    hostile = replace(sound, cutoffs=cutoffs, run=run, checks=checks, angle_scale=scale)
    lines = summary_lines(hostile)
    harmless("\n".join(lines))
    # One line a statement, whatever newlines a name holds; and none without end.
    assert not any("\n" in line or "\r" in line for line in lines)
    assert max(len(line) for line in lines) < 1200


def test_long_names_keep_the_columns(sound):
    cutoffs = tuple(
        replace(cutoff, scan=f"{'a_very_long_name_' * 5}{i}")
        for i, cutoff in enumerate(sound.cutoffs)
    )
    lines = [line for line in summary_lines(replace(sound, cutoffs=cutoffs)) if "a_very_lo" in line]
    assert len(lines) == len(cutoffs)
    table = [line for line in lines if re.search(r"\d\.\d{3} ", line)]
    assert len({line.index("…") for line in table}) == 1
    assert len(table) == len(sound.used)
    assert len({len(line) for line in table}) == 1
    assert all(len(line) < 100 for line in table)
