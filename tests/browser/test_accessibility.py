"""The page against WCAG: axe-core in every view, and the contrast that axe leaves undecided."""

from __future__ import annotations

from collections.abc import Iterator
from importlib.resources import files

import pytest
from chromium import VIEWS
from sample_result import EMPTY_FIELD

#: WCAG 2.0, 2.1 and 2.2, levels A and AA, and axe's own list of good practice.
TAGS = ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22a", "wcag22aa", "best-practice"]
#: What axe may leave to a person, and why that is enough here.
UNDECIDED = {
    "color-contrast": "computed by the contrast tests below",
    # WCAG 2.2, 2.5.8, exception "Equivalent": the two lists above choose the same month and hour.
    "target-size": "cells of the grid only",
    # WCAG technique H63: a head of a row group needs scope="rowgroup", and no cell beside it.
    "th-has-data-cells": "heads of row groups only",
    "skip-link": "followed by a test below",
}
#: A normal steep field, one that is not steep, one of a hostile name, one without any data.
SCENES = {
    "overview": "",
    "steep field": "#field=field-0",
    "field": "#field=field-4",
    "field without data": f"#field={EMPTY_FIELD}",
    "density altitude": "#field=field-2&measure=p90&month=7&hour=14",
    "compared": "#compare=field-0+field-2",
    "weights": "#field=field-3&measure=weight&month=7&hour=14",
    "bases": "#view=bases",
    "schedule": "#view=schedule",
}

#: The scenes that hold most kinds of parts are looked at in every view, the others in two, which
#: have both sizes and both schemes.
IN_EVERY_VIEW = {"overview", "field"}
TWO_VIEWS = ("desktop", "phone dark")
#: Scenes alike in structure to the field are looked at in the narrower of them.
ALIKE = {"steep field", "density altitude", "weights"}
CASES = [
    (view, name)
    for name in SCENES
    for view in VIEWS
    if name in IN_EVERY_VIEW or view == TWO_VIEWS[1] or (view == TWO_VIEWS[0] and name not in ALIKE)
]

RUN_AXE = """(tags) => axe.run(document, {
    runOnly: {type: "tag", values: tags}, resultTypes: ["violations", "incomplete"]})"""

# Every shown piece of text, its colour, and each colour that may stand behind it: backgrounds
# of what it stands in, stripes of gradients, and the areas of the map below a text on the map.
TEXT_COLOURS = r"""(root) => {
    const found = [];
    const walker = document.createTreeWalker(document.querySelector(root), NodeFilter.SHOW_TEXT);
    const areas = [...document.querySelectorAll(".leaflet-container svg path")]
        .filter((path) => !path.closest(".leaflet-marker-pane"))
        .map((path) => getComputedStyle(path))
        .filter((style) => style.fill !== "none" && Number(style.fillOpacity) === 1)
        .map((style) => style.fill);
    const opaque = (colour) => !colour.endsWith(", 0)");
    const behind = (node) => {
        for (let at = node; at; at = at.parentElement) {
            const style = getComputedStyle(at);
            const stripes = style.backgroundImage.match(/rgba?\([^)]*\)/g) || [];
            const solid = opaque(style.backgroundColor) ? [style.backgroundColor] : [];
            const map = at.matches(".leaflet-container") ? areas : [];
            if (solid.length) return [...solid, ...stripes.filter(opaque), ...map];
        }
        return ["rgb(255, 255, 255)"];
    };
    while (walker.nextNode()) {
        const node = walker.currentNode.parentElement;
        const text = walker.currentNode.textContent.trim();
        if (!text || node.closest("script, style, noscript, :disabled, option")) continue;
        if (!node.checkVisibility({visibilityProperty: true, opacityProperty: true})) continue;
        const style = getComputedStyle(node);
        const ink = node.namespaceURI.endsWith("svg") ? style.fill : style.color;
        const bold = Number(style.fontWeight) >= 700;
        found.push([text, ink, behind(node), parseFloat(style.fontSize), bold]);
    }
    return found;
}"""


@pytest.fixture(scope="session")
def axe_script() -> str:
    pytest.importorskip("axe_playwright_python", reason="axe_playwright_python is not installed")
    return (files("axe_playwright_python") / "axe.min.js").read_text(encoding="utf-8")


@pytest.fixture(scope="module")
def open_contexts(browser) -> Iterator[dict[str, object]]:
    """Contexts in which a script of the test may run beside the page's policy."""
    made = {
        name: browser.new_context(offline=True, bypass_csp=True, **view)
        for name, view in VIEWS.items()
    }
    yield made
    for context in made.values():
        context.close()


@pytest.fixture
def scene(open_contexts, map_url):
    """A function from the names of a view and a scene to its page, all details open."""
    pages = []

    def show(view: str, name: str):
        page = open_contexts[view].new_page()
        pages.append(page)
        page.goto(map_url + SCENES[name])
        page.wait_for_selector("html[data-ready=yes]", timeout=20_000)
        page.eval_on_selector_all("details", "(all) => all.forEach((one) => { one.open = true; })")
        return page

    yield show
    for page in pages:
        page.close()


