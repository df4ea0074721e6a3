"""The page in a real browser: Debian's Chromium, headless, driven over its own protocol.

Where Chromium, the driver or axe-core (``npm install --prefix .ci/browser axe-core``) is absent,
the tests skip and say so.
"""

from __future__ import annotations

import json
import shutil
from collections.abc import Iterator
from pathlib import Path

import pytest
from report_fixture import example

from hdetermine.report.html import render_html

pytestmark = pytest.mark.browser

sync_api = pytest.importorskip("playwright.sync_api", reason="playwright is not installed")
CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser")
AXE = Path(__file__).resolve().parents[1] / ".ci/browser/node_modules/axe-core/axe.min.js"
SCHEMES = ("light", "dark")
WIDTHS = (320, 768, 1280)
SWITCHES = [
    "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run",
    "--disable-background-networking", "--disable-component-update", "--disable-sync",
]  # fmt: skip

if CHROMIUM is None:
    pytest.skip("chromium is not installed", allow_module_level=True)


@pytest.fixture(scope="module")
def browser() -> Iterator:
    with sync_api.sync_playwright() as driver:
        chromium = driver.chromium.launch(executable_path=CHROMIUM, args=SWITCHES)
        yield chromium
        chromium.close()


@pytest.fixture(scope="module")
def folder(tmp_path_factory) -> Path:
    folder = tmp_path_factory.mktemp("pages")
    hostile = example((25.0, 30.0), title="<script>console.log('x')</script>", operator="</svg>")
    pages = {
        "full": render_html(example()),
        "brief": render_html(example(), brief=True),
        "hostile": render_html(hostile),
        "bare": render_html(example((30.0,), lines=False, posterior="absent", refused=False)),
    }
    for name, raw in pages.items():
        (folder / f"{name}.html").write_bytes(raw)
    return folder


class Visit:
    """One page in one colour scheme, with everything it said and asked for."""

    def __init__(self, browser, path: Path, scheme: str, width: int = 1280) -> None:
        self.context = browser.new_context(
            color_scheme=scheme, viewport={"width": width, "height": 800}
        )
        self.page = self.context.new_page()
        self.said: list[str] = []
        self.asked: list[str] = []
        self.page.on("console", lambda message: self.said.append(message.text))
        self.page.on("pageerror", lambda error: self.said.append(str(error)))
        self.page.on("request", lambda request: self.asked.append(request.url))
        self.address = path.as_uri()
        self.page.goto(self.address)

    def evaluate(self, expression: str):
        # Straight through the protocol: the page's own policy forbids scripts, and stays so.
        session = self.context.new_cdp_session(self.page)
        answer = session.send(
            "Runtime.evaluate",
            {"expression": expression, "awaitPromise": True, "returnByValue": True},
        )
        assert "exceptionDetails" not in answer, answer["exceptionDetails"]
        return answer["result"].get("value")

    def __enter__(self) -> Visit:
        return self

    def __exit__(self, *_exception: object) -> None:
        self.context.close()


@pytest.mark.parametrize("scheme", SCHEMES)
@pytest.mark.parametrize("name", ["full", "brief", "hostile", "bare"])
def test_no_message_and_no_request(browser, folder, name, scheme):
    with Visit(browser, folder / f"{name}.html", scheme) as visit:
        visit.page.wait_for_timeout(200)
        assert visit.said == []
        assert visit.asked == [visit.address]


@pytest.mark.parametrize("width", WIDTHS)
@pytest.mark.parametrize("name", ["full", "brief", "bare"])
def test_no_horizontal_overflow(browser, folder, name, width):
    with Visit(browser, folder / f"{name}.html", "light", width) as visit:
        assert visit.evaluate("document.documentElement.scrollWidth") == width
        # Whatever is wider than the page scrolls inside a box of its own.
        wide = visit.evaluate(
            """[...document.querySelectorAll('body *')].filter(e =>
                 !e.closest('.scroll, .equation, svg, .skip')
                 && e.getBoundingClientRect().right > innerWidth + 1).map(e => e.outerHTML)"""
        )
        assert wide == []


