"""The page: self-contained, in order, and deaf to what student text would like it to do."""

from __future__ import annotations

import base64
import hashlib
import re
from dataclasses import replace
from html.parser import HTMLParser
from itertools import pairwise

import pytest
from report_fixture import example

from hdetermine.errors import InputError
from hdetermine.files.shipped import shipped_folder
from hdetermine.report.html import render_html
from hdetermine.report.page import content_security_policy

FEW = (25.0, 30.0)
VOID = {"meta", "link", "br", "hr", "img", "input"}
HOSTILE = [
    "<script>alert(1)</script>",
    "</svg></style></title><img src=x onerror=alert(1)>",
    "#let x = 1; #panic()",
    "\x1b]0;owned\x07\x1b[2J",
    "\u202eesrever\u202c \u2066isolate",
    "$\\frac{1}{2}$ {{ 7 * 7 }} {% raw %}",
    '=HYPERLINK("http://example.org")',
    '"onmouseover="alert(1)" & <b>',
]


class Page(HTMLParser):
    """Elements of a page in their order, and whether they nest."""

    def __init__(self, text: str) -> None:
        super().__init__(convert_charrefs=True)
        self.elements: list[tuple[str, dict[str, str]]] = []
        self.open: list[str] = []
        self.wrong: list[str] = []
        self.words: list[str] = []
        self.feed(text)
        self.close()

    def handle_starttag(self, tag, attrs):
        self.elements.append((tag, dict(attrs)))
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag, attrs):
        self.elements.append((tag, dict(attrs)))

    def handle_endtag(self, tag):
        if not self.open or self.open.pop() != tag:
            self.wrong.append(tag)

    def handle_data(self, data):
        if "style" not in self.open:
            self.words.append(data)

    def all(self, tag):
        return [attributes for name, attributes in self.elements if name == tag]

    @property
    def text(self):
        return re.sub(r"\s+", " ", " ".join(self.words))


@pytest.fixture(scope="module")
def raw():
    return render_html(example())


@pytest.fixture(scope="module")
def page(raw):
    return Page(raw.decode())


# --- structure --------------------------------------------------------------------------------


def test_elements_nest_and_ids_are_unique(page):
    assert page.wrong == []
    assert page.open == []
    ids = [attributes["id"] for _, attributes in page.elements if "id" in attributes]
    assert len(set(ids)) == len(ids)
    targets = [one["href"][1:] for one in page.all("a")]
    assert set(targets) <= set(ids)
    named = [one["aria-labelledby"] for _, one in page.elements if "aria-labelledby" in one]
    assert set(named) <= set(ids)


def test_headings_go_down_one_step_at_a_time(page):
    levels = [int(tag[1]) for tag, _ in page.elements if re.fullmatch(r"h[1-6]", tag)]
    assert levels[0] == 1
    assert levels.count(1) == 1
    assert all(after - before <= 1 for before, after in pairwise(levels))


def test_sections_stand_in_the_order_that_a_reader_needs(raw):
    order = ["result", "relation", "cutoffs", "budget", "routes", "scans", "scale", "posterior",
             "checks", "backwards", "improve", "refused", "method", "cautions",
             "provenance"]  # fmt: skip
    places = [raw.index(f'<h2 id="{key}"'.encode()) for key in order]
    assert places == sorted(places)


def test_language_title_and_viewport(page):
    assert page.all("html")[0]["lang"] == "en-GB"
    assert page.all("meta")[0] == {"charset": "utf-8"}
    assert {"name": "color-scheme", "content": "light dark"} in page.all("meta")
    assert "Bench 3, molybdenum tube" in page.text


def test_every_picture_has_an_alternative_and_every_equation_a_text(page):
    pictures = page.all("svg")
    assert len(pictures) == 6 + 1 + 9 * 2
    for one in pictures:
        assert one["role"] == "img"
        assert len(one["aria-label"]) > 60
    equations = page.all("math")
    assert len(equations) == 10
    assert all(one["alttext"] for one in equations)


