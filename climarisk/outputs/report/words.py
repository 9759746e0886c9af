"""Markup and figures of the report: every text becomes escaped text, never markup."""

from __future__ import annotations

import html
import math
from collections.abc import Iterable

from climarisk.outputs.texts import NO_DATA, grouped, share_text
from climarisk.units import METRES_PER_FOOT

#: Elements without content; `el` gives the others an end tag.
_VOID = ("path", "rect", "col")


class Html(str):
    """Markup that `el` made; any other text is escaped before it enters a page."""


def el(tag: str, *content: object, **attributes: object) -> Html:
    """An element; text in it is escaped, an attribute of None is left out.

    Parameters
    ----------
    tag : str
    *content : str, Html, None or iterable of these
    **attributes : object
        A trailing underscore is dropped, other underscores become hyphens.
    """
    given = "".join(
        f' {name.rstrip("_").replace("_", "-")}="{html.escape(str(value))}"'
        for name, value in attributes.items()
        if value is not None
    )
    if tag in _VOID:
        return Html(f"<{tag}{given}/>")
    return Html(f"<{tag}{given}>{join(content)}</{tag}>")


def join(content: Iterable[object]) -> Html:
    """The parts one after the other, plain text escaped."""
    parts: list[str] = []
    for part in content:
        if isinstance(part, Html):
            parts.append(part)
        elif isinstance(part, str):
            parts.append(html.escape(part))
        elif isinstance(part, Iterable):
            parts.append(join(part))
        elif part is not None:
            raise TypeError(f"{type(part).__name__} is no text; format numbers first")
    return Html("".join(parts))


def given(text: object) -> Html:
    """A text from the data, its writing direction kept to itself."""
    return el("bdi", str(text))


def unbroken(text: str) -> Html:
    """A figure with its unit on one line."""
    return el("span", text, class_="unbroken")


def isolated(text: str) -> str:
    """A text from the data for places that take no elements (Unicode isolates, UAX 9)."""
    return f"\N{FIRST STRONG ISOLATE}{text}\N{POP DIRECTIONAL ISOLATE}"


def css_text(text: str) -> str:
    """A text as a CSS string, every unusual character an escape (CSS Syntax 3, section 4.3.7)."""
    safe = (c if c.isascii() and (c.isalnum() or c == " ") else f"\\{ord(c):x} " for c in text)
    return '"' + "".join(safe) + '"'


def scroll(table: Html, label: str) -> Html:
    """A table in a container of its own that scrolls sideways on a narrow screen."""
    return el("div", table, class_="scroll", role="region", aria_label=label, tabindex="0")


def number(share: float) -> str:
    """A share in whole per cent without the sign, for cells whose heading names the unit."""
    return share_text(share).removesuffix(" %")


def elevation_text(metres: float) -> str:
    """An elevation in whole feet with whole metres behind."""
    feet = f"{grouped(round(metres / METRES_PER_FOOT))} ft"
    return f"{feet} ({grouped(round(metres))} m)".replace(" ", "\N{NO-BREAK SPACE}")


def distance_text(km: float) -> str:
    """A distance to a station, rounded up: never nearer than it is."""
    return NO_DATA if math.isnan(km) else f"{math.ceil(round(km * 10.0, 6)) / 10.0:.1f} km"


def height_text(metres: float) -> str:
    """A signed difference of height in whole metres."""
    if math.isnan(metres):
        return NO_DATA
    return f"{'+' if round(metres) > 0 else ''}{grouped(round(metres))} m"


def error_text(feet: float) -> str:
    """One standard deviation in feet, with two digits."""
    if math.isnan(feet):
        return NO_DATA
    if feet < 1.0:
        return "< 1 ft"
    return f"±{grouped(round(feet) if feet < 10 else int(float(f'{feet:.2g}')))} ft"


def own_share_text(share: float) -> str:
    """Share of hours from a field's own station; nothing below all is shown as all."""
    return "over 99 %" if 0.99 < share < 1.0 else share_text(share)


def count_text(count: int, one: str, many: str = "") -> str:
    """A count with its noun."""
    return f"{grouped(count)} {one if count == 1 else many or one + 's'}"
