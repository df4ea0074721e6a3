"""The document: read back, rendered, and deaf to what student text would like it to do."""

from __future__ import annotations

import io
import re
import shutil
import subprocess
from dataclasses import replace

import pypdf
import pytest
from report_fixture import example

from hdetermine.errors import InputError
from hdetermine.report.document import report_document
from hdetermine.report.pdf import render_pdf, replaced, run_date

FEW = (25.0, 30.0)
HOSTILE = [
    "#let x = 1",
    "#panic() $ x $ `raw` *bold* _it_ <label> @ref",
    "<script>alert(1)</script> </svg>",
    "\x1b]0;owned\x07",
    "\u202eesrever",
    '=HYPERLINK("x")',
    "\\u{41} // comment /* more",
]


def read(raw: bytes) -> pypdf.PdfReader:
    return pypdf.PdfReader(io.BytesIO(raw))


def text_of(raw: bytes) -> str:
    """All text, white space made even; fonts may hide a narrow space as a plain one."""
    whole = " ".join(page.extract_text() for page in read(raw).pages)
    return re.sub(r"\s+", " ", whole.replace("\N{NARROW NO-BREAK SPACE}", " "))


def titles(outline) -> list[str]:
    found = []
    for entry in outline:
        found += titles(entry) if isinstance(entry, list) else [entry.title]
    return found


def structure(node, depth=0) -> list[str]:
    """Types of all structure elements of a tagged PDF."""
    node = node.get_object()
    found = [node["/S"]] if "/S" in node else []
    children = node.get("/K", [])
    for child in children if isinstance(children, list) else [children]:
        child = child.get_object() if hasattr(child, "get_object") else child
        if isinstance(child, dict) and ("/S" in child or "/K" in child):
            found += structure(child, depth + 1)
    return found


def alternatives(node) -> list[str]:
    node = node.get_object()
    found = [str(node["/Alt"])] if "/Alt" in node else []
    children = node.get("/K", [])
    for child in children if isinstance(children, list) else [children]:
        child = child.get_object() if hasattr(child, "get_object") else child
        if isinstance(child, dict) and "/S" in child:
            found += alternatives(child)
    return found


@pytest.fixture(scope="module")
def raw():
    return render_pdf(example())


@pytest.fixture(scope="module")
def pdf(raw):
    return read(raw)


@pytest.fixture(scope="module")
def text(raw):
    return text_of(raw)


# --- standards --------------------------------------------------------------------------------


def test_claims_both_standards_in_its_metadata(pdf):
    """PDF/UA-1: ISO 14289-1, clause 5; PDF/A-2a: ISO 19005-2, clause 6.6.4.

    The compiler refuses to write a file that breaks either.
    """
    xmp = pdf.xmp_metadata.stream.get_data().decode()
    assert re.search(r"pdfuaid:part[^0-9]*1", xmp)
    assert re.search(r"pdfaid:part[^0-9]*2", xmp)
    assert re.search(r"pdfaid:conformance[^A-Z]*A", xmp)


def test_language_title_and_tags(pdf):
    root = pdf.trailer["/Root"]
    assert root["/Lang"] == "en-GB"
    assert root["/MarkInfo"]["/Marked"]
    assert root["/ViewerPreferences"]["/DisplayDocTitle"]
    assert pdf.metadata.title == "Planck constant from X-ray tube spectra: Bench 3, molybdenum tube"
    assert pdf.metadata.author == "Group 7"
    kinds = structure(root["/StructTreeRoot"])
    for kind in ("/H1", "/Table", "/TH", "/TD", "/Figure", "/Formula", "/L"):
        assert kind in kinds, kind


def test_every_picture_and_equation_has_an_alternative(pdf):
    found = alternatives(pdf.trailer["/Root"]["/StructTreeRoot"])
    assert sum(len(one) > 60 for one in found) >= 6 + 1 + 9 * 2
    assert any(one.startswith("lambda equals 2 d") for one in found)
    assert any("largest is" in one for one in found)


def test_all_fonts_are_embedded_and_no_picture_is_a_raster(pdf):
    for page in pdf.pages:
        resources = page["/Resources"]
        for font in resources.get("/Font", {}).values():
            font = font.get_object()
            inner = font.get("/DescendantFonts", [font])[0].get_object()
            descriptor = inner["/FontDescriptor"]
            assert any(key in descriptor for key in ("/FontFile2", "/FontFile3")), font
        assert not page.images


