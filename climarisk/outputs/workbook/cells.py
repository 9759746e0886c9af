"""Cells of the workbook: texts that stay texts, numbers that stay numbers, colours of the bands.

A cell shows one of three things and never stands empty: a number with a format, a text, or
``no data`` on a hatched ground.  No formula and no link is ever written.
"""

from __future__ import annotations

import math
import unicodedata
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
import pandas as pd
from xlsxwriter import Workbook
from xlsxwriter.format import Format
from xlsxwriter.worksheet import Worksheet

from climarisk.errors import OutputError
from climarisk.outputs.colours import MOST_EDGES, YLORBR, ink_on
from climarisk.outputs.texts import NO_DATA, band_labels, band_of, invisible

#: Number formats.  A share above zero and below one per cent never shows as 0 %, and one
#: below all never as 100 %, where all of it is a claim.
SHARE = '[=0]0 %;[<0.01]"< 1 %";0 %'
PART = '[>=1]0 %;[>0.99]"> 99 %";0 %'
WHOLE = '#,##0;"\N{MINUS SIGN}"#,##0'
PERCENT = '0 %;"\N{MINUS SIGN}"0 %'
ERROR = '[<0.5]"< 1";"\N{PLUS-MINUS SIGN}"#,##0'
TENTH = "0.0"
#: Stand behind a figure that rests on few years, one of a field with a steep runway, and one of
#: a season of which a month has no data.
MARK, STEEP, GAP = "\N{DAGGER}", "\N{DOUBLE DAGGER}", "\N{SECTION SIGN}"

#: The line above the first row of a group.
EDGE = {"top": 2, "top_color": "#8b96a0"}

INK, QUIET, LINE, HEAD, GROUND = "#1a2024", "#5b6670", "#cfd6dc", "#dfe5ea", "#eef2f5"
_LEADS = frozenset("=+-@\t\r\n\uff1d\uff0b\uff0d\uff20")  # what a spreadsheet may take as a formula
_LONGEST = 32767  # UTF-16 units in one cell
_MOST_ROWS = 1_048_576
_HIGHEST = 400.0  # points; a row cannot be much higher
_LETTERS = 1.2  # of a text in the width of one digit: proportional letters are narrower
_CAPITAL = 0.3  # what a capital is broader by
_HATCHED = {"pattern": 14, "fg_color": "#c3cbd2", "bg_color": "#ffffff"}  # thin diagonal stripes
_BASE = {"font_size": 10, "valign": "vcenter", "font_color": INK}
_CELL = {"border": 1, "border_color": LINE}

_STYLES: dict[str, dict[str, Any]] = {
    "title": {"bold": True, "font_size": 16},
    "heading": {"bold": True, "font_size": 12},
    "plain": {"text_wrap": True, "valign": "top"},
    "note": {"font_color": QUIET, "text_wrap": True, "valign": "top"},
    "label": {"bold": True, "valign": "top", "text_wrap": True},
    "caution": {
        **{"text_wrap": True, "bg_color": GROUND, "valign": "vcenter", "indent": 1},
        **{"left": 5, "left_color": INK},
    },
    "head": {"bold": True, "bg_color": HEAD, "text_wrap": True, "valign": "top", **_CELL},
    "group": {
        **{"bold": True, "bg_color": HEAD, "text_wrap": True, "align": "center", **_CELL},
    },
    "text": _CELL,
    "small": {"text_wrap": True, "font_size": 8, "align": "center", **_CELL},
    "middle": {"align": "center", **_CELL},
    "wrapped": {"text_wrap": True, "valign": "top", **_CELL},
    "top": {"valign": "top", **_CELL},
    "strong": {"valign": "top", "bold": True, **_CELL},
    "number": {"align": "center", **_CELL},
    "none": {
        **{"align": "center", "italic": True, "font_color": QUIET, "shrink": True, **_CELL},
        **_HATCHED,
    },
    "fewer": {"align": "center", "bold": True, **_CELL, **_HATCHED},
    "key": {"align": "center", "shrink": True, **_CELL},
}

#: What a cell holds and how: a number or a text with its format.
Shown = tuple[float | str, Format]
Show = Callable[[Any], Shown]


@lru_cache(maxsize=8192)
def clean(text: str) -> str:
    """The text as a cell can hold it: forbidden characters replaced, cut to the longest.

    Characters that no reader sees are left out: they turn words around or hide a difference.
    """
    text = text.replace("\r\n", "\n").replace("\r", "\n")
    text = "".join(c for c in text if not invisible(c))
    text = "".join(c if _allowed(c) else "\N{REPLACEMENT CHARACTER}" for c in text)
    return cut(text, _LONGEST)


def _allowed(character: str) -> bool:
    """Whether XML 1.0 (section 2.2, Char) allows a character."""
    code = ord(character)
    if code < 0x20:
        return character in "\t\n"
    return not (0xD800 <= code <= 0xDFFF or code in (0xFFFE, 0xFFFF))


