"""Lint, format and shape of the page's scripts and styles, as they stand in the page."""

from __future__ import annotations

import json
import re
import shutil
import subprocess
import sys
from pathlib import Path

import pytest
from sample_result import sample_result

from climarisk.outputs import map as map_page
from climarisk.outputs.map import render_map

ROOT = Path(__file__).parents[2]
PAGE = Path(map_page.__file__).parent / "page"
SCRIPTS = sorted(PAGE.glob("*.js"))
STYLES = sorted(PAGE.glob("*.css"))
LONGEST = 350


def tool(name: str) -> str:
    """A program that came with the test packages, else one on the path."""
    beside = shutil.which(name, path=str(Path(sys.executable).parent))
    found = beside or shutil.which(name)
    if found is None:
        pytest.skip(f"{name} is not installed; no wheel of it exists for some machines")
    return found


@pytest.fixture(scope="module")
def html() -> str:
    return render_map(sample_result())


@pytest.fixture(scope="module")
def script(html) -> str:
    """The page's own scripts, joined as the browser gets them."""
    (own,) = [s for s in re.findall(r"<script>(.*?)</script>", html, re.S) if "// dom.js:" in s]
    return own


def lint(folder: Path, script: str) -> list[str]:
    """What the linter has to say, each with the file of the package it came from."""
    path = folder / "page.js"
    path.write_text(script, encoding="utf-8")
    config = ROOT / ".oxlintrc.json"
    done = subprocess.run(
        [tool("oxlint"), "-c", str(config), "--deny-warnings", "-f", "json", str(path)],
        capture_output=True,
        text=True,
        encoding="utf-8",
        cwd=folder,
    )
    assert done.stdout.lstrip().startswith("{"), done.stdout + done.stderr
    told = json.loads(done.stdout)
    assert told["number_of_files"] == 1
    found = [described(item, script) for item in told["diagnostics"]]
    assert (done.returncode == 0) == (found == []), done.stdout + done.stderr
    return found


def described(item: dict, script: str) -> str:
    line = item["labels"][0]["span"]["line"] if item["labels"] else 1
    lines = script.split("\n")[:line]
    heads = [(n, match[1]) for n, text in enumerate(lines, 1) if (match := header(text, "//"))]
    first, name = heads[-1] if heads else (1, "page.js")
    return f"{name}:{line - first + 1}: {item['code']}: {item['message']}"


def header(line: str, mark: str) -> re.Match[str] | None:
    return re.match(re.escape(mark) + r" ([a-z_-]+\.(?:js|css)): \S", line)


# ---------------------------------------------------------------- lint


def test_scripts_of_the_page_have_no_lint(script, tmp_path):
    found = lint(tmp_path, script)
    assert found == [], "\n".join(found)


PLANTED = {
    "no-undef": "window.top.document.title = undefinedName(1);",
    "no-unused-vars": "function neverCalled() {\n  return 1;\n}",
    "eqeqeq": "window.title = window.length == 1;",
    "prefer-const": "let never = 1;\nwindow.title = never;",
    "no-redeclare": "function byId(id) {\n  return id;\n}",  # of dom.js
    "no-var": "var old = 1;\nwindow.title = old;",
    "no-implied-eval": 'window.setTimeout("window.title = 1", 10);',
    "no-eval": 'window.eval("1");',
    "no-new-func": 'window.title = new Function("return 1");',
    "no-dupe-keys": "window.title = { a: 1, a: 2 };",
    "no-console": "console.log(1);",
    "no-restricted-globals": "window.title = event;",
    "no-unsafe-finally": "function f() {\n  try {\n    return 1;\n  } finally {\n"
    "    return 2;\n  }\n}\nf();",
}


@pytest.fixture(scope="module")
def found_before(script, tmp_path_factory) -> list[str]:
    return lint(tmp_path_factory.mktemp("lint"), script)


@pytest.mark.parametrize("rule", PLANTED)
def test_linter_finds_what_is_planted_and_names_the_file(script, found_before, tmp_path, rule):
    end = script.rindex("})();")
    found = lint(tmp_path, f"{script[:end]}{PLANTED[rule]}\n{script[end:]}")
    new = [text for text in found if text not in found_before]
    assert [text for text in new if f"({rule})" in text], found
    last = re.findall(r"^// ([a-z_-]+\.js):", script, re.M)[-1]
    first = "dom.js" if rule == "no-redeclare" else last
    assert all(text.startswith((f"{first}:", f"{last}:")) for text in new)


# ---------------------------------------------------------------- format


def oxfmt(*paths: Path) -> subprocess.CompletedProcess[str]:
    config = ROOT / ".oxfmtrc.json"
    return subprocess.run(
        [tool("oxfmt"), "-c", str(config), "--check", *map(str, paths)],
        capture_output=True,
        text=True,
        encoding="utf-8",
        cwd=PAGE,
    )


def test_scripts_and_styles_are_formatted():
    done = oxfmt(*SCRIPTS, *STYLES)
    assert done.returncode == 0, done.stdout + done.stderr


def test_formatter_finds_an_unformatted_script_and_style(tmp_path):
    for name, text in (("a.js", "const a = [1,2]\n"), ("a.css", "a { color:red }\n")):
        (tmp_path / name).write_text(text, encoding="utf-8")
        done = oxfmt(tmp_path / name)
        assert done.returncode == 1
        assert name in done.stdout + done.stderr


# ---------------------------------------------------------------- shape


def test_there_are_scripts_and_styles():
    assert len(SCRIPTS) >= 10
    assert len(STYLES) >= 5


@pytest.mark.parametrize("path", [*SCRIPTS, *STYLES], ids=lambda path: path.name)
def test_each_file_says_what_it_is_and_is_short(path, html):
    text = path.read_text(encoding="utf-8")
    lines = text.splitlines()
    mark = "//" if path.suffix == ".js" else "/*"
    first = header(lines[0], mark)
    assert first, f"{path.name} begins with `{mark} {path.name}: what it is`"
    assert first[1] == path.name
    assert len(lines) <= LONGEST
    assert html.count(lines[0]) == 1, f"{path.name} is in the page once"
    assert "\t" not in text
    assert "\r" not in text


@pytest.mark.parametrize("path", SCRIPTS, ids=lambda path: path.name)
def test_no_script_makes_elements_from_text(path):
    # The page's own promise: text that came from a file is shown through textContent alone.
    text = path.read_text(encoding="utf-8")
    ways = r"innerHTML|outerHTML|insertAdjacentHTML|document\.write|DOMParser|srcdoc|javascript:"
    assert re.findall(ways, text) == []
