"""The report in Chromium: silent, readable at every width, accessible, and right on paper."""

from __future__ import annotations

import importlib.util
from pathlib import Path

import pytest
from chromium import VIEWS

from climarisk.outputs.report.document import render_report

#: Success criteria of level A and AA, WCAG 2.0 to 2.2, as axe-core tags them.
LEVELS = ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa"]


@pytest.fixture(scope="session")
def report_url(result, tmp_path_factory) -> str:
    path = tmp_path_factory.mktemp("report") / "report.html"
    path.write_text(render_report(result), encoding="utf-8")
    return path.as_uri()


@pytest.fixture
def open_report(browser, report_url):
    """A function from the name of a view to the open page, with what it asked for and said."""
    contexts = []

    def new(view: str, **options):
        context = browser.new_context(offline=True, **VIEWS[view], **options)
        contexts.append(context)
        page = context.new_page()
        noted: list[str] = []
        page.on("request", lambda request: noted.append(request.url))
        page.on("console", lambda message: noted.append(message.text))
        page.on("pageerror", lambda error: noted.append(str(error)))
        page.goto(report_url)
        return page, noted

    yield new
    for context in contexts:
        context.close()


@pytest.mark.parametrize("view", VIEWS)
def test_report_opens_offline_asks_for_nothing_and_does_not_scroll_sideways(
    open_report, report_url, view
):
    page, noted = open_report(view)
    assert noted == [report_url]
    assert page.evaluate("window.pwned") is None
    assert page.evaluate("document.scripts.length") == 0
    width = VIEWS[view]["viewport"]["width"]
    assert page.evaluate("document.documentElement.scrollWidth") <= width
    assert page.locator("section").first.is_visible()
    # The style came through the content security policy.
    family = page.evaluate("getComputedStyle(document.body).fontFamily")
    assert "sans-serif" in family


def test_wide_tables_scroll_by_keyboard_in_a_container_of_their_own(open_report):
    page, _ = open_report("phone")
    box = page.locator("#aircraft-1 .scroll").first
    assert box.evaluate("(box) => box.scrollWidth > box.clientWidth")
    box.focus()
    page.keyboard.press("ArrowRight")
    for _ in range(50):  # the page's policy lets no other way of waiting in
        if box.evaluate("(box) => box.scrollLeft"):
            break
        page.wait_for_timeout(100)
    assert box.evaluate("(box) => box.scrollLeft") > 0


def test_paper_stays_white_in_the_dark_scheme(open_report):
    page, _ = open_report("desktop dark")
    colour = page.evaluate("getComputedStyle(document.querySelector('.sheet')).backgroundColor")
    assert colour == "rgb(255, 255, 255)"


@pytest.mark.parametrize("view", ["desktop", "phone dark"])
def test_axe_finds_no_violation_of_level_a_or_aa(open_report, view):
    found = importlib.util.find_spec("axe_playwright_python")
    if found is None or found.origin is None:
        pytest.skip("axe-core is not installed (axe_playwright_python)")
    script = (Path(found.origin).parent / "axe.min.js").read_text(encoding="utf-8")
    page, _ = open_report(view, bypass_csp=True)
    page.evaluate(script)
    outcome = page.evaluate(
        "(levels) => axe.run(document, {runOnly: {type: 'tag', values: levels}})", LEVELS
    )
    broken = [
        (violation["id"], node["target"], node.get("failureSummary"))
        for violation in outcome["violations"]
        for node in violation["nodes"]
    ]
    assert broken == []
    assert {"color-contrast", "svg-img-alt"} <= {rule["id"] for rule in outcome["passes"]}


@pytest.fixture(scope="session")
def pages(browser, report_url) -> list[str]:
    """The text of each page of Chromium's PDF, and that every page is A4."""
    pdfium = pytest.importorskip("pypdfium2", reason="pypdfium2 is not installed")
    context = browser.new_context(offline=True)
    page = context.new_page()
    page.goto(report_url)
    printed = page.pdf(format="A4", prefer_css_page_size=True, print_background=True)
    context.close()
    document = pdfium.PdfDocument(printed)
    texts = []
    for sheet in document:
        # ISO 216: A4 is 210 mm x 297 mm; a point is 1/72 inch.
        assert sheet.get_size() == pytest.approx((210 / 25.4 * 72, 297 / 25.4 * 72), abs=1.0)
        texts.append(" ".join(sheet.get_textpage().get_text_range().split()))
    document.close()
    return texts


def test_each_aircraft_has_one_page_of_paper_with_its_name(pages, result):
    starts = [n for n, text in enumerate(pages) if "Aircraft " in text and " of 2" in text]
    heads = [
        next(n for n in starts if f"Aircraft {a + 1} of {len(result.aircraft)}" in pages[n])
        for a in range(len(result.aircraft))
    ]
    air = next(n for n, text in enumerate(pages) if "Density altitude and humidity Highest" in text)
    assert [b - a for a, b in zip(heads, [*heads[1:], air], strict=True)] == [1, 1]
    for n, profile in zip(heads, result.aircraft, strict=True):
        assert profile.name in pages[n]
        assert "Month by month" in pages[n]
    assert heads[0] <= 2  # the overview: a field with a name of 344 characters may need two


def test_every_page_of_paper_has_its_foot(pages):
    for n, text in enumerate(pages, start=1):
        assert f"Page {n} of {len(pages)}" in text
        assert "Planning aid from past weather" in text


def test_no_page_of_paper_is_left_nearly_empty(pages):
    foot = 150
    assert all(len(text) > foot + 200 for text in pages)
