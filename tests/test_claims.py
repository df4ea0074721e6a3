"""Claims: numbers as people write them, claim sheets, claim tables."""

from __future__ import annotations

import io
import math
import random
import re
from pathlib import Path

import openpyxl
import pytest

from hdetermine.classcheck.claim import Claim
from hdetermine.classcheck.claimheaders import understand_header
from hdetermine.classcheck.claims import read_claim
from hdetermine.classcheck.claimtable import read_claim_table
from hdetermine.classcheck.numeral import read_numeral
from hdetermine.errors import InputError

SHEET = """schema = 1
[h]
value = 6.55e-34
unit = "J s"
u = 0.04e-34
[[cutoff]]
tube_voltage_kV = 25
glancing_angle_deg = 7.05
[[cutoff]]
tube_voltage_kV = 20.0
wavelength_pm = 61.20
"""


def sheet(tmp_path, text):
    path = tmp_path / "claim.toml"
    path.write_bytes(text if isinstance(text, bytes) else text.encode())
    return read_claim(path, "alder", "claim.toml")


@pytest.mark.parametrize(
    ("text", "value", "step", "u"),
    [
        ("6.63e-34", 6.63e-34, 1e-36, None),
        ("6,63E-34", 6.63e-34, 1e-36, None),
        ("6.60e-34", 6.60e-34, 1e-36, None),
        ("6.63(4)e-34", 6.63e-34, 1e-36, 4e-36),
        ("6.63 x 10^-34", 6.63e-34, 1e-36, None),
        ("6,63·10⁻³⁴", 6.63e-34, 1e-36, None),
        ("6.6*10**(-34)", 6.6e-34, 1e-35, None),
        ("−5", -5.0, 1.0, None),
        ("0,123", 0.123, 1e-3, None),
    ],
)
def test_numbers_keep_their_last_place(text, value, step, u):
    numeral = read_numeral(text, "here")
    assert numeral.value == pytest.approx(value, rel=1e-12)
    assert numeral.step == pytest.approx(step, rel=1e-12)
    assert numeral.uncertainty == (None if u is None else pytest.approx(u, rel=1e-12))


@pytest.mark.parametrize(
    "text",
    ["", "1,234", "1,234.5", "1.234,5", "inf", "nan", "1e999", "1e-999", "٣.٥", "=1+1", "6e-34 J",
     "1 2", "0x10", "9" * 60, "e5", "--3", "\x1b[31m5"],
)  # fmt: skip
def test_what_is_no_number_is_refused(text):
    with pytest.raises(InputError) as refusal:
        read_numeral(text, "claims.csv, line 3")
    assert str(refusal.value).startswith("claims.csv, line 3")
    assert "\x1b" not in str(refusal.value)


def test_claim_sheet(tmp_path):
    claim = sheet(tmp_path, SHEET)
    assert claim.value_J_s == 6.55e-34
    assert claim.relative_u == pytest.approx(0.04 / 6.55)
    assert [cutoff.tube_voltage_kV for cutoff in claim.cutoffs] == [20.0, 25.0]
    assert claim.cutoffs[0].wavelength_pm.step == pytest.approx(0.01)
    assert claim.cutoffs[1].glancing_angle_deg.value == 7.05


def test_electronvolts_and_expanded(tmp_path):
    text = '[h]\nvalue = 4.10e-15\nunit = "eV s"\nexpanded = 0.08e-15\nk = 2\n'
    claim = sheet(tmp_path, text)
    # eV to J: CODATA 2022, exact elementary charge.
    assert claim.value_J_s == pytest.approx(4.10e-15 * 1.602176634e-19, rel=1e-12)
    assert claim.standard_uncertainty_J_s == pytest.approx(0.04e-15 * 1.602176634e-19, rel=1e-12)


