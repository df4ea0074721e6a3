"""Page, document, tables and result file show the same numbers.

Every number of the result table and of the table of cutoffs is taken from what a reader sees in
the page and in the document, and held against `result.json`, `cutoffs.csv` and `budget.csv`.
"""

from __future__ import annotations

import csv
import io
import json
import re
from decimal import ROUND_HALF_EVEN, Decimal

import pypdf
import pytest
from report_fixture import example

from hdetermine.files.resultfile import budget_csv, cutoffs_csv, result_json
from hdetermine.report.html import render_html
from hdetermine.report.pdf import render_pdf

SUPERSCRIPT = str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻", "0123456789-")
# 6.626(30) × 10⁻³⁴, (6.626 ± 0.059) × 10⁻³⁴, −0.45
NUMBER = re.compile(
    r"\(?(?P<value>[−+]?\d[\d ]*(?:\.[\d ]*\d)?)(?:\((?P<last>\d+)\)| ± (?P<u>[\d.]+)\))?"
    r"(?: ?× ?10(?P<power>[⁰¹²³⁴⁵⁶⁷⁸⁹⁻]+))?"
)


def even(text: str) -> str:
    return re.sub(r"\s+", " ", text.replace("\N{NARROW NO-BREAK SPACE}", " ")).strip()


def numbers(text: str) -> tuple[str, Decimal, Decimal | None]:
    """Digits as printed, and value and uncertainty as they are meant."""
    match = NUMBER.search(even(text))
    assert match, text
    digits = match["value"].replace(" ", "").replace("−", "-")
    power = int(match["power"].translate(SUPERSCRIPT)) if match["power"] else 0
    value = Decimal(digits).scaleb(power)
    uncertainty = None
    if match["last"]:
        places = -Decimal(digits).as_tuple().exponent
        uncertainty = Decimal(match["last"]).scaleb(power - places)
    elif match["u"]:
        uncertainty = Decimal(match["u"]).scaleb(power)
    return digits, value, uncertainty


def two_digits(uncertainty: Decimal | None) -> bool:
    """Whether an uncertainty is given to two significant digits (JCGM 100:2008, 7.2.6)."""
    return uncertainty is not None and len(uncertainty.as_tuple().digits) == 2


def agrees(shown: Decimal, exact: float) -> bool:
    """Whether a printed number is the exact one, rounded to the printed place."""
    place = Decimal(1).scaleb(shown.as_tuple().exponent)
    return Decimal(repr(exact)).quantize(place, rounding=ROUND_HALF_EVEN) == shown


@pytest.fixture(scope="module")
def d():
    return example()


@pytest.fixture(scope="module")
def document(d):
    return json.loads(result_json(d))


def page_table(raw: bytes, key: str) -> list[list[str]]:
    html = raw.decode()
    start = html.index(f'<caption id="table-{key}">')
    body = html[start : html.index("</table>", start)]
    rows = []
    for row in re.findall(r"<tr>(.*?)</tr>", body, re.DOTALL)[1:]:
        cells = re.findall(r"<t[hd][^>]*><bdi>(.*?)</bdi>", row, re.DOTALL)
        rows.append([even(cell) for cell in cells])
    return rows


@pytest.fixture(scope="module")
def page(d):
    return render_html(d)


@pytest.fixture(scope="module")
def pdf_text(d):
    reader = pypdf.PdfReader(io.BytesIO(render_pdf(d)))
    return even(" ".join(page.extract_text() for page in reader.pages))


def expected_result(document) -> dict[str, tuple[float, float | None]]:
    h, comparison = document["h"], document["comparison"]
    e = 1.602176634e-19  # C, exact (The International System of Units, 9th ed. (2019))
    return {
        "Planck constant h": (h["value_J_s"], h["standard_uncertainty_J_s"]),
        "h ± U": (h["value_J_s"], h["expanded_uncertainty_J_s"]),
        "coverage factor k": (h["coverage_factor"], None),
        "coverage probability p": (100.0 * h["coverage_probability"], None),
        "effective degrees of freedom": (h["effective_degrees_of_freedom"], None),
        "relative standard uncertainty": (100.0 * h["relative_standard_uncertainty"], None),
        "relative deviation": (100.0 * comparison["relative_deviation"], None),
        "Eₙ": (comparison["E_n"], None),
        "h in electronvolt seconds": (
            h["value_J_s"] / e,
            h["standard_uncertainty_J_s"] / e,
        ),
    }


