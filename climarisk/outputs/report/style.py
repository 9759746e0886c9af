"""Colours, shapes and style of the report; the scheme is the one of the map page."""

from __future__ import annotations

from importlib.resources import files

from climarisk.outputs.colours import YLORBR, ink_on
from climarisk.outputs.report.words import css_text, isolated

_STYLES = ("base.css", "tables.css", "charts.css", "narrow.css", "print.css")
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
    short = title if len(title) <= _TITLE_LENGTH else title[: _TITLE_LENGTH - 1] + "…"
    foot = f"@page{{@bottom-left{{content:{css_text(isolated(short))}}}}}"
    return "".join([*map(report_text, _STYLES), *rules, foot])