def test_bookmarks(pdf):
    found = titles(pdf.outline)
    order = ["Result", "Inverse relation", "Cutoffs", "Uncertainty budget",
             "Three routes to the uncertainty", "Scans", "Angle scale", "Posterior",
             "Consistency checks", "The result read backwards", "What to improve",
             "Scans without a cutoff", "Method in short", "Cautions", "Provenance"]  # fmt: skip
    assert [title for title in found if title in order] == order
    assert sum(title.startswith("scan_") for title in found) == 10


# --- content ----------------------------------------------------------------------------------


def test_text(text):
    assert "h = (6.623 ± 0.053) × 10−34 J s" in text.replace("⁻³⁴", "−34")
    assert "The result agrees with the SI value within its expanded uncertainty." in text
    assert "a characteristic line stands inside the edge" in text
    assert "SHA-256" in text
    assert "default" in text
    for words in ("ionising radiation", "bypassed interlock", "not a calibration certificate"):
        assert words in text


def test_page_numbers(pdf):
    pages = [re.sub(r"\s+", " ", page.extract_text()) for page in pdf.pages]
    assert 8 <= len(pages) <= 20
    for number, page in enumerate(pages, start=1):
        assert f"Page {number} of {len(pages)}" in page


def test_a_table_over_several_pages_repeats_its_header():
    d = example(FEW, refused=False)
    document = report_document(d)
    budget = document.tables["budget"]
    long = replace(budget, groups=tuple(replace(one, rows=one.rows * 8) for one in budget.groups))
    tables = {**document.tables, "budget": long}
    raw = render_pdf(d, document=replace(document, tables=tables))
    pages = [re.sub(r"\s+", " ", page.extract_text()) for page in read(raw).pages]
    with_rows = [page for page in pages if "gain of the voltage display tube.voltage.gain" in page]
    assert len(with_rows) >= 2
    assert all("sensitivity contribution" in page for page in with_rows[:2])


@pytest.mark.parametrize(
    ("paper", "size"), [("a4", (595.276, 841.89)), ("us-letter", (612.0, 792.0))]
)
def test_paper(paper, size):
    box = read(render_pdf(example(FEW), paper=paper)).pages[0].mediabox
    assert (float(box.width), float(box.height)) == pytest.approx(size, abs=0.01)


def test_unknown_paper():
    with pytest.raises(InputError, match="use one of a4, us-letter"):
        render_pdf(example(FEW), paper="a3")


@pytest.mark.parametrize("paper", ["a4", "us-letter"])
def test_brief_is_one_page(paper):
    pdf = read(render_pdf(example(), paper=paper, brief=True))
    assert len(pdf.pages) == 1
    assert "interlocked" in pdf.pages[0].extract_text()


@pytest.mark.parametrize("number", [18, 60])
def test_brief_of_many_scans_is_one_page_too(number):
    voltages = tuple(20.0 + 20.0 * i / number for i in range(number))
    raw = render_pdf(example(voltages, refused=False), brief=True)
    assert len(read(raw).pages) == 1
    assert f"scan_{voltages[-1]:.0f}kV" in text_of(raw)


# --- what is not there ------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("d", "said"),
    [
        (example((30.0,), refused=False), "cannot be tested"),
        (example(FEW, lines=False), "No characteristic line was found"),
        (example(FEW, posterior="absent"), "No posterior was sampled"),
        (example(FEW, posterior="not converged"), "The chain has not converged"),
        (example(FEW, refused=False), "No scan was refused."),
        (replace(example(FEW), improvements=()), "No single input offers an improvement."),
    ],
    ids=["one voltage", "no lines", "no posterior", "no convergence", "no refusal", "no gain"],
)
def test_what_is_missing_is_said(d, said):
    assert said in text_of(render_pdf(d))


def test_a_run_without_title_operator_or_date():
    d = example(FEW, title="", operator="", truth=False)
    pdf = read(render_pdf(replace(d, run=replace(d.run, date="", laboratory=""))))
    assert pdf.metadata.title == "Planck constant from X-ray tube spectra"
    assert pdf.metadata.author is None


# --- the same bytes ---------------------------------------------------------------------------


