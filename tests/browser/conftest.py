"""Chromium for the tests of the page; every page is opened from disk with the network off."""

from __future__ import annotations

import shutil
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest
from chromium import FLAGS, VIEWS, OpenPage

sys.path.insert(0, str(Path(__file__).parents[1] / "outputs"))

from sample_result import sample_result  # noqa: E402

from climarisk.outputs.map import render_map  # noqa: E402


@pytest.fixture(scope="session")
def result():
    return sample_result()


@pytest.fixture(scope="session")
def map_url(result, tmp_path_factory) -> str:
    path = tmp_path_factory.mktemp("map") / "map.html"
    path.write_text(render_map(result), encoding="utf-8")
    return path.as_uri()


@pytest.fixture(scope="session")
def browser() -> Iterator[object]:
    sync_api = pytest.importorskip("playwright.sync_api", reason="playwright is not installed")
    executable = shutil.which("chromium") or shutil.which("chromium-browser")
    if executable is None:
        pytest.skip("no chromium on the path")
    with sync_api.sync_playwright() as playwright:
        chromium = playwright.chromium.launch(executable_path=executable, args=FLAGS)
        yield chromium
        chromium.close()


@pytest.fixture(scope="session")
def contexts(browser) -> Iterator[dict[str, object]]:
    made = {name: browser.new_context(offline=True, **view) for name, view in VIEWS.items()}
    yield made
    for context in made.values():
        context.close()


@pytest.fixture
def opened(contexts, map_url):
    """A function from the name of a view to a fresh `OpenPage` in it."""
    pages = []

    def new(view: str = "desktop") -> OpenPage:
        page = contexts[view].new_page()
        pages.append(page)
        opened_page = OpenPage(page, map_url)
        page.on("request", lambda request: opened_page.requests.append(request.url))
        page.on("console", lambda message: opened_page.complaints.append(message.text))
        page.on("pageerror", lambda error: opened_page.complaints.append(str(error)))
        return opened_page

    yield new
    for page in pages:
        page.close()
