"""The class page and the pages of feedback: inert, complete without a script, by keyboard."""

from __future__ import annotations

import base64
import hashlib
import io
import json
import re
import shutil
import zipfile
from dataclasses import replace
from pathlib import Path

import pytest

from hdetermine.classcheck.claim import Claim
from hdetermine.classcheck.classpage import class_page, feedback_page
from hdetermine.classcheck.classpicture import class_picture
from hdetermine.classcheck.classtable import class_csv, class_json, class_xlsx
from hdetermine.classcheck.classwork import ClassFinding, GroupRow
from hdetermine.classcheck.comparison import CutoffLine, compare_planck
from hdetermine.classcheck.explanation import Explanation
from hdetermine.classcheck.finding import GroupFinding, Reanalysis, Shortcut
from hdetermine.classcheck.numeral import Numeral
from hdetermine.classcheck.screens import Remark
from hdetermine.classcheck.slip import NamedSlip
from hdetermine.report.templates import find_templates

TEMPLATES = find_templates()
AXE = Path(__file__).resolve().parents[1] / ".ci/browser/node_modules/axe-core/axe.min.js"
CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser")
EVIL = "<script>alert(1)</script>"


def claim(value):
    return Claim("g", "s", Numeral(value, 1e-36), "J s", Numeral(2e-36, 1e-37))


def row(label, h, claimed=None, slips=(), remarks=(), fault=""):
    one = None if claimed is None else claim(claimed)
    finding = GroupFinding(
        name=label,
        reanalysis=None if h is None else Reanalysis(h, 3e-36, 6e-36, 2.0, h / 6.62607015e-34 - 1,
                                                     (h - 6.62607015e-34) / 6e-36, 6, 5),
        data_fault=fault,
        claim=one,
        planck=None if one is None else compare_planck(one, h or float("nan"), 3e-36),
        cutoffs=(CutoffLine(20.0, 8.85, 62.0, 0.1, 17.7, float("nan")),),
        explanation=None if one is None else Explanation(True, not slips, not slips, slips),
        shortcuts=(Shortcut("straight-line crossing taken as the limit", 6.5e-34),),
        remarks=remarks,
    )  # fmt: skip
    return GroupRow(label, label.strip("<>/()").replace("/", "") or "x", finding)


SLIPS = (
    NamedSlip(("double_angle",), "2θ used as θ", "Sentence.", "Remedy.", EVIL, 1.3e-33, 0.5, 1e9),
    NamedSlip(("lattice_parameter",), "lattice parameter used for the spacing", "S.", "R."),
)
REMARK = Remark("scan 1 (20 kV)", "identical counts", f"As in {EVIL}.", 15.0, "counts", "bar", 1e-9)
FINDING = ClassFinding(
    title=f"Class {EVIL}",
    rows=(
        row("birch", 6.60e-34, 6.61e-34),
        row("alder", 6.66e-34, 1.31e-33, SLIPS),
        row("cedar", None, None, fault=f"A file holds {EVIL}."),
        row(EVIL, 6.64e-34, None, (), (REMARK,)),
        row("$x_{y", 6.58e-34, 6.5e-34),
    ),
    remarks=(f"Column {EVIL} was not used.",),
    anonymous=False,
    seed=1,
)


@pytest.fixture(scope="module")
def page():
    return class_page(FINDING, TEMPLATES).decode()


def test_text_of_strangers_is_never_markup(page):
    for text in (
        page,
        *(feedback_page(r, FINDING.title, TEMPLATES).decode() for r in FINDING.rows),
    ):
        assert EVIL not in text
        assert "alert(1)" in text or "Feedback" in text
    assert page.count("<script>") == 1