def test_tables_have_captions_scopes_and_can_be_scrolled_by_keyboard(page):
    assert len(page.all("table")) == len(page.all("caption"))
    assert all(one.get("scope") in {"col", "row", "rowgroup"} for one in page.all("th"))
    around = [one for one in page.all("div") if one.get("class") == "scroll"]
    assert len(around) == len(page.all("table"))
    assert all(one["tabindex"] == "0" and one["aria-labelledby"] for one in around)


def test_rows_are_as_wide_as_their_table(raw):
    for table in re.findall(rb"<table>.*?</table>", raw, re.DOTALL):
        width = table.count(b'scope="col"')
        for row in re.findall(rb"<tr>(.*?)</tr>", table, re.DOTALL):
            cells = len(re.findall(rb"<t[hd][ >]", row))
            assert cells == width or b"colspan" in row


# --- self-contained ---------------------------------------------------------------------------


def test_nothing_is_asked_of_any_network_and_no_script_runs(raw, page):
    tags = {tag for tag, _ in page.elements}
    assert not tags & {
        "script",
        "iframe",
        "object",
        "embed",
        "img",
        "form",
        "base",
        "foreignobject",
    }
    for tag, attributes in page.elements:
        assert "style" not in attributes
        for name, value in attributes.items():
            assert not name.startswith("on")
            if name in ("href", "src", "xlink:href"):
                assert value.startswith("#") or (tag, value) == ("link", "data:,")
    style = re.search(rb"<style>(.*?)</style>", raw, re.DOTALL)[1].decode()
    assert "url(" not in style
    assert "@import" not in style


def test_policy_admits_this_one_style_and_no_script(raw, page):
    (policy,) = [
        one["content"] for one in page.all("meta")
        if one.get("http-equiv") == "Content-Security-Policy"
    ]  # fmt: skip
    style = re.search(rb"<style>(.*?)</style>", raw, re.DOTALL)[1]
    digest = base64.b64encode(hashlib.sha256(style).digest()).decode()
    assert f"style-src 'sha256-{digest}'" in policy
    assert "default-src 'none'" in policy
    assert "script-src 'none'" in policy
    assert "unsafe" not in policy


def test_policy_for_a_page_with_a_script():
    """An inline script is admitted by its hash; SHA-256 of "abc" as in FIPS 180-2, B.1."""
    digest = bytes.fromhex("ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad")
    policy = content_security_policy("", ["abc"])
    assert f"script-src 'sha256-{base64.b64encode(digest).decode()}'" in policy


def test_small(raw):
    assert len(raw) < 3_000_000


def test_the_same_determination_gives_the_same_page():
    first = render_html(example((25.0, 30.0)))
    assert render_html(example((25.0, 30.0))) == first


# --- hostile text -----------------------------------------------------------------------------


@pytest.mark.parametrize("text", HOSTILE)
def test_text_of_a_run_stays_text(page, text):
    d = example(FEW, title=text, operator=text)
    cutoffs = tuple(replace(one, remarks=(text,), reason=text if not one.used else "")
                    for one in d.cutoffs)  # fmt: skip
    d = replace(d, cutoffs=cutoffs, run=replace(d.run, remarks=(text,), laboratory=text))
    raw = render_html(d)
    other = Page(raw.decode())
    assert other.wrong == []
    tags = {tag for tag, _ in page.elements}
    assert {tag for tag, _ in other.elements} <= tags
    assert not any(name.startswith("on") for _, one in other.elements for name in one)
    control = {one for one in raw.decode() if ord(one) < 32 and one != "\n"}
    assert control == set()
    assert not any(one in raw.decode() for one in "\u202e\u2066\u202c\u2069")
    visible = re.sub(r"[\x00-\x1f\u202a-\u202e\u2066-\u2069]", "", text)
    assert re.sub(r"\s+", " ", visible) in other.text