def test_result_table_of_the_page(page, document):
    shown = {row[0]: row[1] for row in page_table(page, "result")}
    expected = expected_result(document)
    assert set(shown) == {*expected, "route"}
    for name, (value, uncertainty) in expected.items():
        _, printed, printed_u = numbers(shown[name])
        assert agrees(printed, value), name
        assert (printed_u is None) == (uncertainty is None)
        if uncertainty is not None:
            assert agrees(printed_u, uncertainty), name
            assert two_digits(printed_u), name


def test_result_table_of_the_document_is_that_of_the_page(page, pdf_text):
    squeezed = pdf_text.replace(" ", "")
    for row in page_table(page, "result"):
        assert (row[0] + row[1]).replace(" ", "") in squeezed, row


def test_result_line_says_what_the_table_says(page, pdf_text, document):
    h = document["h"]
    line = re.search(r'<p class="value">(.*?)<span', page.decode(), re.DOTALL)[1]
    for text in (line, pdf_text[pdf_text.index("h = (") :]):
        _, value, expanded = numbers(even(text).removeprefix("h = "))
        assert agrees(value, h["value_J_s"])
        assert agrees(expanded, h["expanded_uncertainty_J_s"])


def test_cutoffs_in_page_document_table_and_result_file(d, page, pdf_text, document):
    shown = page_table(page, "cutoffs")
    table = list(csv.DictReader(io.StringIO(cutoffs_csv(d).decode("utf-8-sig"))))
    assert len(shown) == len(table) == len(document["cutoffs"])
    used = 0
    for row, line, entry in zip(shown, table, document["cutoffs"], strict=True):
        assert row[0] == entry["scan"] == line["scan"]
        if not entry["used"]:
            continue
        used += 1
        assert float(line["wavelength_pm"]) == entry["wavelength_pm"]
        _, angle, _ = numbers(row[3])
        assert agrees(angle, entry["glancing_angle_deg"])
        _, wavelength, u = numbers(row[4])
        assert agrees(wavelength, entry["wavelength_pm"])
        assert agrees(u, entry["standard_uncertainty_pm"])
        assert two_digits(u)
        assert "".join(row[:5]).replace(" ", "") in pdf_text.replace(" ", "")
    assert used == len(d.used)


def test_budget_in_page_table_and_result_file(d, page, document):
    shown = [row for row in page_table(page, "budget") if len(row) > 5]
    table = {
        line["quantity"]: line
        for line in csv.DictReader(io.StringIO(budget_csv(d).decode("utf-8-sig")))
    }
    entries = {entry["quantity"]: entry for entry in document["budget"]}
    assert len(shown) == len(entries)
    assert set(table) == set(entries)
    for name, entry in entries.items():
        assert float(table[name]["contribution_J_s"]) == entry["contribution_J_s"]
        assert float(table[name]["variance_share"]) == entry["variance_share"]
    shares = sorted(numbers(row[-1])[1] for row in shown)
    exact = sorted(100.0 * entry["variance_share"] for entry in entries.values())
    assert all(agrees(one, other) for one, other in zip(shares, exact, strict=True))


def test_routes_in_page_and_result_file(page, document):
    names = {"linear propagation": "linear", "Monte Carlo": "monte_carlo", "posterior": "posterior"}
    for row in page_table(page, "routes"):
        entry = document["routes"][names[row[0]]]
        _, value, u = numbers(row[1])
        assert agrees(value.scaleb(-34), entry["value_J_s"])
        assert agrees(u.scaleb(-34), entry["standard_uncertainty_J_s"])
        assert two_digits(u)
        low, high = row[2].split(" to ")
        for text, end in zip((low, high), entry["interval_95_J_s"], strict=True):
            printed = numbers(text)[1]
            assert agrees(printed.scaleb(-34), end)
            assert printed.as_tuple().exponent == value.as_tuple().exponent


@pytest.mark.parametrize(
    ("text", "value", "uncertainty"),
    [
        ("6.626(30) × 10⁻³⁴ J s", "6.626e-34", "3.0e-36"),
        ("(6.626 ± 0.059) × 10⁻³⁴ J s", "6.626e-34", "5.9e-36"),
        ("−0.45 %", "-0.45", None),
        ("71.074 700(20)", "71.074700", "0.000020"),
    ],
)
def test_the_reader_of_this_test_reads_right(text, value, uncertainty):
    _, found, found_u = numbers(text)
    assert found == Decimal(value)
    assert found_u == (None if uncertainty is None else Decimal(uncertainty))


def test_a_wrong_digit_would_be_seen():
    assert agrees(Decimal("6.623"), 6.6229228)
    assert not agrees(Decimal("6.624"), 6.6229228)
    assert not agrees(Decimal("6.62"), 6.6251)
