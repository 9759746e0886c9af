"""The paper pages: skeleton, policy and style; the scheme is the one of the map page."""

from __future__ import annotations

import base64
import hashlib
import html
import re
from collections.abc import Iterable
from importlib.resources import files

from climarisk.outputs.colours import YLORBR, ink_on
from climarisk.outputs.report.words import css_text, isolated
from climarisk.outputs.texts import LOAD_LABELS

_STYLES = ("base.css", "tables.css", "charts.css", "planning.css", "narrow.css", "print.css")
#: The running foot has room for so many characters of the title.
_TITLE_LENGTH = 60


def report_text(name: str) -> str:
    """A file of the report's skeleton or style."""
    return (files("climarisk.outputs") / "report" / name).read_text(encoding="utf-8")


def style(title: str, bands: int) -> str:
    """The whole style of a report with so many bands."""
    rules = [
        f".b{i}{{background:{colour};color:{ink_on(colour)};fill:{colour}}}"
        for i, colour in enumerate(YLORBR[bands])
    ]
    # Loads have classes of their own, however many bands there are.
    rules += [
        f".l{i}{{background:{colour};color:{ink_on(colour)}}}"
        for i, colour in enumerate(YLORBR[len(LOAD_LABELS)])
    ]
    short = title if len(title) <= _TITLE_LENGTH else title[: _TITLE_LENGTH - 1] + "…"
    foot = f"@page{{@bottom-left{{content:{css_text(isolated(short))}}}}}"
    return "".join([*map(report_text, _STYLES), *rules, foot])


def paper_page(title: str, look: str, sections: Iterable[str | None]) -> str:
    """A whole HTML page without a script, which lets its own style in and loads nothing.

    Parameters
    ----------
    title : str
        Escaped here.
    look : str
        The style.
    sections : iterable of str or None
        Escaped already; those that are empty are left out.
    """
    digest = base64.b64encode(hashlib.sha256(look.encode()).digest()).decode("ascii")
    parts = {
        "policy": f"default-src 'none'; style-src 'sha256-{digest}'; img-src data:; "
        "base-uri 'none'; form-action 'none'",
        "title": html.escape(title),
        "style": look,
        "sections": "\n".join(part for part in sections if part),
    }
    # One pass, so that a part which happens to hold a mark is not filled again.
    return re.sub(r"@@([a-z]+)@@", lambda mark: parts[mark[1]], report_text("report.html"))
