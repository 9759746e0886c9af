"""Sheets of the workbook with a row per figure and field and a column per month and season."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from climarisk.aircraft import AircraftProfile
from climarisk.fields import Field
from climarisk.outputs.texts import MONTHS, window_text
from climarisk.outputs.workbook.cells import (
    EDGE,
    MARK,
    PERCENT,
    QUIET,
    SHARE,
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

_NUMBERS = tuple(range(1, 13))
_MONTH_WIDTH = 8.8
_FIGURE_WIDTH = 22.0
_QUIET = {"font_color": QUIET}
NO_INTERVAL, NO_CHECK, NO_MARGIN = "none", "none", "a limit"


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
    """

    name: str
    values: np.ndarray
    show: Show
    height: float | None = None


def unique_labels(names: Sequence[str], ids: Sequence[str]) -> list[str]:
    """The names, each followed by its id where the same name comes twice."""
    plain = [" ".join(name.split()) for name in names]
    return [
        name if name and plain.count(name) == 1 else f"{name} ({key})".strip()
        for name, key in zip(plain, ids, strict=True)
    ]


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
    table = _Periods(result.fields, months, seasons, _seasons(result.risk_seasonal))
    shares = table.values("shortfall")
    sure = f"{round(float(result.settings['confidence']) * 100)} % interval"
    whole, years = book.numbers(WHOLE), table.values("n_years")

    def hours(column: str) -> np.ndarray:
        return mapped(lambda v: rounded_down(v, 1.0), table.values(column))

    blocks = [
        Block("Shortfall share", shares, book.banded()),
        Block("Usable hours", hours("usable_hours"), whole),
        Block("Hours in the window", hours("hours_offered"), whole),
        Block(
            "Limiting check",
            _known(table.values("limiting"), shares, NO_CHECK),
            _checks(book),
            height=22.0,
        ),
        *(
            Block(f"{sure}, {end}", _known(table.values(column), shares, NO_INTERVAL), show)
            for end, column in (("low", "ci_low"), ("high", "ci_high"))
            for show in [book.numbers(SHARE)]
        ),
        Block("Years that count", years, _years(book, YEARS.settled_interval)),
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
        f"limiting check, the interval and the years. {MARK} few years: the interval is "
        f"unsettled, or there is none below {YEARS.interval}."
    )
    _legend(sheet)
    _write_blocks(sheet, table, blocks)


def _known(values: np.ndarray, shares: np.ndarray, without: str) -> np.ndarray:
    """The values, a word where there is none although the share is known."""
    missing = np.array([[v != v or v == "" for v in row] for row in values]).reshape(values.shape)
    unknown = pd.isna(shares)
    return np.where(unknown, math.nan, np.where(missing, without, values)).astype(object)


def _checks(book: Book) -> Show:
    return lambda value: book.words(value if isinstance(value, str) else None)


def _years(book: Book, settled: int) -> Show:
    """How to show a number of years: marked below the number that settles the figures."""
    plain, marked = book.numbers(WHOLE), book.numbers(f'0" {MARK}"')
    return lambda value: (marked if 0 < value < settled else plain)(value)


# Air


def write_altitude(book: Book, result: StudyResult) -> None:
    """The sheet of density altitudes."""
    table = _air(result, "density_altitude")
    feet = {p: mapped(hundreds, table.values(p)) for p in ("p90", "p50", "p10")}
    whole = book.numbers(WHOLE)
    blocks = [
        Block("P90, ft: 1 hour in 10 is above", feet["p90"], whole),
        Block("P50, ft: the median", feet["p50"], whole),
        Block("P10, ft: 1 hour in 10 is below", feet["p10"], whole),
        Block("Years that count", table.values("n_years"), _years(book, YEARS.percentiles)),
    ]
    sheet = _open(book, "Density altitude", result, table, figure=30.0)
    sheet.line("Density altitude", "title")
    sheet.line(
        f"In feet, to the nearest 100, {scope(result)}. {MARK} fewer years than the "
        f"{YEARS.percentiles} that percentiles need."
    )
    _write_blocks(sheet, table, blocks)


def write_humidity(book: Book, result: StudyResult) -> None:
    """The sheet of humidities: the median and how often the air is near saturation."""
    air = _air(result, "relative_humidity")
    near = _Periods(
        result.fields,
        result.near_saturation_monthly,
        result.near_saturation_seasonal,
        air.seasons,
    )
    share = book.numbers(SHARE)
    blocks = [
        Block("Relative humidity, P50", mapped(lambda v: v / 100.0, air.values("p50")), share),
        Block("Within 2.5 K of saturation", near.values("share_2_5k"), share),
        Block("Within 1 K of saturation", near.values("share_1k"), share),
        Block("Years that count", air.values("n_years"), _years(book, YEARS.percentiles)),
    ]
    sheet = _open(book, "Humidity", result, air, figure=26.0)
    sheet.line("Humidity", "title")
    sheet.line(
        f"Median relative humidity, and the share of hours whose temperature is at most 2.5 K or "
        f"1 K above the dew point; {scope(result)}. {MARK} fewer years than the "
        f"{YEARS.percentiles} that percentiles need."
    )
    _write_blocks(sheet, air, blocks)


