"""Many fields on the map and in the list: dots, labels, clicks, sorting, search, picking."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import replace
from importlib.resources import files
from random import Random

import pytest
from chromium import VIEWS, OpenPage
from sample_result import EMPTY_FIELD, sample_result

from climarisk.findings import Finding
from climarisk.outputs.map import render_map
from climarisk.results import StudyResult

N_MANY, N_PILED = 80, 24
ACCENTED = {6: "Zürich Süd", 7: "Łódź", 8: "TROMSØ", 9: "Sauðárkrókur", 10: "Zurich north"}
DOUBTFUL = "field-2"
WCAG = ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22a", "wcag22aa", "best-practice"]


def strewn(result: StudyResult, south: float, west: float, size: float) -> StudyResult:
    draw = Random(3)
    fields = tuple(
        replace(
            f,
            latitude=south + size * draw.random(),
            longitude=west + 1.5 * size * draw.random(),
            name=ACCENTED.get(i, f.name),
        )
        for i, f in enumerate(result.fields)
    )
    doubt = Finding("caution", "field", DOUBTFUL, "field-elevation", "900 m off its pressure")
    return replace(result, fields=fields, findings=(*result.findings, doubt))


@pytest.fixture(scope="module")
def many() -> StudyResult:
    """More fields than there may be tab stops, over ten degrees."""
    return strewn(sample_result(N_MANY, 1), 40.0, 2.0, 10.0)


@pytest.fixture(scope="module")
def piled() -> StudyResult:
    """Fields within a tenth of a degree, but for one far away: a pile at the first zoom."""
    result = strewn(sample_result(N_PILED, 1), 46.0, 7.0, 0.1)
    far = replace(result.fields[-1], latitude=50.0, longitude=12.0)
    return replace(result, fields=(*result.fields[:-1], far))


@pytest.fixture(scope="module")
def urls(many, piled, tmp_path_factory) -> dict[str, str]:
    folder = tmp_path_factory.mktemp("pages")
    for name, result in (("many", many), ("piled", piled)):
        (folder / f"{name}.html").write_text(render_map(result), encoding="utf-8")
    return {name: (folder / f"{name}.html").as_uri() for name in ("many", "piled")}


@pytest.fixture
def show(opened, urls):
    """A function from the name of a study and a view to its page."""

    def new(name: str, view: str = "desktop", fragment: str = ""):
        opened_page: OpenPage = opened(view)
        opened_page.url = urls[name]
        return opened_page.open(fragment)

    return new


def looks(page) -> dict[str, dict]:
    """Class, outline, width, height in the pile and middle of each marker, by field."""
    return page.evaluate(
        """() => Object.fromEntries([...document.querySelectorAll(".marker-box")].map((box) => {
            const symbol = box.querySelector(".symbol");
            const { left, top, width, height } = symbol.getBoundingClientRect();
            const name = symbol.classList[1];
            return [box.dataset.field, {
                rank: name === "class-none" ? -1 : Number(name.slice(6)),
                outline: symbol.querySelector(".shape").getAttribute("d"),
                size: width, above: Number(box.style.zIndex),
                x: left + width / 2, y: top + height / 2,
            }];
        }))"""
    )


def has_class(page, name: str) -> bool:
    return page.evaluate(f"document.querySelector('.chart').classList.contains('{name}')")


def zoom(page, way: str, times: int = 1) -> None:
    # The zoom itself is waited for: on a busy machine the animation can be over unseen.
    for _ in range(times):
        before = page.evaluate("map_fields.getZoom()")
        page.click(f".leaflet-control-zoom-{way}")
        page.wait_for_function(
            "(before) => map_fields.getZoom() !== before && !map_fields._animatingZoom", arg=before
        )


# Dots


def test_few_fields_keep_whole_symbols_at_the_first_zoom(opened):
    page = opened().open()
    assert not has_class(page, "crowded")
    assert {look["size"] for look in looks(page).values()} == {30}


@pytest.mark.parametrize("view", VIEWS)
def test_a_pile_of_markers_becomes_dots(show, view):
    page = show("piled", view)
    shown = looks(page)
    dots = [look for field, look in shown.items() if field != EMPTY_FIELD]
    assert has_class(page, "dots")
    assert len({dot["outline"] for dot in dots}) == 1
    assert shown[EMPTY_FIELD]["outline"] not in {dot["outline"] for dot in dots}
    assert all(dot["size"] < 20 for dot in dots)


def test_worse_classes_are_larger_and_on_top(show):
    page = show("piled", fragment="#month=4")
    shown = sorted(looks(page).values(), key=lambda look: look["rank"])
    dots = [look for look in shown if look["rank"] >= 0]
    assert len({dot["rank"] for dot in dots}) >= 3
    for one in dots:
        for other in dots:
            if one["rank"] < other["rank"]:
                assert one["size"] < other["size"]
    ranks = [look["rank"] for look in sorted(shown, key=lambda look: look["above"])]
    assert ranks == sorted(ranks)
    assert ranks[0] == -1


def test_dots_grow_with_the_zoom_until_their_shapes_return(show):
    page = show("many", "phone")
    zoom(page, "out", 2)
    sizes = []
    while has_class(page, "dots"):
        sizes.append(looks(page)["field-0"]["size"])
        assert len(sizes) < 8
        zoom(page, "in")
    assert len(sizes) >= 2
    assert sizes == sorted(sizes)
    assert sizes[-1] > sizes[0]
    legend = page.eval_on_selector_all(
        "#legend li", "(items) => items.map((i) => i.querySelector('path').getAttribute('d'))"
    )
    ranks = [*range(len(legend) - 2), -1]  # the last two are no data and the wedge
    expected = dict(zip(ranks, legend, strict=False))
    for look in looks(page).values():
        assert look["outline"] == expected[look["rank"]]


def test_the_chosen_field_stays_a_whole_symbol_among_dots(show):
    page = show("piled", fragment="#field=field-7")
    assert has_class(page, "dots")
    assert looks(page)["field-7"]["size"] == 30
    assert looks(page)["field-8"]["size"] < 20
    assert page.is_visible(".marker-box[data-field=field-7] .label bdi")


# Labels


@pytest.mark.parametrize("view", ["desktop", "phone"])
@pytest.mark.parametrize("study", ["few", "many", "piled"])
@pytest.mark.parametrize("fragment", ["#month=7", "#month=4&measure=p90&hour=14"])
def test_labels_cover_no_other_label_and_no_marker(opened, show, study, view, fragment):
    page = opened(view).open(fragment) if study == "few" else show(study, view, fragment)
    boxes = page.evaluate(
        """() => { const box = (node) => {
            const { left, top, right, bottom } = node.getBoundingClientRect();
            return [left, top, right, bottom]; };
        const frame = document.querySelector(".chart").getBoundingClientRect();
        return {
            frame: [frame.left, frame.top, frame.right, frame.bottom],
            labels: [...document.querySelectorAll(".label:not(.no-label)")].map((label) =>
                [label.closest(".marker-box").dataset.field, ...box(label)]),
            shapes: [...document.querySelectorAll(".marker-box")].map((marker) =>
                [marker.dataset.field, ...box(marker.querySelector(".shape"))]),
        }; }"""
    )
    labels, frame = boxes["labels"], boxes["frame"]
    assert len(labels) >= 3

    def overlap(a, b):
        return a[0] < b[2] and b[0] < a[2] and a[1] < b[3] and b[1] < a[3]

    for field, *box in labels:
        assert box[0] >= frame[0] and box[1] >= frame[1]
        assert box[2] <= frame[2] + 1 and box[3] <= frame[3] + 1
        covered = [
            other for other, *shape in boxes["shapes"] if other != field and overlap(box, shape)
        ]
        assert covered == [], field
        assert [o for o, *other in labels if o != field and overlap(box, other)] == [], field


# Pointing


def nearest(shown: dict[str, dict], x: float, y: float) -> set[str]:
    """The nearest fields, of several at one place those of the worst class."""
    far = {field: math.hypot(look["x"] - x, look["y"] - y) for field, look in shown.items()}
    least = min(far.values())
    found = {field for field in far if far[field] < least + 0.01}
    worst = max(shown[field]["rank"] for field in found)
    # Half of a target of 44 px (WCAG 2.2, 2.5.5).
    return {field for field in found if shown[field]["rank"] == worst and least < 22}


@pytest.mark.parametrize(("study", "view"), [("many", "desktop"), ("piled", "phone")])
def test_a_click_chooses_the_nearest_field(show, study, view):
    page = show(study, view)
    page.eval_on_selector(".chart", "(chart) => chart.scrollIntoView({block: 'center'})")
    shown = looks(page)
    draw, hits = Random(5), 0
    middles = sorted(shown.items())[:: len(shown) // 4]
    for field, look in middles:
        x, y = look["x"] + draw.uniform(-9, 9), look["y"] + draw.uniform(-9, 9)
        expected = nearest(shown, x, y)
        page.touchscreen.tap(x, y) if view == "phone" else page.mouse.click(x, y)
        page.wait_for_selector("#field-heading")
        assert page.evaluate("location.href").split("field=")[1] in expected
        hits += field not in expected
        page.evaluate("document.querySelector('#all-fields').click()")
        page.wait_for_selector("#list-part", state="visible")
        page.eval_on_selector(".chart", "(chart) => chart.scrollIntoView({block: 'center'})")
        page.wait_for_timeout(600)  # two taps within half a second are a double tap
        assert looks(page)[field]["x"] == pytest.approx(look["x"], abs=1)
    assert hits or study == "many"  # in the pile the nearest is not the one aimed at
    frame = page.locator(".chart").bounding_box()
    x, y = frame["x"] + 60, frame["y"] + frame["height"] - 70
    assert nearest(shown, x, y) == set()
    page.mouse.click(x, y)
    assert "field=" not in page.evaluate("location.href")


def test_the_tip_names_what_is_under_the_pointer(show):
    page = show("many")
    shown = looks(page)
    look = shown[DOUBTFUL]
    page.mouse.move(look["x"] + 1, look["y"])
    field = nearest(shown, look["x"] + 1, look["y"])
    assert field == {DOUBTFUL}
    lines = page.locator(".tip").inner_text().split("\n")
    assert lines[1].endswith(" m)")
    assert lines[2] == page.text_content(f".marker-box[data-field={DOUBTFUL}] .label b")
    assert "elevation in doubt" in lines
    page.keyboard.press("Escape")
    page.wait_for_selector(".tip", state="detached")


def test_markers_of_few_fields_are_buttons_with_a_name(show, piled):
    page = show("piled", fragment="#month=7")
    found = page.eval_on_selector_all(
        ".marker-box",
        """(boxes) => boxes.map((box) => [box.dataset.field, box.getAttribute("role"),
            box.tabIndex, box.getAttribute("aria-label").replace(/[\\u2068\\u2069]/g, ""),
            box.querySelector(".label b").textContent])""",
    )
    steep = {f.id for f in piled.fields if any(abs(d.slope_pct) > 2 for d in f.runways)}
    for (field, role, stop, name, value), given in zip(found, piled.fields, strict=True):
        marks = ["elevation in doubt"] * (field == DOUBTFUL)
        marks += ["steep: own procedure"] * (field in steep)
        assert (role, stop) == ("button", 0)
        assert name == ", ".join([given.name, value, *marks])
    for key in ("Enter", " "):
        page.focus(".marker-box[data-field=field-3]")
        assert page.evaluate("getComputedStyle(document.activeElement).outlineStyle") != "none"
        assert "ft (" in page.inner_text(".tip")
        page.keyboard.press(key)
        assert "field=field-3" in page.evaluate("location.href")
        page.keyboard.press("Escape")


def test_markers_of_many_fields_leave_the_keyboard_to_the_list(show):
    page = show("many")
    assert page.locator(".marker-box[tabindex]").count() == 0
    assert page.get_attribute(".leaflet-marker-pane", "aria-hidden") == "true"
    assert page.locator("#fields tbody button[data-field]").count() == N_MANY


def test_a_doubtful_elevation_is_told_by_text_and_a_dashed_outline(show):
    page = show("piled", fragment=f"#field={DOUBTFUL}")
    dashes = page.evaluate(
        """() => Object.fromEntries([...document.querySelectorAll(".marker-box")].map((box) =>
            [box.dataset.field, getComputedStyle(box.querySelector(".shape")).strokeDasharray]))"""
    )
    assert [field for field, dash in dashes.items() if dash != "none"] == [DOUBTFUL]
    page.click("#all-fields")
    marks = page.locator("#fields tbody tr:has(.steep:text-is('elevation in doubt'))")
    assert marks.count() == 1
    assert marks.locator("button").get_attribute("data-field") == DOUBTFUL


@pytest.fixture(scope="module")
def axe_contexts(browser) -> Iterator[dict[str, object]]:
    made = {
        view: browser.new_context(offline=True, bypass_csp=True, **VIEWS[view])
        for view in ("desktop", "phone dark")
    }
    yield made
    for context in made.values():
        context.close()


@pytest.mark.parametrize("view", ["desktop", "phone dark"])
@pytest.mark.parametrize(("study", "fragment"), [("many", ""), ("piled", "#field=field-7")])
def test_axe_finds_no_violation_among_many_markers(axe_contexts, urls, study, view, fragment):
    pytest.importorskip("axe_playwright_python", reason="axe_playwright_python is not installed")
    page = axe_contexts[view].new_page()
    page.goto(urls[study] + fragment)
    page.wait_for_selector("html[data-ready=yes]", timeout=20_000)
    page.evaluate((files("axe_playwright_python") / "axe.min.js").read_text(encoding="utf-8"))
    violations = page.evaluate(
        """async (tags) => (await axe.run({include: ["#chart-part", "#list-part"]},
            {runOnly: {type: "tag", values: tags}}))
            .violations.map((v) => [v.id, v.nodes.slice(0, 3).map((n) => n.html)])""",
        WCAG,
    )
    page.close()
    assert violations == []


# The list


def rows(page) -> list[list[str]]:
    """Field, elevation, value and interval of the rows shown."""
    return page.eval_on_selector_all(
        "#fields tbody tr:not([hidden])",
        """(all) => all.map((row) => [row.querySelector("button").dataset.field,
            ...[...row.querySelectorAll("td.number")].map((cell) => cell.textContent)])""",
    )


def number(text: str) -> float:
    return 0.5 if text.startswith("<") else float(text.split(" ")[0].replace(",", ""))


@pytest.mark.parametrize("by", ["mouse", "keyboard"])
def test_every_column_sorts_both_ways_with_no_data_last(show, many, by):
    page = show("many", fragment="#month=7")
    keys = {
        "name": lambda row: many.fields[int(row[0].split("-")[1])].name.casefold(),
        "elevation": lambda row: number(row[1]),
        "value": lambda row: number(row[2]),
        "interval": lambda row: number(row[3].split("-")[1]),
    }
    for column, key in keys.items():
        head = page.locator(f"#fields [data-sort={column}]")
        ways = set()
        for _ in range(2):
            if by == "mouse":
                head.click()
            else:
                head.focus()
                page.keyboard.press("Enter")
                assert page.evaluate("document.activeElement.dataset.sort") == column
            way = page.get_attribute(f"#fields th.column-{column}", "aria-sort")
            ways.add(way)
            found = rows(page)
            assert len(found) == N_MANY
            if column in ("value", "interval"):
                # Without a value, or with too few years for an interval.
                missing = [r[{"value": 2, "interval": 3}[column]] in ("no data", "none")
                           for r in found]  # fmt: skip
                assert missing == sorted(missing)
                assert any(missing)
                found = [r for r, gone in zip(found, missing, strict=True) if not gone]
            if column == "name":
                found = [r for r in found if int(r[0].split("-")[1]) > 10]  # plain names
                order = [int(r[0].split("-")[1]) for r in found]
                assert order == sorted(order, reverse=way == "descending")
            else:
                order = [key(r) for r in found]
                assert len(set(order)) > 2
                assert order == sorted(order, reverse=way == "descending")
        assert ways == {"ascending", "descending"}
        marked = page.locator("#fields [aria-sort=ascending], #fields [aria-sort=descending]")
        assert marked.count() == 1


def test_intervals_are_those_of_the_frame_where_there_is_room(show, many):
    page = show("many", fragment="#month=7")
    frame = many.risk_monthly.query("month == 7").set_index("field")
    for field, _, _, text in rows(page):
        row = frame.loc[field]
        if math.isnan(row.shortfall):
            assert text == "no data"
        elif math.isnan(row.ci_low):
            assert text == "none"
        else:
            low, high = (math.floor(100 * v + 0.5) for v in (row.ci_low, row.ci_high))
            if row.ci_low >= 0.01:
                assert text == f"{low}-{high} %"
    for fragment in ("#month=7&hour=14", "#month=7&measure=p90"):
        assert show("many", fragment=fragment).locator("#fields th.column-interval").count() == 0
    assert show("many", "phone").locator("#fields th.column-interval").count() == 0


def test_rows_and_markers_are_kept_and_only_patched(show):
    page = show("many", fragment="#month=1")
    page.evaluate(
        """() => { for (const node of document.querySelectorAll(
            "#fields tbody tr, .marker-box .symbol, .marker-box .label")) node.kept = true; }"""
    )
    before = rows(page)
    page.focus("#fields button[data-field=field-30]")
    page.evaluate("location.hash = 'month=7'")
    page.wait_for_selector("#caption:has-text('July')")
    assert rows(page) != before
    assert page.evaluate("document.activeElement.dataset.field") == "field-30"
    assert page.evaluate(
        """() => [...document.querySelectorAll(
            "#fields tbody tr, .marker-box .symbol, .marker-box .label")].every((n) => n.kept)"""
    )


def test_a_short_list_has_no_search(opened):
    assert opened().open().locator("#find-field").count() == 0


@pytest.mark.parametrize(
    ("typed", "expected"),
    [
        ("zur", {"field-6", "field-10"}),
        ("ZÜRICH s", {"field-6"}),
        ("lodz", {"field-7"}),
        ("tromso", {"field-8"}),
        ("saudarkrok", {"field-9"}),
        ("FIELD-23", {"field-23"}),
        ("nothing like it", set()),
    ],
)
def test_search_finds_names_and_identifiers_whatever_case_and_accents(show, typed, expected):
    page = show("piled", "phone")
    assert page.inner_text(".list-count") == f"{N_PILED} fields"
    assert page.get_attribute(".list-count", "aria-live") == "polite"
    box = page.get_by_label("Find a field")
    assert box.get_attribute("type") == "search"
    box.fill(typed)
    assert {row[0] for row in rows(page)} == expected
    visible = page.locator("#fields tbody tr").filter(visible=True)
    assert visible.count() == len(expected)
    count = page.inner_text(".list-count")
    if expected:
        assert count == f"{len(expected)} of {N_PILED} fields"
    else:
        assert count == f"No field of {N_PILED} has this in its name or identifier."
    box.press("Escape")
    assert box.input_value() == ""
    assert len(rows(page)) == N_PILED
    assert page.inner_text(".list-count") == f"{N_PILED} fields"


def test_search_lasts_over_a_change_of_month_and_gives_way_to_a_field_come_back_from(show):
    page = show("piled")
    page.fill("#find-field", "meadow 1")
    found = {row[0] for row in rows(page)}
    page.select_option("#period", "m1")
    assert {row[0] for row in rows(page)} == found
    assert "field-7" not in found
    page.evaluate("location.hash = 'field=field-7'")
    page.wait_for_selector("#field-heading")
    page.click("#all-fields")
    assert page.evaluate("document.activeElement.dataset.field") == "field-7"
    assert page.input_value("#find-field") == ""


def test_two_to_four_fields_are_picked_for_comparison(show):
    page = show("many", "phone")
    for count, field in enumerate(("field-11", "field-12", "field-13", "field-14"), start=1):
        box = page.locator(f"[data-compare={field}]")
        assert "Compare" in box.get_attribute("aria-label")
        box.focus()
        page.keyboard.press("Space")
        assert box.is_checked()
        assert page.evaluate("document.activeElement.dataset.compare") == field
        assert page.locator("[data-compare]:checked").count() == count
    full = page.locator("[data-compare]:disabled")
    assert full.count() == N_MANY - 4
    assert "chosen already" in full.first.locator("xpath=..").get_attribute("title")
    page.locator("[data-compare=field-12]").click()
    assert page.locator("[data-compare]:disabled").count() == 0
    assert page.locator("label.pick[title]:not([title=''])").count() == 0


def test_targets_in_a_long_list_are_44_px_and_nothing_stands_aside(show):
    # WCAG 2.2, 2.5.5 (enhanced): 44 by 44 CSS pixels.
    page = show("many", "phone")
    small = page.evaluate(
        """() => [...document.querySelectorAll("#list-part :is(button, .pick, input[type=search])")]
            .filter((node) => node.checkVisibility())
            .map((node) => [node.outerHTML.slice(0, 60), node.getBoundingClientRect()])
            .filter(([, box]) => Math.min(box.width, box.height) < 43.9)
            .map(([text]) => text)"""
    )
    assert small == []
    assert page.evaluate("document.documentElement.scrollWidth") == 390
    right = page.evaluate(
        """() => Math.max(...[...document.querySelectorAll("#list-part *")]
            .map((node) => node.getBoundingClientRect().right))"""
    )
    assert right <= 390


def test_heads_of_a_long_list_stay_in_sight(show):
    for view in ("desktop", "phone"):
        page = show("many", view)
        page.locator("#fields tbody tr").nth(60).scroll_into_view_if_needed()
        scrolled = "document.querySelector('.list-frame').scrollTop > 0"
        assert page.evaluate(scrolled) == (view == "desktop")
        assert page.evaluate("window.scrollY > 1000") == (view == "phone")
        row, head = (
            page.locator(where).bounding_box()
            for where in ("#fields tbody tr >> nth=60", "#fields thead")
        )
        assert 0 <= head["y"] <= row["y"]


def test_long_list_is_a_table_to_a_screen_reader(show):
    page = show("many")
    assert page.get_by_role("table").filter(has=page.locator("thead")).count() >= 1
    assert page.get_by_role("columnheader", name="Elevation").count() == 1
    assert page.locator("#fields").get_by_role("row").count() == N_MANY + 1
    assert page.locator("#fields").get_by_role("rowheader").count() == N_MANY