def cut(text: str, longest: int) -> str:
    """The text in at most so many UTF-16 units, an ellipsis at its end where it is cut."""
    if utf16_length(text) <= longest:
        return text
    # A character of two units that the cut would halve is left out.
    units = text.encode("utf-16-le", "surrogatepass")[: 2 * (longest - 1)]
    return units.decode("utf-16-le", "ignore") + "\N{HORIZONTAL ELLIPSIS}"


def utf16_length(text: str) -> int:
    """Length of a text as a spreadsheet counts it."""
    return len(text) + sum(c > "\uffff" for c in text)


def suffixed(num_format: str, marks: str) -> str:
    """A number format with marks behind the number in each of its sections."""
    sections = [
        f'{part[:-1]} {marks}"' if part.endswith('"') else f'{part}" {marks}"'
        for part in num_format.split(";")
    ]
    return ";".join(sections)


def lines_of(text: str, room: float) -> int:
    """Lines of a text in a column with room for so many letters, broken between words."""
    lines = 0
    for part in text.split("\n"):
        lines, used = lines + 1, 0.0
        for word in part.split(" "):
            letters = _columns(word)
            if used and used + 1 + letters <= room:
                used += 1 + letters
                continue
            # A word longer than a line is broken within.
            more = max(0, math.ceil(letters / room) - 1)
            lines += more + (1 if used else 0)
            used = letters - more * room
    return lines


def _columns(word: str) -> float:
    """Width of a word in small letters: capitals are broader, wide characters twice as wide."""
    broad = sum(c.isupper() for c in word) * _CAPITAL
    if word.isascii():
        return len(word) + broad
    # Unicode Standard Annex 11, East Asian Width.
    return sum(2 if unicodedata.east_asian_width(c) in "WF" else 1 for c in word) + broad


class Book:
    """The workbook with the classes of its shares and formats that are made once each."""

    def __init__(self, workbook: Workbook, bands: Sequence[float], title: str) -> None:
        self.workbook = workbook
        self.edges = [float(edge) for edge in bands][:MOST_EDGES]
        self.labels = band_labels(self.edges) if self.edges else ["any value"]
        self.title = " ".join(clean(title).split())
        self._formats: dict[tuple[Any, ...], Format] = {}
        self._keys: dict[Format, tuple[Any, ...]] = {}
        self._marked: dict[tuple[Format, str], Format] = {}

    def style(self, name: str, **more: Any) -> Format:
        """The format of a named style with further properties."""
        key = (name, *sorted(more.items()))
        if key not in self._formats:
            shape = self.workbook.add_format({**_BASE, **_STYLES[name], **more})
            self._formats[key], self._keys[shape] = shape, key
        return self._formats[key]

    def varied(self, shape: Format, **more: Any) -> Format:
        """The same format with further properties."""
        name, *before = self._keys[shape]
        return self.style(name, **{**dict(before), **more})

    def band(self, number: int, name: str = "number", **more: Any) -> Format:
        """The format of a cell in a band."""
        return self.step(number, len(self.labels), name, **more)

    def step(self, number: int, of: int, name: str = "number", **more: Any) -> Format:
        """The format of a cell in one of so many classes, the lowest first."""
        colour = YLORBR[of][number]
        return self.style(name, bg_color=colour, font_color=ink_on(colour), **more)

    def numbers(self, num_format: str, **more: Any) -> Show:
        """How to show numbers in one format; a text stays as it is, NaN is no data."""
        shown = self.style("number", num_format=num_format, **more)
        text, none = self.style("middle", shrink=True), self.no_data

        def show(value: float | str) -> Shown:
            if isinstance(value, str):
                return value, text
            return (float(value), shown) if math.isfinite(value) else none

        return show

    def banded(self) -> Show:
        """How to show shares coloured by band."""
        shown = [self.band(n, num_format=SHARE) for n in range(len(self.labels))]
        none = self.no_data

        def show(value: float) -> Shown:
            return (float(value), shown[band_of(value, self.edges)]) if value == value else none

        return show

    def parts(self) -> Show:
        """How to show shares that never show as nothing, nor as all, when they are neither."""
        low, high = self.numbers(SHARE), self.numbers(PART)
        return lambda value: (low if value < 0.5 else high)(value)

    def marked(self, shown: Shown, marks: str) -> Shown:
        """A cell with marks behind its number; a text stays as it is."""
        value, shape = shown
        if not marks or isinstance(value, str):
            return shown
        if (shape, marks) not in self._marked:
            num_format = suffixed(shape.num_format, marks)
            self._marked[shape, marks] = self.varied(shape, num_format=num_format, shrink=True)
        return value, self._marked[shape, marks]

    def words(self, value: str | None) -> Shown:
        """How to show a check or another short text in a narrow cell."""
        return self.no_data if value is None else (value, self.style("small"))

    @property
    def no_data(self) -> Shown:
        """What stands where there is no figure."""
        return NO_DATA, self.style("none")

    def sheet(self, name: str, widths: Sequence[float]) -> Sheet:
        """A new sheet with its columns' widths, set up for printing."""
        page = self.workbook.add_worksheet(name)
        for column, width in enumerate(widths):
            page.set_column(column, column, width)
        page.hide_gridlines(2)
        page.set_landscape()
        page.set_paper(9)  # A4
        page.set_margins(left=0.4, right=0.4, top=0.5, bottom=0.6)
        page.fit_to_pages(1, 0)
        # A single & would begin a code of the footer.
        title = cut(self.title, 100).replace("&", "&&")
        # The space ends the code of the size: a title may begin with digits.
        page.set_footer(f"&L&8 {title}&C&8 &A&R&8 Page &P of &N")
        return Sheet(page, self, tuple(widths))