def _air(result: StudyResult, variable: str) -> _Periods:
    monthly, seasonal = result.distributions_monthly, result.distributions_seasonal
    return _Periods(
        result.fields,
        monthly[monthly["variable"] == variable],
        seasonal[seasonal["variable"] == variable],
        _seasons(seasonal),
    )


# Margins


def write_margins(book: Book, result: StudyResult) -> None:
    """The sheet of margins by field, aircraft and check."""
    frame = result.margins_monthly
    names = {
        "field": dict(zip([f.id for f in result.fields], field_labels(result), strict=True)),
        "aircraft": dict(
            zip([a.id for a in result.aircraft], aircraft_labels(result), strict=True)
        ),
    }
    keys = pd.MultiIndex.from_frame(frame[["field", "aircraft", "check"]].astype(str))
    codes, rows = keys.factorize()
    numbered = frame.assign(row=codes)
    axes = ("row", range(len(rows))), ("month", _NUMBERS)
    shares, margins = (grid(numbered, name, *axes) for name in ("shortfall", "margin_p10"))
    margins = _known(mapped(lambda v: rounded_down(v, 0.01), margins), shares, NO_MARGIN)
    widths = [label_width([*names["field"].values()]), label_width([*names["aircraft"].values()])]
    sheet = book.sheet("Margins", [*widths, 21.0, 21.0, *[_MONTH_WIDTH] * 12])
    sheet.line("Margins", "title")
    sheet.line(
        f"{scope(result)[0].upper()}{scope(result)[1:]}. Margin, P10: in 1 hour of 10 the margin "
        "is at most this, rounded down; a negative margin falls short (bold), −100 % lies beyond "
        "the table. Share failing: hours in which this check alone fails, coloured by band."
    )
    _legend(sheet, 4)
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
            cells = [*((word, text) for word in (*told, figure)), *map(show, values)]
            if (field, aircraft) != before:
                cells = [(value, book.varied(shape, **EDGE)) for value, shape in cells]
            before = (field, aircraft)
            for column, shown in enumerate(cells):
                sheet.cell(column, shown)
            sheet.next_row()
    sheet.finish(head, 4)


def _margin(book: Book) -> Show:
    """How to show a margin: bold where it is negative."""
    plain, low = book.numbers(PERCENT), book.numbers(PERCENT, bold=True)
    return lambda value: (low if not isinstance(value, str) and value < 0.0 else plain)(value)


# What these sheets share


def field_labels(result: StudyResult) -> list[str]:
    """How the fields are called: by name, and by id too where names are the same."""
    return unique_labels([f.name for f in result.fields], [f.id for f in result.fields])


def aircraft_labels(result: StudyResult) -> list[str]:
    """How the aircraft are called, in the same way."""
    return unique_labels([a.name for a in result.aircraft], [a.id for a in result.aircraft])


@dataclass(frozen=True)
class _Periods:
    """Monthly and seasonal rows of the fields, read as one grid."""

    fields: tuple[Field, ...]
    monthly: pd.DataFrame
    seasonal: pd.DataFrame
    seasons: list[str]

    def values(self, column: str) -> np.ndarray:
        """A column, shape (n_fields, 12 + n_seasons)."""
        rows = ("field", [f.id for f in self.fields])
        months = grid(self.monthly, column, rows, ("month", _NUMBERS))
        return np.hstack([months, grid(self.seasonal, column, rows, ("season", self.seasons))])


def _seasons(frame: pd.DataFrame) -> list[str]:
    return [str(season) for season in pd.unique(frame["season"])]


def _open(
    book: Book, name: str, result: StudyResult, table: _Periods, figure: float = _FIGURE_WIDTH
) -> Sheet:
    width = label_width(field_labels(result))
    seasons = [min(max(_MONTH_WIDTH, len(season) * 0.75), 14.0) for season in table.seasons]
    return book.sheet(name, [figure, width, 10.0, *[_MONTH_WIDTH] * 12, *seasons])


def _legend(sheet: Sheet, column: int = 3) -> None:
    sheet.cell(0, ("Bands of the share", sheet.book.style("label")))
    sheet.legend(column)
    sheet.next_row()


def _write_blocks(sheet: Sheet, table: _Periods, blocks: Sequence[Block]) -> None:
    """The headings, and the rows of all figures below each other as one table to filter."""
    sheet.head(["Figure", "Field", "Elevation, ft", *MONTHS, *table.seasons])
    head, book = sheet.row - 1, sheet.book
    labels = unique_labels([f.name for f in table.fields], [f.id for f in table.fields])
    for block in blocks:
        for at, field in enumerate(table.fields):
            cells: list[Shown] = [
                (block.name, book.style("text") if at == 0 else book.style("text", **_QUIET)),
                (labels[at], book.style("text")),
                (float(whole_feet(field.elevation_m)), book.style("number", num_format=WHOLE)),
                *map(block.show, block.values[at]),
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