def test_braces_in_text_are_not_evaluated():
    assert b"49" not in render_html(example((30.0,), title="{{ 7 * 7 }}", refused=False))[:3000]


# --- what is not there ------------------------------------------------------------------------


def test_one_voltage():
    text = Page(render_html(example((30.0,), refused=False)).decode()).text
    assert "the inverse relation, its intercept and its exponent cannot be tested" in text


def test_no_lines():
    text = Page(render_html(example(FEW, lines=False)).decode()).text
    assert "No characteristic line was found" in text


@pytest.mark.parametrize(
    ("state", "said"),
    [("absent", "No posterior was sampled"), ("not converged", "The chain has not converged")],
)
def test_posterior_that_is_not_there_or_not_usable(state, said):
    text = Page(render_html(example(FEW, posterior=state)).decode()).text
    assert said in text
    assert said not in Page(render_html(example(FEW)).decode()).text


def test_refused_scans_are_told_with_their_reason(page):
    assert "a characteristic line stands inside the edge" in page.text
    text = Page(render_html(example(FEW, refused=False)).decode()).text
    assert "No scan was refused." in text


def test_a_measured_run_is_not_called_simulated(page):
    assert "Simulated run" in page.text
    assert "Simulated run" not in Page(render_html(example(FEW, truth=False)).decode()).text


def test_cautions(page):
    for words in ("ionising radiation", "interlocked, type-approved enclosure", "dosimetry",
                  "bypassed interlock", "not this program", "calibration certificate"):  # fmt: skip
        assert words in page.text


def test_brief_is_short_and_keeps_result_and_cautions():
    raw = render_html(example(), brief=True)
    page = Page(raw.decode())
    assert len(page.all("svg")) == 2
    assert len(page.all("table")) == 2
    assert "h = (6.623 ± 0.053) × 10⁻³⁴" in page.text
    assert "interlocked" in page.text


# --- a laboratory's own -----------------------------------------------------------------------


def test_own_name():
    assert (
        "Our own bench" in Page(render_html(example(FEW), laboratory="Our own bench").decode()).text
    )


def test_own_template_takes_the_place_of_ours(tmp_path):
    (tmp_path / "report.html").write_text("<p>{{ document.lead.value }}, {{ wording.title }}</p>")
    raw = render_html(example((30.0,)), templates=tmp_path).decode()
    assert raw.startswith("<p>h = (")
    assert "Planck constant from X-ray tube spectra" in raw


def test_own_style_sheet_enters_the_policy(tmp_path):
    (tmp_path / "page.css").write_text("body { color: #123456; }")
    raw = render_html(example((30.0,)), templates=tmp_path)
    style = re.search(rb"<style>(.*?)</style>", raw, re.DOTALL)[1]
    assert b"#123456" in style
    assert base64.b64encode(hashlib.sha256(style).digest()) in raw


@pytest.mark.parametrize(
    ("name", "content", "said"),
    [
        ("report.html", "{{ document.unheard_of }}", "report.html cannot be used"),
        ("report.html", "{% if %}", "report.html cannot be used"),
        ("wording.toml", "a = [", "no valid TOML"),
        ("mine.html", "x", "holds none of the files"),
    ],
)
def test_a_faulty_template_is_one_sentence(tmp_path, name, content, said):
    (tmp_path / name).write_text(content)
    with pytest.raises(InputError, match=said):
        render_html(example((30.0,)), templates=tmp_path)


def test_a_missing_template_folder_is_one_sentence(tmp_path):
    with pytest.raises(InputError, match="does not exist"):
        render_html(example((30.0,)), templates=tmp_path / "nowhere")


def test_shipped_folders():
    assert (shipped_folder("templates") / "report.html").is_file()
    with pytest.raises(InputError, match="install hdetermine again"):
        shipped_folder("unheard_of")