def told(result: dict) -> str:
    """A result of axe as a person can act on it."""
    lines = [f"{result['id']} ({result['impact']}): {result['help']}"]
    for node in result["nodes"][:5]:
        summary = node.get("failureSummary") or ""
        lines.append(f"  {node['target']}: {' '.join(summary.split())}")
    more = len(result["nodes"]) - 5
    return "\n".join([*lines, *([f"  and {more} more"] if more > 0 else [])])


@pytest.mark.parametrize(("view", "name"), CASES)
def test_axe_finds_no_violation_and_leaves_nothing_open(scene, axe_script, view, name):
    page = scene(view, name)
    page.evaluate(axe_script)
    results = page.evaluate(RUN_AXE, TAGS)
    assert results["violations"] == [], "\n".join(map(told, results["violations"]))
    doubtful = [r for r in results["incomplete"] if r["id"] not in UNDECIDED]
    assert doubtful == [], "\n".join(map(told, doubtful))
    assert page.locator("tbody tr:not(:has(td)):not(:has(th[scope=rowgroup]))").count() == 0
    small = [r for r in results["incomplete"] if r["id"] == "target-size"]
    chosen_elsewhere = page.locator(".grid td").count() > 0
    for node in (node for r in small for node in r["nodes"]):
        assert node["html"].startswith("<td"), node["target"]
        assert chosen_elsewhere, "a grid stands beside its month and hour lists"


def test_axe_finds_what_is_wrong(scene, axe_script):
    page = scene("desktop", "overview")
    page.evaluate(
        """() => document.querySelector("main").insertAdjacentHTML("beforeend",
            '<button></button><p style="color:#aaa;background:#fff">faint</p>')"""
    )
    page.evaluate(axe_script)
    results = page.evaluate(RUN_AXE, TAGS)
    assert {"button-name", "color-contrast"} <= {r["id"] for r in results["violations"]}


@pytest.mark.parametrize("view", ["phone"])
@pytest.mark.parametrize("name", SCENES)
def test_skip_links_lead_to_something_shown(scene, view, name):
    page = scene(view, name)
    targets = page.eval_on_selector_all(
        "a.skip", "(all) => all.filter((a) => a.checkVisibility()).map((a) => a.hash)"
    )
    assert targets
    for target in targets:
        assert page.is_visible(target), target


# Contrast


def channels(colour: str) -> list[float]:
    """Red, green and blue of a computed colour, 0-1."""
    inner = colour.partition("(")[2].partition(")")[0]
    numbers = [float(word) for word in inner.replace("srgb", "").replace(",", " ").split()[:3]]
    return numbers if colour.startswith("color(") else [n / 255 for n in numbers]


def luminance(colour: str) -> float:
    # WCAG 2.2, definition of relative luminance.
    linear = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in channels(colour)]
    return sum(w * c for w, c in zip((0.2126, 0.7152, 0.0722), linear, strict=True))


def contrast(one: str, other: str) -> float:
    # WCAG 2.2, definition of contrast ratio.
    low, high = sorted((luminance(one), luminance(other)))
    return (high + 0.05) / (low + 0.05)


def faint(page, root: str) -> tuple[int, list[str]]:
    """How many texts are shown below an element, and those of too little contrast."""
    texts = page.evaluate(TEXT_COLOURS, root)
    weak = set()
    for text, ink, grounds, size, bold in texts:
        # WCAG 2.2, 1.4.3: large is 18 pt, or 14 pt and bold; 1 pt is 4/3 CSS px.
        needed = 3.0 if size >= 24 or (bold and size >= 14 * 4 / 3) else 4.5
        for ground in grounds:
            if contrast(ink, ground) < needed:
                weak.add(f"{text[:40]!r}: {ink} on {ground}: {contrast(ink, ground):.2f}")
    return len(texts), sorted(weak)


def test_contrast_is_that_of_wcag():
    # WCAG 2.2: black on white is 21:1; #767676 on white is the known edge of 4.5:1 (4.54),
    # common practice, no source.
    assert contrast("rgb(0, 0, 0)", "rgb(255, 255, 255)") == pytest.approx(21.0)
    assert contrast("rgb(118, 118, 118)", "rgb(255, 255, 255)") == pytest.approx(4.54, abs=0.005)


@pytest.mark.parametrize(("view", "name"), CASES)
def test_every_text_has_contrast_enough(scene, view, name):
    page = scene(view, name)
    number, weak = faint(page, "body")
    assert number > 60
    assert weak == []


@pytest.mark.parametrize("view", TWO_VIEWS)
def test_every_measure_has_contrast_enough(scene, view):
    page = scene(view, "field")
    measures = page.eval_on_selector_all("#measure option", "(all) => all.map((o) => o.value)")
    assert len(measures) >= 3
    for measure in measures:
        page.select_option("#measure", measure)
        assert faint(page, "main")[1] == [], measure


def test_contrast_test_finds_faint_texts(scene):
    page = scene("desktop", "field")
    page.add_style_tag(content=".grid td { color: #999 !important } #legend li { color: #bbb }")
    _, weak = faint(page, "body")
    assert any("'20 % or more'" in text for text in weak)
    assert any("'0'" in text for text in weak)