def test_units_of_cutoffs(tmp_path):
    rows = {
        "wavelength_nm = 0.0612": 61.2,
        "wavelength_angstrom = 0.612": 61.2,
        "two_theta_deg = 14.1": 7.05,
    }
    for row, value in rows.items():
        cutoff = sheet(tmp_path, f"[[cutoff]]\ntube_voltage_kV = 20.0\n{row}\n").cutoffs[0]
        numeral = cutoff.wavelength_pm or cutoff.glancing_angle_deg
        assert numeral.value == pytest.approx(value)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "empty"),
        ("[h\n", "not valid TOML"),
        (b"\xff\xfe\x00", "UTF-8"),
        ("schema = 2\n", "schema must be 1"),
        ('group = "birch"\n', "make them agree"),
        ("[h]\nvalue = 6.6e-34\n", "unit of h is missing"),
        ('[h]\nvalue = 6.6e-34\nunit = "erg s"\n', "not known"),
        ('[h]\nvalue = "many"\nunit = "J s"\n', "not a number"),
        ('[h]\nvalue = true\nunit = "J s"\n', "must be a number"),
        ('[h]\nvalue = nan\nunit = "J s"\n', "not a number"),
        ('[h]\nvalue = 0.0\nunit = "J s"\n', "cannot be zero"),
        ('[h]\nvalue = 1e-34\nunit = "J s"\nu = -1e-35\n', "negative"),
        ('[h]\nvalue = 1e-34\nunit = "J s"\nu = 1e-35\nk = 2\n', "expanded"),
        ("[h]\nu = 1e-35\n", "without a value"),
        ("[h]\nvalu = 1e-34\n", "not known"),
        ("[[cutoff]]\nwavelength_pm = 60.0\n", "tube_voltage_kV is missing"),
        ("[[cutoff]]\ntube_voltage_kV = 20000.0\nwavelength_pm = 60.0\n", "check the unit"),
        ("[[cutoff]]\ntube_voltage_kV = 20.0\nwavelength_pm = -1.0\n", "cannot be a cutoff"),
        ("[[cutoff]]\ntube_voltage_kV = 20.0\nglancing_angle_deg = 200.0\n", "cannot be"),
        ("[[cutoff]]\ntube_voltage_kV=20.0\nwavelength_pm=6.0\nwavelength_nm=6.0\n", "twice"),
        ("[[cutoff]]\ntube_voltage_kV=20.0\nwavelength_pm=6.0\n" * 2, "two cutoffs"),
        ("note = 1\n", "holds no number"),
        ("x = " + "[" * 5000 + "]" * 5000, "nested"),
        ('[h]\nvalue = 1' + "0" * 5000 + '\nunit = "J s"\n', "number"),
    ],
)  # fmt: skip
def test_bad_sheets_are_refused_in_one_sentence(tmp_path, text, words):
    with pytest.raises(InputError, match=words) as refusal:
        sheet(tmp_path, text)
    assert "\n" not in str(refusal.value)


def table(tmp_path, text, name="claims.csv"):
    path = tmp_path / name
    path.write_bytes(text if isinstance(text, bytes) else text.encode())
    return read_claim_table(path)


@pytest.mark.parametrize(
    "text",
    [
        "group,h [J s],u [J s],wavelength 20 kV [pm]\nalder,6.55e-34,0.04e-34,61.2\n",
        "\ufeffgroup;h (J s);u (J s);lambda_20kV_pm\r\nalder;6,55e-34;0,04e-34;61,2\r\n",
        "group\th\tunit\tu\t20 kV [pm]\nalder\t6.55e-34\tJ s\t0.04e-34\t61.2\n",
        "# claims\ngroup,h,unit,u,λ 20 kV / nm\nalder,6.55e-34,J·s,0.04e-34,0.0612\n",
        "group,h [J s],U,k,remarks,wavelength 20 kV [pm]\nalder,6.55e-34,8e-36,2,late,61.2\n",
    ],
)
def test_claim_tables_in_the_forms_people_have(tmp_path, text):
    (entry,), _ = table(tmp_path, text)
    assert entry.fault == ""
    assert entry.claim.value_J_s == pytest.approx(6.55e-34)
    assert entry.claim.standard_uncertainty_J_s == pytest.approx(4e-36)
    assert entry.claim.cutoffs[0].wavelength_pm.value == pytest.approx(61.2)


def test_spreadsheet_of_claims(tmp_path):
    book = openpyxl.Workbook()
    for row in (
        ["group", "h [eV s]", "u", "theta 20 kV [deg]"],
        ["alder", 4.1e-15, 4e-17, 8.85],
        [7, "4.12e-15", None, None],
    ):
        book.active.append(row)
    stream = io.BytesIO()
    book.save(stream)
    entries, _ = table(tmp_path, stream.getvalue(), "claims.xlsx")
    assert [entry.group for entry in entries] == ["alder", "7"]
    assert entries[0].claim.cutoffs[0].glancing_angle_deg.value == pytest.approx(8.85)
    assert entries[0].claim.h.step == 0.0  # the writing of a cell is not known
    assert entries[1].claim.h.step == pytest.approx(1e-17)


