"""How large the map page is, how soon it is ready and how fast it repaints.

Run from the root of the repository: ``python -m tests.benchmarks.page_speed``.  It needs
Playwright and Chromium.  The study is the invented one of the tests; the page is opened from
disk with the network off, in a window of 1280 x 800.

- size: bytes of the HTML file.
- ready: time from the start of the navigation until the page's script is through and says so
  (median of 5 loads, each in a fresh context).
- painted: the same until the first frame after that.
- change: time from the change of the month control to the second animation frame after it
  (median and worst of 20; two frames of a screen at 60 Hz alone take up to 33 ms).
- work: processor time of the page's main thread for one such change, with style, layout and
  painting (mean of 20): what is left of it when other programs keep the machine busy.
"""

from __future__ import annotations

import argparse
import shutil
import statistics
import sys
import tempfile
from dataclasses import replace
from pathlib import Path
from random import Random

TESTS = Path(__file__).parents[1]
sys.path[:0] = [str(TESTS / "outputs"), str(TESTS / "browser")]

from chromium import FLAGS, VIEWS  # noqa: E402
from playwright.sync_api import Browser, Page, sync_playwright  # noqa: E402
from sample_result import sample_result  # noqa: E402

from climarisk.outputs.map import render_map  # noqa: E402
from climarisk.results import StudyResult  # noqa: E402

N_LOADS = 5
N_CHANGES = 20

#: Notes the time at which the page says that it is ready, and that of the frame after it.
WATCH_READY = """
new MutationObserver((_, watch) => {
    if (document.documentElement?.dataset.ready !== "yes") return;
    watch.disconnect();
    window.readyMs = performance.now();
    requestAnimationFrame(() => requestAnimationFrame((t) => { window.paintedMs = t; }));
}).observe(document, { subtree: true, childList: true, attributes: true });
"""

CHANGE_MONTH = """(month) => new Promise((done) => {
    const control = document.getElementById("period");
    control.value = "m" + month;
    const start = performance.now();
    control.dispatchEvent(new Event("change", { bubbles: true }));
    requestAnimationFrame(() => requestAnimationFrame(() => done(performance.now() - start)));
})"""


def scattered(result: StudyResult, seed: int = 3) -> StudyResult:
    """The same study with its fields strewn over 10 degrees of latitude and 15 of longitude."""
    draw = Random(seed)
    fields = tuple(
        replace(f, latitude=40.0 + 10.0 * draw.random(), longitude=2.0 + 15.0 * draw.random())
        for f in result.fields
    )
    return replace(result, fields=fields)


def load(browser: Browser, url: str) -> tuple[Page, float, float]:
    """Open a page in a fresh context; also the times at which it was ready and painted, ms."""
    page = browser.new_context(offline=True, **VIEWS["desktop"]).new_page()
    page.add_init_script(WATCH_READY)
    page.goto(url)
    page.wait_for_function("window.paintedMs > 0")
    return page, page.evaluate("window.readyMs"), page.evaluate("window.paintedMs")


def changes(page: Page) -> tuple[list[float], float]:
    """Times of the month changes until the second frame, and the mean work of one, ms."""
    page.wait_for_timeout(500)
    page.evaluate(CHANGE_MONTH, 2)  # the first one warms up
    page.wait_for_timeout(500)
    session = page.context.new_cdp_session(page)
    session.send("Performance.enable", {"timeDomain": "threadTicks"})

    def thread_ms() -> float:
        found = session.send("Performance.getMetrics")["metrics"]
        return next(1000.0 * one["value"] for one in found if one["name"] == "ThreadTime")

    times, before = [], thread_ms()
    for i in range(N_CHANGES):
        times.append(page.evaluate(CHANGE_MONTH, (i * 5 + 7) % 12))
        page.wait_for_timeout(60)
    return times, (thread_ms() - before) / N_CHANGES


def measure(browser: Browser, name: str, path: Path) -> str:
    """One line of the report."""
    ready, painted = [], []
    for _ in range(N_LOADS):
        page, at_ready, at_painted = load(browser, path.as_uri())
        ready.append(at_ready)
        painted.append(at_painted)
        if len(ready) < N_LOADS:
            page.context.close()
    times, work = changes(page)
    page.context.close()
    return (
        f"{name:<26}{path.stat().st_size / 1e6:8.2f} MB"
        f"{statistics.median(ready):8.0f} ms{statistics.median(painted):8.0f} ms"
        f"{statistics.median(times):8.0f} ms{max(times):8.0f} ms"
        f"{work:8.0f} ms"
    )


def main() -> None:
    """Print one line for each size of study and each spread of its fields."""
    parser = argparse.ArgumentParser(description="Measure the speed of the map page.")
    parser.add_argument("--fields", type=int, nargs="+", default=[50, 500])
    parser.add_argument("--aircraft", type=int, default=5)
    parser.add_argument("--page", type=Path, nargs="+", help="measure these pages instead")
    wanted = parser.parse_args()
    heads = ("size", "ready", "painted", "change", "worst", "work")
    print(f"{'page':<26}" + "".join(f"{head:>11}" for head in heads))
    with sync_playwright() as playwright, tempfile.TemporaryDirectory() as folder:
        browser = playwright.chromium.launch(
            executable_path=shutil.which("chromium") or shutil.which("chromium-browser"),
            args=FLAGS,
        )
        for path in wanted.page or []:
            print(measure(browser, path.name, path.resolve()), flush=True)
        for n_fields in [] if wanted.page else wanted.fields:
            study = sample_result(n_fields, wanted.aircraft)
            for spread, result in (("block", study), ("strewn", scattered(study))):
                path = Path(folder) / f"{n_fields}-{spread}.html"
                path.write_text(render_map(result), encoding="utf-8")
                name = f"{n_fields} x {wanted.aircraft}, {spread}"
                print(measure(browser, name, path), flush=True)
        browser.close()


if __name__ == "__main__":
    main()
