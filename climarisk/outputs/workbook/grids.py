"""Sheets of the workbook with a row per figure and field and a column per month and season."""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd

from climarisk.aircraft import AircraftProfile
from climarisk.fields import STEEP_SLOPE_PCT, Field
from climarisk.outputs.texts import (
    MONTHS,
    aircraft_labels,
    field_labels,
    unique_labels,
    window_text,
)
from climarisk.outputs.workbook.cells import (
    EDGE,
    GAP,
    MARK,
    PERCENT,
    QUIET,
    SHARE,
    STEEP,
    WHOLE,
    Book,
    Sheet,
    Show,
    Shown,
    grid,
)
from climarisk.results import StudyResult
from climarisk.rules import YEARS
from climarisk.units import METRES_PER_FOOT

MONTH_NUMBERS = tuple(range(1, 13))
MONTH_WIDTH = 8.8
_FIGURE_WIDTH = 22.0
QUIETER = {"font_color": QUIET}
NO_INTERVAL, NO_CHECK, NO_MARGIN = "too few years", "none", "a limit"
#: What the marks and the colours say, below the title of the sheets that have them.
FEW = (
    f"{MARK} fewer than {YEARS.settled_interval} years: the interval is unsettled, and there is "
    f"none below {YEARS.interval}."
)
FEW_AIR = f"{MARK} fewer years than the {YEARS.percentiles} that percentiles need."
NO_PASS = (
    f"{STEEP} a runway of the field is steeper than {STEEP_SLOPE_PCT:g} %: no figure is a pass."
)
GAPS = f"{GAP} a month of the season has no data: the figure rests on the others."
COLOURS = "Colours follow the unrounded share."


@dataclass(frozen=True)
class Block:
    """One figure of every field.

    Parameters
    ----------
    name : str
    values : ndarray of object, shape (n_fields, n_periods)
    show : callable
        Gives a cell for a value.
    height : float or None
        Of its rows, in points; None for the usual one.
    marks : ndarray of str, shape (n_fields, n_periods), or None
        What stands behind each figure.
    """

    name: str
    values: np.ndarray
    show: Show
    height: float | None = None
    marks: np.ndarray | None = None


def label_width(labels: Sequence[str]) -> float:
    """Width of a column of names: the longest of them within limits."""
    return min(max([14, *map(len, labels)]) + 2.0, 34.0)


def whole_feet(metres: float) -> int:
    """An elevation in whole feet."""
    return math.floor(metres / METRES_PER_FOOT + 0.5)