def test_a_bad_row_does_not_stop_the_others(tmp_path):
    entries, remarks = table(
        tmp_path,
        'group,h,unit,mood\nalder,6.5e-34,J s,good\nbirch,6.5e-34,furlong,\ncedar,"1,234",J s,\n'
        ",6.5e-34,J s,\nelder,,,\n",
    )
    assert [bool(entry.fault) for entry in entries] == [False, True, True, True, True]
    assert "furlong" in entries[1].fault
    assert "line 4" in entries[2].fault
    assert "mood" in remarks[0]


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("name,h [J s]\nalder,1e-34\n", 'called "group"'),
        ("group,mass\nalder,3\n", "holds a claim"),
        ("group,h [erg s]\nalder,3\n", "not known"),
        ("group,h [J s],h [J s]\nalder,3,3\n", "twice"),
        ("group,theta 20 kV\nalder,3\n", "no unit"),
        ("group,h [J s]\nalder,6,5e-34\n", "semicolons"),
        ('group,h [J s]\n"alder,3\n', "quotation marks"),
        ("%PDF-1.7", "not a table"),
        (b"PK\x03\x04rubbish", "damaged"),
    ],
)
def test_tables_that_cannot_be_read(tmp_path, text, words):
    with pytest.raises(InputError, match=words):
        table(tmp_path, text)


@pytest.mark.parametrize(
    ("header", "role", "key"),
    [
        ("u(h) [J s]", "u", ""), ("U(h) / J s", "expanded", ""), ("u_h", "u", ""),
        ("Coverage factor", "k", ""), ("2theta 22.5 kV (deg)", "cutoff", "two_theta_deg"),
        ("glancing angle at 20,5 kV [°]", "cutoff", "glancing_angle_deg"),
        ("h_eV_s", "value", ""), ("telephone", "other", ""),
    ],
)  # fmt: skip
def test_headers(header, role, key):
    column = understand_header(header, "here")
    assert (column.role, column.key) == (role, key)


def test_mutated_claims_end_in_a_claim_or_a_sentence(tmp_path):
    """Seeded mutations of both forms: never anything but a claim or an InputError."""
    rng = random.Random(5)
    csv_text = "group,h [J s],u [J s],wavelength 20 kV [pm]\nalder,6.55e-34,4e-36,61.2\n"
    pieces = [
        "\0",
        "=",
        "1e999",
        "[",
        "{",
        '"',
        ",",
        ";",
        "\n",
        "🙂",
        "kV",
        "-",
        "é",
        "'",
        "#",
        "\t",
    ]
    outcomes = set()
    for _ in range(500):
        for base, read in ((SHEET, sheet), (csv_text, table)):
            text = list(base)
            for _ in range(rng.randint(1, 6)):
                place = rng.randrange(len(text))
                if rng.random() < 0.5:
                    text[place] = rng.choice(pieces)
                else:
                    del text[place : place + rng.randint(1, 12)]
            try:
                result = read(tmp_path, "".join(text))
            except InputError as error:
                outcomes.add("two lines" if "\n" in str(error) else "refused")
            else:
                if isinstance(result, Claim):
                    value = result.value_J_s
                    assert math.isnan(value) or (math.isfinite(value) and value != 0.0)
                outcomes.add("read")
    assert outcomes == {"read", "refused"}


def test_a_message_called_the_column_of_h_value(tmp_path):
    entries, _ = table(tmp_path, "group,h [J s],U\nalder,abc,1e-36\nbirch,6.6e-34,abc\n")
    assert [entry.claim for entry in entries] == [None, None]
    assert entries[0].fault.startswith('claims.csv, line 2, h: "abc" is not a number')
    assert entries[1].fault.startswith('claims.csv, line 3, U: "abc" is not a number')


def test_claims_of_the_readme_are_read(tmp_path):
    readme = (Path(__file__).resolve().parents[1] / "README.md").read_text("utf-8")
    section = readme.split("\n## Checking a class\n")[1].split("\n## ")[0]
    blocks = dict(re.findall(r"```(\w+)\n(.*?)```", section, re.S))
    claim = sheet(tmp_path, blocks["toml"])
    assert claim.standard_uncertainty_J_s * 1e34 == pytest.approx(0.04)
    assert claim.cutoffs[0].wavelength_pm.value == 61.2
    (alder, birch), remarks = table(tmp_path, blocks["text"])
    assert remarks == ()
    assert alder.claim.standard_uncertainty_J_s * 1e34 == pytest.approx(0.04)
    assert [cutoff.tube_voltage_kV for cutoff in alder.claim.cutoffs] == [20.0, 25.0]
    assert birch.claim.h.step * 1e34 == pytest.approx(0.1)
    cells = [row.split("|")[1] for row in section.splitlines() if row.startswith("| `")]
    headers = [name for cell in cells for name in re.findall(r"`([^`]+)`", cell)]
    assert len(headers) == 9
    for header in headers:
        assert understand_header(header, "README").role != "other", header
    for written in re.findall(r"`(6\.63[^`]*)`", section):
        assert read_numeral(written, "README").value * 1e34 == pytest.approx(6.63)