def test_the_policy_admits_the_one_script_and_the_one_style(page):
    policy = re.search(r'Content-Security-Policy" content="([^"]+)"', page)[1].replace("&#39;", "'")
    for tag, directive in (("script", "script-src"), ("style", "style-src")):
        (content,) = re.findall(rf"<{tag}>(.*?)</{tag}>", page, re.S)
        digest = base64.b64encode(hashlib.sha256(content.encode()).digest()).decode()
        assert f"{directive} 'sha256-{digest}'" in policy
    assert "default-src 'none'" in policy
    assert not re.search(r"\sstyle=|\son[a-z]+=\"", page)
    feedback = feedback_page(FINDING.rows[0], "c", TEMPLATES).decode()
    assert "script-src 'none'" in feedback.replace("&#39;", "'")
    assert not re.search(r"(?:src|href)=\"(?:https?:)?//", page + feedback)


def test_table_is_complete_without_the_script(page):
    bare = re.sub(r"<script>.*?</script>", "", page, flags=re.S)
    for text in (
        "alder",
        "birch",
        "cedar",
        "2θ used as θ",
        "lattice parameter",
        "identical counts",
    ):
        assert text in bare
    assert "<button" not in bare
    assert bare.count('<tr role="row">') == 6


def test_a_negative_h_agreed_and_stood_661_uncertainties_away():
    one = row("alder", 6.60e-34, -6.61e-34)
    assert row("alder", 6.60e-34, 6.61e-34).finding.verdict == "agrees"
    assert one.finding.verdict == "differs"
    text = feedback_page(one, "c", TEMPLATES).decode()
    assert "sign of a slope" in text
    assert "agree within" not in text
    alone = replace(one.finding, reanalysis=None, itself=one.finding.explanation)
    assert alone.verdict == "inconsistent"


def test_same_finding_same_bytes():
    for make in (class_csv, class_json, class_xlsx, lambda f: class_page(f, TEMPLATES)):
        assert make(FINDING) == make(FINDING)
    assert json.loads(class_json(FINDING))["groups"][1]["slips"][0]["codes"] == ["double_angle"]


@pytest.mark.parametrize(
    ("stated", "year"), [("1700000000", 2023), ("0", 1980), ("9" * 5000, 1980), ("", 1980)]
)
def test_the_spreadsheet_bears_the_date_of_the_environment(monkeypatch, stated, year):
    """Never that of the clock; one beyond every calendar counts as none."""
    monkeypatch.setenv("SOURCE_DATE_EPOCH", stated)
    with zipfile.ZipFile(io.BytesIO(class_xlsx(FINDING))) as archive:
        assert {info.date_time[0] for info in archive.infolist()} == {year}
        core = archive.read("docProps/core.xml").decode()
    assert re.findall(r">(\d{4})-", core) == [str(year)] * 2


def test_picture_marks_what_lies_outside():
    picture = class_picture(FINDING)
    assert "× 1.98" in picture.svg
    assert "$x_{y" in picture.svg  # no formula was made of it
    assert "4 groups" in picture.alt
    none = ClassFinding("c", (row("cedar", None),), (), False, 1)
    assert class_picture(none) is None


@pytest.fixture(scope="module")
def browser():
    api = pytest.importorskip("playwright.sync_api", reason="playwright is not installed")
    if CHROMIUM is None:
        pytest.skip("chromium is not installed")
    with api.sync_playwright() as driver:
        chromium = driver.chromium.launch(
            executable_path=CHROMIUM,
            args=["--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run",
                  "--disable-background-networking", "--disable-component-update",
                  "--disable-sync"],
        )  # fmt: skip
        yield chromium
        chromium.close()


def opened(browser, tmp_path, page, width=1280, scheme="light"):
    path = tmp_path / "class.html"
    path.write_text(page, encoding="utf-8")
    context = browser.new_context(color_scheme=scheme, viewport={"width": width, "height": 800})
    tab = context.new_page()
    tab.said = []
    tab.on("console", lambda message: tab.said.append(message.text))
    tab.on("pageerror", lambda error: tab.said.append(str(error)))
    tab.goto(path.as_uri())
    return tab


def names(tab):
    return [one.strip() for one in tab.locator("#class tbody th").all_inner_texts()]