def test_same_bytes_and_date_of_the_run(monkeypatch):
    monkeypatch.delenv("SOURCE_DATE_EPOCH", raising=False)
    first = render_pdf(example(FEW))
    assert render_pdf(example(FEW)) == first
    assert read(first).metadata.creation_date.strftime("%Y-%m-%d") == "2026-03-12"


def test_date_from_the_environment_where_the_run_has_none(monkeypatch):
    d = example(FEW)
    undated = replace(d, run=replace(d.run, date="last spring"))
    monkeypatch.setenv("SOURCE_DATE_EPOCH", "86400")
    assert read(render_pdf(undated)).metadata.creation_date.strftime("%Y-%m-%d") == "1970-01-02"


@pytest.mark.parametrize(
    ("stated", "year"),
    [("4000000000", 2096), ("4000000001", 1970), ("9" * 12, 1970), ("9" * 5000, 1970),
     ("-1", 1970), ("\u0663" * 9, 1970), ("soon", 1970)],
)  # fmt: skip
def test_an_impossible_date_in_the_environment(monkeypatch, stated, year):
    """A SOURCE_DATE_EPOCH beyond every calendar ended in a traceback of the compiler."""
    monkeypatch.setenv("SOURCE_DATE_EPOCH", stated)
    d = example((30.0,), lines=False, posterior="absent", refused=False)
    raw = render_pdf(replace(d, run=replace(d.run, date="")), brief=True)
    assert read(raw).metadata.creation_date.year == year


@pytest.mark.parametrize(
    ("text", "date"),
    [("2026-03-12", (2026, 3, 12)), ("2026-03-12T10:00", (2026, 3, 12)), ("12.3.2026", None),
     ("", None), ("2026-13-01", None), ("2026-02-30", None)],
)  # fmt: skip
def test_run_date(text, date):
    assert run_date(text) == date


# --- hostile and foreign text -----------------------------------------------------------------


@pytest.mark.parametrize("title", HOSTILE)
def test_text_of_a_run_stays_text(title):
    d = example(FEW, title=title, operator=title)
    cutoffs = tuple(replace(one, remarks=(title,)) for one in d.cutoffs)
    raw = render_pdf(replace(d, cutoffs=cutoffs))
    shown = re.sub(r"[\x00-\x1f\u202e]", "", title)
    assert read(raw).metadata.title.endswith(shown)
    assert re.sub(r"\s+", "", shown) in re.sub(r"\s+", "", text_of(raw))


@pytest.mark.parametrize(
    "title", ["Grüße, Λάμδα, Опыт", "实验 実験", "\U0001f9ea\U000f0000", "\ue000"]
)
def test_any_script_gives_a_document(title):
    assert len(read(render_pdf(example(FEW, title=title), brief=True)).pages) == 1


def test_characters_without_a_glyph_become_squares():
    assert replaced({"a": ["Grüße", "实验"], "b": 1}) == {"a": ["Grüße", "□□"], "b": 1}


# --- a laboratory's own -----------------------------------------------------------------------


def test_own_template_and_wording(tmp_path):
    (tmp_path / "report.typ").write_text(
        '#let data = json("data.json")\n#set document(title: "x")\n#data.document.lead.value'
    )
    assert "h = (6.6" in text_of(render_pdf(example(FEW), templates=tmp_path))


def test_a_faulty_template_is_one_sentence(tmp_path):
    (tmp_path / "report.typ").write_text("#unheard-of()")
    with pytest.raises(InputError, match=r"report.typ cannot be set: unknown variable"):
        render_pdf(example(FEW), templates=tmp_path)


# --- rendered ---------------------------------------------------------------------------------


@pytest.mark.skipif(shutil.which("pdftoppm") is None, reason="pdftoppm is not installed")
def test_pages_render_without_an_empty_one(raw, tmp_path):
    (tmp_path / "report.pdf").write_bytes(raw)
    command = ["pdftoppm", "-r", "20", "-gray", str(tmp_path / "report.pdf"), str(tmp_path / "p")]
    subprocess.run(command, check=True, capture_output=True)
    pages = sorted(tmp_path.glob("p*.pgm"))
    assert len(pages) == len(read(raw).pages)
    for page in pages:
        ink = [byte for byte in page.read_bytes()[20:] if byte < 200]
        assert len(ink) > 100, page.name
