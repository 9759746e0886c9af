"""The report in Chromium: silent, readable at every width, accessible, and right on paper."""

from __future__ import annotations

import importlib.util
from dataclasses import replace
from pathlib import Path

import pandas as pd
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
    for _ in range(200):  # the page's policy lets no other way of waiting in
        if box.evaluate("(box) => box.scrollLeft"):
            break
        page.wait_for_timeout(100)
    assert box.evaluate("(box) => box.scrollLeft") > 0


def test_captions_are_not_cut_by_the_container_of_their_table(open_report):
    page, _ = open_report("phone")
    cut = page.evaluate(
        """() => [...document.querySelectorAll(".scroll caption")].filter((caption) => {
          const box = caption.closest(".scroll");
          box.scrollLeft = 100;
          const [own, around] = [caption, box].map((part) => part.getBoundingClientRect());
          return own.right > around.right + 0.6 || own.left < around.left - 0.6;
        }).map((caption) => caption.textContent)"""
    )
    assert page.locator(".scroll caption").count() > 5
    assert cut == []


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


def with_few_years(result, seasons: int):
    """A year or two of figures far up, and so many of the seasons."""
    names = list(dict.fromkeys(result.risk_seasonal["season"]))[:seasons]

    def kept(frame):
        more = [frame[frame["season"] == names[0]].assign(season="summer schedule")] * (seasons > 4)
        return pd.concat([frame[frame["season"].isin(names)], *more])

    def poor(risk):
        return risk.assign(ci_low=float("nan"), ci_high=float("nan"), n_years=2, coverage=0.07)

    def high(air):
        up = air["variable"] == "density_altitude"
        return air.assign(p50=air["p50"] + 10000.0 * up, p90=air["p90"] + 10000.0 * up)

    return replace(
        result,
        risk_monthly=poor(result.risk_monthly),
        risk_seasonal=poor(kept(result.risk_seasonal)),
        distributions_monthly=high(result.distributions_monthly),
        distributions_seasonal=high(kept(result.distributions_seasonal)),
        near_saturation_seasonal=kept(result.near_saturation_seasonal),
    )


#: Cells whose text is wider than they are, and numbers and short headings that break.
_SPOILT = """() => {
  const found = [];
  const walk = (cell, number) => {
    const texts = document.createTreeWalker(cell, NodeFilter.SHOW_TEXT);
    while (texts.nextNode()) {
      const words = texts.currentNode.data.trim();
      if (!words) continue;
      const range = document.createRange();
      range.selectNodeContents(texts.currentNode);
      const boxes = [...range.getClientRects()].filter((box) => box.width > 0);
      const edge = cell.getBoundingClientRect();
      const wide = boxes.some((b) => b.right > edge.right + 0.6 || b.left < edge.left - 0.6);
      if (wide) found.push(`wide: ${words}`);
      if (number && new Set(boxes.map((b) => Math.round(b.top))).size > 1) {
        found.push(`broken: ${words}`);
      }
    }
  };
  for (const cell of document.querySelectorAll(".periods tbody td")) {
    walk(cell, !cell.matches(".end, .none, .unmet"));
  }
  for (const head of document.querySelectorAll(".periods thead tr:first-child th.first")) {
    walk(head, head.textContent === "Season");
  }
  for (const head of document.querySelectorAll(".periods th.season bdi")) {
    if (head.textContent !== "summer schedule") continue;
    const tops = new Set([...head.getClientRects()].map((box) => Math.round(box.top)));
    if (tops.size > 2) found.push("a word of a season is broken");
  }
  return found;
}"""


@pytest.mark.parametrize("seasons", [1, 2, 4, 5])
@pytest.mark.parametrize("fonts", ["as they are", "wide"])
def test_no_cell_overprints_its_neighbour_and_no_number_breaks(
    browser, result, tmp_path, seasons, fonts
):
    path = tmp_path / "report.html"
    path.write_text(render_report(with_few_years(result, seasons)), encoding="utf-8")
    # The width of A4 without its margins at 96 pixels to the inch, CSS Values 4 section 6.2.
    width = round((210 - 24) / 25.4 * 96)
    context = browser.new_context(
        offline=True, viewport={"width": width, "height": 1000}, bypass_csp=True
    )
    page = context.new_page()
    page.goto(path.as_uri())
    page.emulate_media(media="print")
    if fonts == "wide":
        page.add_style_tag(content="body { font-family: 'DejaVu Sans', sans-serif !important; }")
    spoilt = page.evaluate(_SPOILT)
    context.close()
    assert spoilt == [], spoilt


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
    count = len(result.aircraft)
    heads = [
        next(n for n, text in enumerate(pages) if f"Aircraft {a + 1} of {count}" in text)
        for a in range(count)
    ]
    works = [n for n, text in enumerate(pages) if "Weights and working hours" in text]
    bases = next(n for n, text in enumerate(pages) if "Where the fleet could work" in text)
    # The weights and working hours of each aircraft follow all these pages, on one page each.
    assert heads == [*range(heads[0], heads[0] + count)]
    assert works == [*range(heads[-1] + 1, heads[-1] + 1 + count)]
    assert bases == works[-1] + 1
    for n, profile in zip(heads, result.aircraft, strict=True):
        assert profile.name in pages[n]
        assert "Month by month" in pages[n]
    for n, profile in zip(works, result.aircraft, strict=True):
        assert profile.name in pages[n]
        assert "Weight that holds" in pages[n] and "Working hours" in pages[n]
    assert heads[0] <= 2  # the overview: a field with a name of 344 characters may need two


def test_every_page_of_paper_has_its_foot(pages):
    for n, text in enumerate(pages, start=1):
        assert f"Page {n} of {len(pages)}" in text
        assert "Planning aid from past weather" in text


def test_no_page_of_paper_is_left_nearly_empty(pages):
    foot = 150
    assert all(len(text) > foot + 200 for text in pages)