@pytest.mark.parametrize("scheme", SCHEMES)
@pytest.mark.parametrize("name", ["full", "brief", "bare"])
def test_axe_finds_nothing(browser, folder, name, scheme):
    """axe-core with the rules of WCAG 2.2 A and AA and its best practices."""
    if not AXE.is_file():
        pytest.skip("axe-core is not installed: npm install --prefix .ci/browser axe-core")
    rules = ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa", "best-practice"]
    with Visit(browser, folder / f"{name}.html", scheme) as visit:
        visit.evaluate(AXE.read_text(encoding="utf-8") + "; undefined")
        found = json.loads(
            visit.evaluate(
                f"axe.run(document, {{runOnly: {json.dumps(rules)}}}).then(r => JSON.stringify("
                "{violations: r.violations, passes: r.passes.length}))"
            )
        )
    assert found["passes"] > 15
    assert [
        (one["id"], [node["html"] for node in one["nodes"]]) for one in found["violations"]
    ] == []


def test_axe_would_find_something(browser, folder, tmp_path):
    """Break the page on purpose, so that the test above is known to be able to fail."""
    if not AXE.is_file():
        pytest.skip("axe-core is not installed: npm install --prefix .ci/browser axe-core")
    broken = tmp_path / "broken.html"
    text = (folder / "brief.html").read_text(encoding="utf-8")
    broken.write_text(text.replace(' role="img"', "").replace('lang="en-GB"', ""), "utf-8")
    with Visit(browser, broken, "light") as visit:
        visit.evaluate(AXE.read_text(encoding="utf-8") + "; undefined")
        found = visit.evaluate("axe.run(document).then(r => r.violations.map(v => v.id))")
    assert "html-has-lang" in found


def test_dark_page_restates_the_colours_of_the_figures(browser, folder):
    fills = {}
    for scheme in SCHEMES:
        with Visit(browser, folder / "brief.html", scheme) as visit:
            fills[scheme] = visit.evaluate(
                "[getComputedStyle(document.body).backgroundColor,"
                " getComputedStyle(document.querySelector('svg text')).fill]"
            )
    assert fills["light"] == ["rgb(255, 255, 255)", "rgb(31, 35, 40)"]
    assert fills["dark"] == ["rgb(18, 22, 27)", "rgb(230, 237, 243)"]


def test_print_is_light_on_a_dark_screen_too(browser, folder):
    with Visit(browser, folder / "brief.html", "dark") as visit:
        visit.page.emulate_media(media="print", color_scheme="dark")
        ground = visit.evaluate("getComputedStyle(document.body).backgroundColor")
        assert ground == "rgb(255, 255, 255)"
        assert visit.evaluate("getComputedStyle(document.querySelector('svg text')).fill") == (
            "rgb(31, 35, 40)"
        )


def test_keyboard_reaches_links_and_tables(browser, folder):
    with Visit(browser, folder / "full.html", "light", 320) as visit:
        reached = []
        for _ in range(60):
            visit.page.keyboard.press("Tab")
            reached.append(
                visit.evaluate("document.activeElement.className || document.activeElement.tagName")
            )
        assert reached[0] == "skip"
        assert reached.count("A") >= 14
        assert reached.count("scroll") >= 15
        visit.evaluate("document.querySelectorAll('.scroll')[2].focus()")
        before = visit.evaluate("document.activeElement.scrollLeft")
        visit.page.keyboard.press("ArrowRight")
        visit.page.wait_for_timeout(300)
        assert visit.evaluate("document.activeElement.scrollLeft") > before


def test_text_at_twice_the_size_still_fits(browser, folder):
    """WCAG 2.2, 1.4.4: text can be enlarged to 200 % without loss."""
    with Visit(browser, folder / "full.html", "light", 768) as visit:
        visit.evaluate("document.documentElement.style.setProperty('font-size', '200%')")
        assert visit.evaluate("document.documentElement.scrollWidth") == 768


def test_screenshots_are_not_empty(browser, folder, tmp_path):
    for scheme in SCHEMES:
        for width in WIDTHS:
            with Visit(browser, folder / "full.html", scheme, width) as visit:
                shot = visit.page.screenshot(full_page=True)
                (tmp_path / f"{scheme}-{width}.png").write_bytes(shot)
                assert len(shot) > 50_000