@dataclass
class Sheet:
    """One sheet and the row to be written next."""

    page: Worksheet
    book: Book
    widths: tuple[float, ...]
    row: int = 0

    def cell(self, column: int, shown: Shown) -> None:
        """Write one cell of the present row."""
        value, shape = shown
        if not isinstance(value, str):
            self.page.write_number(self.row, column, value, shape)
            return
        text = clean(value)
        if text[:1] in _LEADS:
            # A quote prefix keeps it a text also when someone edits the cell.
            shape = self.book.varied(shape, quote_prefix=True)
        if text.startswith("<r>") and text.endswith("</r>"):
            # XlsxWriter takes such a text for its own markup unless it comes in two runs.
            self.page.write_rich_string(self.row, column, shape, "<", shape, text[1:], shape)
        elif text:
            self.page.write_string(self.row, column, text, shape)
        else:
            self.page.write_string(self.row, column, "\N{EN DASH}", shape)

    def next_row(self) -> None:
        """Go on to the next row."""
        self.row += 1
        if self.row >= _MOST_ROWS:
            raise OutputError(
                f"{self.page.get_name()}: the study needs more than the {_MOST_ROWS:,} rows that "
                "a sheet of tables.xlsx can hold. Split it into studies with fewer fields."
            )

    def line(
        self,
        text: str,
        style: str = "plain",
        first: int = 0,
        last: int | None = None,
        label: str | None = None,
    ) -> None:
        """A text over several columns of the present row, the row as high as it needs.

        A label, where there is one, stands in the first column of the sheet.
        """
        last = len(self.widths) - 1 if last is None else last
        shape = self.book.style(style)
        if last > first:
            self.page.merge_range(self.row, first, self.row, last, "", shape)
        self.cell(first, (text, shape))
        texts = [(text, first, last)]
        if label is not None:
            self.cell(0, (label, self.book.style("label")))
            texts.append((label, 0, 0))
        self.fit(texts, shape.font_size)
        self.next_row()

    def fit(
        self, texts: Iterable[tuple[str, int, int]], size: float = 10.0, least: float = 0.0
    ) -> None:
        """Make the present row as high as its texts need, each with its first and last column."""
        # Not every program fits a row to wrapped texts by itself, and none to merged cells.
        lines = max(
            lines_of(clean(text), sum(self.widths[first : last + 1]) * _LETTERS * 10 / size)
            for text, first, last in texts
        )
        points = lines * max(10.0, size) * 1.35 + 4.0
        self.page.set_row(self.row, min(_HIGHEST, max(points, least)))

    def head(self, words: Sequence[str], height: float = 30.0) -> None:
        """A row of column headings."""
        for column, word in enumerate(words):
            self.cell(column, (word, self.book.style("head")))
        self.fit([(word, column, column) for column, word in enumerate(words)], least=height)
        self.next_row()

    def legend(self, label: str, column: int, classes: Sequence[str] = ()) -> None:
        """A row with the bands, or other classes, and no data from a column on, and its label."""
        words = classes or self.book.labels
        keys = [
            (word, self.book.step(number, len(words), "key")) for number, word in enumerate(words)
        ]
        for at, shown in enumerate([*keys, self.book.no_data]):
            self.cell(column + at, shown)
        self.cell(0, (label, self.book.style("label")))
        self.fit([(label, 0, 0)])
        self.next_row()

    def finish(self, head: int, fixed: int) -> None:
        """Freeze and repeat the rows down to the headings in row ``head``; filter what follows."""
        self.page.freeze_panes(head + 1, fixed)
        self.page.repeat_rows(head)
        if self.row > head + 1:
            self.page.autofilter(head, 0, self.row - 1, len(self.widths) - 1)


def grid(
    frame: pd.DataFrame, column: str, rows: tuple[str, Sequence], periods: tuple[str, Sequence]
) -> np.ndarray:
    """A column as an array of objects, one row per key and one column per period.

    Parameters
    ----------
    frame : DataFrame
    column : str
    rows, periods : tuple of str and sequence
        The name of the column that holds the keys, and the keys in their order.

    Returns
    -------
    ndarray of object, shape (n_rows, n_periods)
        NaN where the frame has no row or no value.
    """
    values = np.full((len(rows[1]), len(periods[1])), math.nan, dtype=object)
    at = [pd.Index(keys).get_indexer(frame[name]) for name, keys in (rows, periods)]
    inside = (at[0] >= 0) & (at[1] >= 0)
    found = frame[column].astype(object)
    values[at[0][inside], at[1][inside]] = found.where(found.notna(), math.nan)[inside]
    return values