def hundreds(feet: float) -> float:
    """A density altitude to the nearest 100 ft, as everywhere in the outputs."""
    return float((feet + 50.0) // 100.0 * 100.0)


def rounded_down(value: float, step: float) -> float:
    """The value down to a whole number of steps, so that nothing looks better than it is."""
    # The inner rounding takes back the error of the division: 0.29 / 0.01 is below 29.
    return math.floor(round(value / step, 6)) * step if math.isfinite(value) else value


def scope(result: StudyResult) -> str:
    """The hours window and the period of a study, as ``daylight hours, 2010-2024``."""
    window = window_text(result.settings["window"])
    hours = "daylight hours (civil twilight included)" if window == "daylight" else window
    if window[:1].isdigit():
        hours = f"{window} local standard time"
    return f"{hours}, {result.settings['first_year']}-{result.settings['last_year']}"


def few_years(years: np.ndarray, settled: int) -> np.ndarray:
    """The mark of few years where the numbers of years are below one, else an empty text."""
    known = years.astype(float)
    return np.where((known > 0) & (known < settled), MARK, "").astype(object)


def steep_marks(fields: Sequence[Field]) -> np.ndarray:
    """The mark of a steep runway for each field, shape (n_fields, 1)."""
    return np.array([STEEP if f.is_steep else "" for f in fields], object).reshape(-1, 1)


def mapped(change: Callable[[float], float], values: np.ndarray) -> np.ndarray:
    """The values changed one by one."""
    return np.array([[change(v) for v in row] for row in values], object).reshape(values.shape)


# Aircraft


def write_aircraft(
    book: Book, sheet_name: str, result: StudyResult, profile: AircraftProfile
) -> None:
    """The sheet of one aircraft: its shares by field, month and season, and what stands behind."""
    months = result.risk_monthly[result.risk_monthly["aircraft"] == profile.id]
    seasons = result.risk_seasonal[result.risk_seasonal["aircraft"] == profile.id]
    table = periods_of(result, months, seasons, result.risk_seasonal)
    shares = table.values("shortfall")
    sure = f"{round(float(result.settings['confidence']) * 100)} % interval"
    whole, years = book.numbers(WHOLE), table.values("n_years")

    def hours(column: str) -> np.ndarray:
        return mapped(lambda v: rounded_down(v, 1.0), table.values(column))

    few = few_years(years, YEARS.settled_interval)
    marks = few + steep_marks(result.fields) + table.gaps(shares)
    blocks = [
        Block("Shortfall share", shares, book.banded(), marks=marks),
        Block("Usable hours", hours("usable_hours"), whole, marks=marks),
        Block("Hours in the window", hours("hours_offered"), whole),
        Block(
            "Limiting check",
            known_or(table.values("limiting"), shares, NO_CHECK),
            _checks(book),
            height=22.0,
        ),
        *(
            Block(
                f"{sure}, {end}",
                known_or(table.values(column), shares, NO_INTERVAL),
                show,
                None,
                marks,
            )
            for end, column in (("low", "ci_low"), ("high", "ci_high"))
            for show in [book.numbers(SHARE)]
        ),
        Block("Years that count", years, book.numbers(WHOLE), marks=few),
        Block("Coverage", table.values("coverage"), book.parts()),
    ]
    sheet = _open(book, sheet_name, result, table)
    sheet.line(profile.name, "title")
    scaled = (
        " Scaled from single figures, no table: treat every share here as rough."
        if profile.is_scaled
        else ""
    )
    sheet.line(
        f"Share of hours that fall short, {scope(result)}, at {profile.planning_kg:,.0f} kg. "
        f"Figures: {profile.source}.{scaled} Filter the column “Figure” for usable hours, the "
        "limiting check, the interval, the years and the coverage."
    )
    sheet.line(" ".join([FEW, NO_PASS, *([GAPS] if table.seasons else []), COLOURS]), "note")
    sheet.legend("Bands of the share", 3)
    _write_blocks(sheet, table, blocks)


def known_or(values: np.ndarray, shares: np.ndarray, without: str) -> np.ndarray:
    """The values, a word where there is none although the share is known."""
    missing = np.array([[v != v or v == "" for v in row] for row in values]).reshape(values.shape)
    unknown = pd.isna(shares)
    return np.where(unknown, math.nan, np.where(missing, without, values)).astype(object)


def _checks(book: Book) -> Show:
    return lambda value: book.words(value if isinstance(value, str) else None)


# Air


def write_altitude(book: Book, result: StudyResult) -> None:
    """The sheet of density altitudes."""
    table = _air(result, "density_altitude")
    feet = {p: mapped(hundreds, table.values(p)) for p in ("p90", "p50", "p10")}
    whole, years = book.numbers(WHOLE), table.values("n_years")
    few = few_years(years, YEARS.percentiles)
    marks = few + table.gaps(feet["p50"])
    blocks = [
        Block("P90, ft: 1 hour in 10 is above", feet["p90"], whole, marks=marks),
        Block("P50, ft: the median", feet["p50"], whole, marks=marks),
        Block("P10, ft: 1 hour in 10 is below", feet["p10"], whole, marks=marks),
        Block("Years that count", years, whole, marks=few),
    ]
    sheet = _open(book, "Density altitude", result, table, figure=30.0)
    sheet.line("Density altitude", "title")
    sheet.line(f"In feet, to the nearest 100, {scope(result)}.")
    sheet.line(" ".join([FEW_AIR, *([GAPS] if table.seasons else [])]), "note")
    _write_blocks(sheet, table, blocks)


def write_humidity(book: Book, result: StudyResult) -> None:
    """The sheet of humidities: the median and how often the air is near saturation."""
    air = _air(result, "relative_humidity")
    near = replace(
        air, monthly=result.near_saturation_monthly, seasonal=result.near_saturation_seasonal
    )
    share, years = book.numbers(SHARE), air.values("n_years")
    few = few_years(years, YEARS.percentiles)
    median = mapped(lambda v: v / 100.0, air.values("p50"))
    marks = few + air.gaps(median)
    blocks = [
        Block("Relative humidity, P50", median, share, marks=marks),
        Block("Within 2.5 K of saturation", near.values("share_2_5k"), share, marks=marks),
        Block("Within 1 K of saturation", near.values("share_1k"), share, marks=marks),
        Block("Years that count", years, book.numbers(WHOLE), marks=few),
    ]
    sheet = _open(book, "Humidity", result, air, figure=26.0)
    sheet.line("Humidity", "title")
    sheet.line(
        "Median relative humidity, and the share of hours whose temperature is at most 2.5 K or "
        f"1 K above the dew point; {scope(result)}."
    )
    sheet.line(" ".join([FEW_AIR, *([GAPS] if air.seasons else [])]), "note")
    _write_blocks(sheet, air, blocks)


def _air(result: StudyResult, variable: str) -> Periods:
    monthly, seasonal = result.distributions_monthly, result.distributions_seasonal
    return periods_of(
        result,
        monthly[monthly["variable"] == variable],
        seasonal[seasonal["variable"] == variable],
        seasonal,
    )


# Margins


def write_margins(book: Book, result: StudyResult) -> None:
    """The sheet of margins by field, aircraft and check."""
    names = {
        "field": dict(zip([f.id for f in result.fields], field_labels(result), strict=True)),
        "aircraft": dict(
            zip([a.id for a in result.aircraft], aircraft_labels(result), strict=True)
        ),
    }
    rows, margins, shares, marks = _margin_grids(result)
    widths = [label_width([*names["field"].values()]), label_width([*names["aircraft"].values()])]
    sheet = book.sheet("Margins", [*widths, 21.0, 21.0, *[MONTH_WIDTH] * 12])
    sheet.line("Margins", "title")
    sheet.line(
        f"{scope(result)[0].upper()}{scope(result)[1:]}. Margin, P10: in 1 hour of 10 the margin "
        "is at most this, rounded down; a negative margin falls short (bold), −100 % lies beyond "
        "the table. Share failing: hours in which this check fails, whatever the others do, "
        "coloured by band."
    )
    sheet.line(f"{FEW} {NO_PASS} {COLOURS}", "note")
    sheet.legend("Bands of the share", 4)
    sheet.head(["Field", "Aircraft", "Check", "Figure", *MONTHS])
    head, text = sheet.row - 1, book.style("text")
    margin, share = _margin(book), book.banded()
    before = None
    for at, (field, aircraft, check) in enumerate(rows):
        told = [names["field"].get(field, field), names["aircraft"].get(aircraft, aircraft), check]
        for figure, values, show in (
            ("Margin, P10", margins[at], margin),
            ("Share failing", shares[at], share),
        ):
            shown = map(book.marked, map(show, values), marks[at])
            cells = [*((word, text) for word in (*told, figure)), *shown]
            if (field, aircraft) != before:
                cells = [(value, book.varied(shape, **EDGE)) for value, shape in cells]
            before = (field, aircraft)
            for column, cell in enumerate(cells):
                sheet.cell(column, cell)
            sheet.next_row()
    sheet.finish(head, 4)


def _margin_grids(
    result: StudyResult,
) -> tuple[list[tuple[str, ...]], np.ndarray, np.ndarray, np.ndarray]:
    """Keys of the rows, and by row and month their margins, shares and marks."""
    frame, risk = result.margins_monthly, result.risk_monthly
    keys = pd.MultiIndex.from_frame(frame[["field", "aircraft", "check"]].astype(str))
    codes, rows = keys.factorize()
    cell = ["field", "aircraft", "month"]
    years = dict(zip(zip(*(risk[c] for c in cell), strict=True), risk["n_years"], strict=True))
    known = [years.get(key, 0) for key in zip(*(frame[c] for c in cell), strict=True)]
    numbered = frame.assign(row=codes, n_years=known)
    axes = ("row", range(len(rows))), ("month", MONTH_NUMBERS)
    shares, margins, counts = (
        grid(numbered, name, *axes) for name in ("shortfall", "margin_p10", "n_years")
    )
    margins = known_or(mapped(lambda v: rounded_down(v, 0.01), margins), shares, NO_MARGIN)
    steep = {f.id for f in result.fields if f.is_steep}
    marks = np.array([STEEP if row[0] in steep else "" for row in rows], object).reshape(-1, 1)
    return list(rows), margins, shares, few_years(counts, YEARS.settled_interval) + marks


def _margin(book: Book) -> Show:
    """How to show a margin: bold where it is negative."""
    plain, low = book.numbers(PERCENT), book.numbers(PERCENT, bold=True)
    return lambda value: (low if not isinstance(value, str) and value < 0.0 else plain)(value)


# What these sheets share


@dataclass(frozen=True)
class Periods:
    """Monthly and seasonal rows of the fields, read as one grid."""

    fields: tuple[Field, ...]
    monthly: pd.DataFrame
    seasonal: pd.DataFrame
    seasons: list[str]
    months: list[list[int]]

    def values(self, column: str) -> np.ndarray:
        """A column, shape (n_fields, 12 + n_seasons)."""
        rows = ("field", [f.id for f in self.fields])
        months = grid(self.monthly, column, rows, ("month", MONTH_NUMBERS))
        return np.hstack([months, grid(self.seasonal, column, rows, ("season", self.seasons))])

    def gaps(self, values: np.ndarray) -> np.ndarray:
        """The mark of a gap at seasons with a month without a value, else an empty text."""
        unknown = pd.isna(values[:, :12]).reshape(-1, 12)
        marks = np.full(values.shape, "", object)
        for at, months in enumerate(self.months, start=12):
            marks[unknown[:, months].any(axis=1), at] = GAP
        return marks


def periods_of(
    result: StudyResult, monthly: pd.DataFrame, seasonal: pd.DataFrame, whole: pd.DataFrame
) -> Periods:
    """Rows of the fields, with the seasons in the order of the whole frame."""
    seasons = [str(season) for season in pd.unique(whole["season"])]
    days = result.settings.get("seasons", {})
    months = [_months_of(days.get(season, ())) for season in seasons]
    return Periods(result.fields, monthly, seasonal, seasons, months)


def _months_of(days: Sequence[str]) -> list[int]:
    """Places (0-11) of the months from the first to the last day of a season, as ``MM-DD``."""
    if len(days) != 2 or not all(re.fullmatch(r"(0[1-9]|1[0-2])-\d\d", day) for day in days):
        return []
    first, last = (int(day[:2]) - 1 for day in days)
    # A season that ends in the month of its beginning, before its first day, goes round the year.
    count = 12 if first == last and days[1] < days[0] else (last - first) % 12 + 1
    return [(first + more) % 12 for more in range(count)]


def _open(
    book: Book, name: str, result: StudyResult, table: Periods, figure: float = _FIGURE_WIDTH
) -> Sheet:
    width = label_width(field_labels(result))
    return book.sheet(name, [figure, width, 10.0, *period_widths(table.seasons)])


def period_widths(seasons: Sequence[str]) -> list[float]:
    """Widths of the columns of the months and the seasons."""
    widths = [min(max(MONTH_WIDTH + 1, len(season) * 0.75), 14.0) for season in seasons]
    return [*[MONTH_WIDTH] * 12, *widths]


def _write_blocks(sheet: Sheet, table: Periods, blocks: Sequence[Block]) -> None:
    """The headings, and the rows of all figures below each other as one table to filter."""
    sheet.head(["Figure", "Field", "Elevation, ft", *MONTHS, *table.seasons])
    head, book = sheet.row - 1, sheet.book
    labels = unique_labels([f.name for f in table.fields], [f.id for f in table.fields])
    for block in blocks:
        for at, field in enumerate(table.fields):
            cells: list[Shown] = [
                (block.name, book.style("text") if at == 0 else book.style("text", **QUIETER)),
                (labels[at], book.style("text")),
                (float(whole_feet(field.elevation_m)), book.style("number", num_format=WHOLE)),
                *shown_cells(book, block, at),
            ]
            if at == 0:
                cells = [(value, book.varied(shape, **EDGE)) for value, shape in cells]
                cells[0] = (block.name, book.varied(cells[0][1], bold=True))
            for column, shown in enumerate(cells):
                sheet.cell(column, shown)
            if block.height is not None:
                sheet.page.set_row(sheet.row, block.height)
            sheet.next_row()
    sheet.finish(head, 3)


def shown_cells(book: Book, block: Block, at: int) -> list[Shown]:
    """The figures of one field."""
    cells = [block.show(value) for value in block.values[at]]
    if block.marks is None:
        return cells
    return [book.marked(cell, mark) for cell, mark in zip(cells, block.marks[at], strict=True)]