@pytest.mark.browser
def test_sorting_by_keyboard(browser, tmp_path, page):
    tab = opened(browser, tmp_path, page)
    assert names(tab)[:2] == ["birch", "alder"]
    tab.locator("#class thead button").first.focus()
    tab.keyboard.press("Enter")
    assert names(tab) == sorted(names(tab), key=lambda name: name.strip("$<").casefold()) or (
        names(tab).index("alder") < names(tab).index("birch") < names(tab).index("cedar")
    )
    assert tab.locator("#class thead th").first.get_attribute("aria-sort") == "ascending"
    tab.keyboard.press("Space")
    assert names(tab).index("cedar") < names(tab).index("birch") < names(tab).index("alder")
    assert "descending" in tab.locator("#sorted").inner_text()
    tab.keyboard.press("Tab")
    tab.keyboard.press("Tab")
    tab.keyboard.press("Enter")  # h from the data: smallest first, what is missing last
    assert names(tab)[0] == "$x_{y"
    assert names(tab)[-1] == "cedar"
    tab.keyboard.press("Enter")
    assert names(tab)[0] == "alder"
    assert names(tab)[-1] == "cedar"
    assert tab.said == []


@pytest.mark.browser
@pytest.mark.parametrize("width", [320, 390, 1280])
def test_no_horizontal_overflow(browser, tmp_path, page, width):
    tab = opened(browser, tmp_path, page, width)
    session = tab.context.new_cdp_session(tab)
    answer = session.send("Runtime.evaluate", {
        "expression": "document.documentElement.scrollWidth", "returnByValue": True})  # fmt: skip
    assert answer["result"]["value"] == width


@pytest.mark.browser
@pytest.mark.parametrize("width", [390, 961, 1000, 1280])
def test_a_long_name_pushed_the_table_off_the_page(browser, tmp_path, width):
    shared = replace(REMARK, partner="w" * 60)
    rows = (row("y" * 60, 6.66e-34, 1.31e-33, SLIPS, (shared,), f"No file {'x' * 60}."),)
    text = class_page(replace(FINDING, rows=rows + FINDING.rows), TEMPLATES).decode()
    tab = opened(browser, tmp_path, text, width)
    assert tab.evaluate("document.documentElement.scrollWidth") == width
    if width > 960:
        # A short name stands on one line.
        height = "document.querySelectorAll('#class tbody th a')[2].getClientRects().length"
        assert tab.evaluate(height) == 1


@pytest.mark.browser
def test_the_last_column_of_the_comparison_was_cut_off_on_a_telephone(browser, tmp_path):
    one = row("hazel", 6.596e-34, 5.94e-34, SLIPS)
    text = feedback_page(one, "class", TEMPLATES).decode()
    tab = opened(browser, tmp_path, text, 390)
    beyond = "[...document.querySelectorAll('.scroll')].map(e => e.scrollWidth - e.clientWidth)"
    assert "−17" in tab.locator("table").first.inner_text()  # E_n
    assert max(tab.evaluate(beyond)) <= 0


@pytest.mark.browser
@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_axe_finds_nothing(browser, tmp_path, page, scheme):
    """axe-core with the rules of WCAG 2.2 A and AA, both kinds of page."""
    if not AXE.is_file():
        pytest.skip("axe-core is not installed: npm install --prefix .ci/browser axe-core")
    feedback = feedback_page(FINDING.rows[1], FINDING.title, TEMPLATES).decode()
    for text, width in ((page, 1280), (page, 390), (feedback, 1280)):
        tab = opened(browser, tmp_path, text, width, scheme)
        session = tab.context.new_cdp_session(tab)
        for source in (AXE.read_text(encoding="utf-8") + "; undefined",
                       "axe.run(document, {runOnly: ['wcag2a', 'wcag2aa', 'wcag21aa', 'wcag22aa',"
                       "'best-practice']}).then(r => JSON.stringify("
                       "r.violations.map(v => [v.id, v.nodes.map(n => n.html)])))"):  # fmt: skip
            answer = session.send(
                "Runtime.evaluate",
                {"expression": source, "awaitPromise": True, "returnByValue": True},
            )
        assert json.loads(answer["result"]["value"]) == []
