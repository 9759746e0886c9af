"""The workbook of a study, made for people: a summary, a sheet per aircraft, what stands behind.

It holds numbers, texts and colours only: no macro, no formula, no link.  The same result gives
the same bytes.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from datetime import datetime
from io import BytesIO
from pathlib import Path

import numpy as np
import pandas as pd
from xlsxwriter import Workbook

from climarisk.fields import STEEP_SLOPE_PCT, Field
from climarisk.outputs.texts import (
    CAUTIONS,
    NO_DATA,
    aircraft_labels,
    field_labels,
    interval_text,
    invisible,
    months_text,
    worst_months,
)
from climarisk.outputs.workbook.cells import (
    ERROR,
    MARK,
    STEEP,
    WHOLE,
    Book,
    Sheet,
    Shown,
    clean,
    cut,
    grid,
    utf16_length,
)
from climarisk.outputs.workbook.grids import (
    COLOURS,
    NO_INTERVAL,
    NO_PASS,
    few_years,
    hundreds,
    label_width,
    scope,
    steep_marks,
    whole_feet,
    write_aircraft,
    write_altitude,
    write_humidity,
    write_margins,
)
from climarisk.outputs.workbook.places import BASES, SCHEDULE, write_bases, write_schedule
from climarisk.outputs.workbook.planning import (
    ICING,
    POWER,
    WEIGHTS,
    WINDOWS,
    write_icing,
    write_power,
    write_weights,
    write_windows,
)
from climarisk.outputs.workbook.words import air_text, error_shown, write_cautions, write_method
from climarisk.results import StudyResult
from climarisk.rules import YEARS

SUMMARY = "Summary"
#: Sheets that a study may have besides those of its aircraft.
OTHER_SHEETS = (
    *(WEIGHTS, WINDOWS, BASES, SCHEDULE, ICING, POWER),
    *("Density altitude", "Humidity", "Margins", "Method and sources", "Cautions"),
)
#: Excel keeps this name for itself.
_RESERVED = "History"
_LONGEST_NAME = 31
#: Stands in the file in place of the clock, so that the same input gives the same bytes.
_FIXED_DATE = datetime(2000, 1, 1)
_MONTH_NUMBERS = tuple(range(1, 13))
_MONTH_WIDTH, _AIR_WIDTH = 12.0, 29.0


def write_workbook(result: StudyResult, path: Path) -> None:
    """Write the workbook of a study.

    Parameters
    ----------
    result : StudyResult
    path : Path
        The file to write, by the contract ``tables.xlsx``.

    Raises
    ------
    OutputError
        The study has more rows than a sheet can hold.
    OSError
        The file cannot be written.
    """
    memory = BytesIO()
    workbook = Workbook(
        memory,
        {"in_memory": True, "strings_to_formulas": False, "strings_to_urls": False},
    )
    workbook.set_properties({"title": cut(clean(result.title), 255), "created": _FIXED_DATE})
    book = Book(workbook, result.settings["bands"], result.title)
    _write_summary(book, result)
    names = sheet_names([a.name for a in result.aircraft])
    for profile, name in zip(result.aircraft, names, strict=True):
        write_aircraft(book, name, result, profile)
    write_weights(book, result)
    write_windows(book, result)
    write_bases(book, result)
    write_schedule(book, result)
    write_icing(book, result)
    write_power(book, result)
    write_altitude(book, result)
    write_humidity(book, result)
    write_margins(book, result)
    write_method(book, result)
    write_cautions(book, result)
    workbook.close()
    Path(path).write_bytes(memory.getvalue())


def sheet_names(names: Sequence[str]) -> list[str]:
    r"""Names of sheets for the aircraft: valid, none twice, none of the fixed ones.

    Parameters
    ----------
    names : sequence of str

    Returns
    -------
    list of str
        At most 31 UTF-16 units each, without ``[]:*?/\``, without an apostrophe, a space or a
        sign of a formula at the ends, different also when case is ignored.
    """
    taken = {name.casefold() for name in (SUMMARY, *OTHER_SHEETS, _RESERVED)}
    made = []
    for number, name in enumerate(names, start=1):
        seen = "".join(c for c in name if not invisible(c))
        shown = "".join(c if c.isprintable() else " " for c in re.sub(r"[\[\]:*?/\\]", " ", seen))
        plain = _trimmed(" ".join(shown.split()), _LONGEST_NAME) or f"Aircraft {number}"
        unique, copy = plain, 1
        while unique.casefold() in taken:
            copy += 1
            tail = f" ({copy})"
            unique = _trimmed(plain, _LONGEST_NAME - len(tail)) + tail
        taken.add(unique.casefold())
        made.append(unique)
    return made


def _trimmed(name: str, longest: int) -> str:
    """The name without what must not stand at its ends, in so many UTF-16 units."""
    name = name.strip(" '=+-@.")[:longest]
    while utf16_length(name) > longest:
        name = name[:-1]
    return name.rstrip(" '")


# Summary


def _write_summary(book: Book, result: StudyResult) -> None:
    labels = field_labels(result)
    widths = [label_width(labels), 10.0, 10.0, 10.0, 9.5, 8.5, 11.0]
    widths += [_MONTH_WIDTH, 9.0, 13.0] * len(result.aircraft) + [_AIR_WIDTH, 9.5, 9.0, 9.5, 9.0]
    sheet = book.sheet(SUMMARY, widths)
    _write_top(sheet, result)
    head = sheet.row - 1
    columns = [_altitude_cells(book, result)]
    columns += [_aircraft_cells(book, result, profile.id) for profile in result.aircraft]
    columns += [_air_cells(book, result), _data_cells(book, result)]
    whole, text = book.numbers(WHOLE), book.style("text")
    cautions = pd.Series(
        [f.id for f in result.findings if f.subject == "field" and f.severity != "note"], dtype=str
    ).value_counts()
    for at, field in enumerate(result.fields):
        *figures, data = (part[at] for part in columns)
        cells: list[Shown] = [(labels[at], book.style("text", bold=True)), (field.id, text)]
        cells += [whole(whole_feet(field.elevation_m)), whole(float(round(field.elevation_m)))]
        cells += [_steep(book, field), *(cell for part in figures for cell in part)]
        cells += [whole(float(cautions.get(field.id, 0))), *data]
        for column, shown in enumerate(cells):
            sheet.cell(column, shown)
        # Names and ids stay on one line; what is behind them wraps.
        wrapped = [(c, column) for column, (c, _) in enumerate(cells) if column > 3]
        sheet.fit([(c, column, column) for c, column in wrapped if isinstance(c, str)])
        sheet.next_row()
    sheet.finish(head, 1)
    sheet.page.activate()


def _write_top(sheet: Sheet, result: StudyResult) -> None:
    """Title, scope, caution, legend and the headings."""
    sheet.line(result.title, "title")
    sheet.line(
        "How often each aircraft falls short of its margins at each field, month by month, from "
        f"past hourly weather: {scope(result)}. One row per field, one sheet per aircraft, and "
        "behind them weights, windows, bases, the air, the margins, the method and every caution."
    )
    sheet.line(CAUTIONS[0], "caution")
    sheet.legend("Bands of the shortfall share", 1)
    few = (
        f"{MARK} few years: below {YEARS.settled_interval} behind a share (its interval is "
        f"unsettled, and there is none below {YEARS.interval}), below {YEARS.percentiles} behind "
        "a percentile."
    )
    sheet.line(f"{few} {NO_PASS} {COLOURS}", "note")
    _write_heads(sheet, result)


def _write_heads(sheet: Sheet, result: StudyResult) -> None:
    book = sheet.book
    group = book.style("group")
    column = 7
    groups = [(0, 4, "Field"), (5, 6, "Highest density altitude, P90")]
    for label in aircraft_labels(result):
        groups.append((column, column + 2, label))
        column += 3
    groups += [(column, column + 1, "How the air is known"), (column + 2, column + 4, "Data")]
    for first, last, label in groups:
        sheet.page.merge_range(sheet.row, first, sheet.row, last, "", group)
        sheet.cell(first, (label, group))
    sheet.fit([(label, first, last) for first, last, label in groups], least=18.0)
    sheet.next_row()
    sure = f"{round(float(result.settings['confidence']) * 100)} % interval"
    sheet.head(
        [
            *("Field", "Id", "Elevation, ft", "Elevation, m", "Steep runway", "ft", "Month"),
            *["Worst month", "Shortfall share", sure] * len(result.aircraft),
            *("Air", "Error, ft (1 sd)", "Cautions", "Months with data", "Years, fewest"),
        ]
    )


def _altitude_cells(book: Book, result: StudyResult) -> list[list[Shown]]:
    monthly = result.distributions_monthly
    air = monthly[monthly["variable"] == "density_altitude"]
    feet, years = (_by_month(result, air, name) for name in ("p90", "n_years"))
    few, whole = few_years(years, YEARS.percentiles), book.numbers(WHOLE)
    cells = []
    for row, marks in zip(feet, few, strict=True):
        worst = worst_months(row)
        if not worst:
            cells.append([book.no_data] * 2)
            continue
        shown = book.marked(whole(hundreds(row[worst[0]])), max(marks[worst]))
        cells.append([shown, _months(book, worst, row)])
    return cells


def _aircraft_cells(book: Book, result: StudyResult, aircraft: str) -> list[list[Shown]]:
    """The worst month of one aircraft at each field, its share and interval."""
    risk = result.risk_monthly[result.risk_monthly["aircraft"] == aircraft]
    share, low, high, years = (
        _by_month(result, risk, name) for name in ("shortfall", "ci_low", "ci_high", "n_years")
    )
    few, steep = few_years(years, YEARS.settled_interval), steep_marks(result.fields)
    banded, middle = book.banded(), book.style("middle")
    cells = []
    for at, row in enumerate(share):
        worst = worst_months(row)
        if not worst:
            cells.append([book.no_data] * 3)
            continue
        # Of months that tie the interval that holds those of all; none where one has none.
        ends = float(low[at, worst].min()), float(high[at, worst].max())
        mark = max(few[at, worst])
        interval = NO_INTERVAL if np.isnan(ends).any() else f"{interval_text(*ends)} {mark}".strip()
        shown = book.marked(banded(row[worst[0]]), mark + steep[at, 0])
        month = _months(book, worst if row[worst[0]] > 0 else [], row)
        cells.append([month, shown, (interval, middle)])
    return cells


def _months(book: Book, worst: list[int], values: np.ndarray) -> Shown:
    """The months that are worst, and of how many where some of the twelve have no value."""
    known = int((~np.isnan(values)).sum())
    text = months_text(worst) or "no month"
    if known < len(values):
        text += f" (of {known} month{'' if known == 1 else 's'})"
    return text, book.style("middle", text_wrap=True)


def _air_cells(book: Book, result: StudyResult) -> list[list[Shown]]:
    """How the air of each field is known, with its error."""
    estimates = {str(row.field): row for row in result.estimates.itertuples()}
    feet = book.numbers(ERROR)
    cells = []
    for field in result.fields:
        row = estimates.get(field.id)
        how = (
            NO_DATA
            if row is None
            else air_text(row.own_station, row.stations, row.pressure_error_ft)
        )
        if row is None or how == NO_DATA:
            cells.append([book.no_data] * 2)
            continue
        error = error_shown(
            row.transfer_error_ft, row.pressure_error_ft, row.own_station, row.stations
        )
        cells.append([(how, book.style("text", text_wrap=True)), feet(error)])
    return cells


def _data_cells(book: Book, result: StudyResult) -> list[list[Shown]]:
    """Months with a density altitude and a share of every aircraft, and their fewest years."""
    monthly, risk = result.distributions_monthly, result.risk_monthly
    frames = [(monthly[monthly["variable"] == "density_altitude"], "p90")]
    frames += [(risk[risk["aircraft"] == one.id], "shortfall") for one in result.aircraft]
    values = np.array([_by_month(result, frame, name) for frame, name in frames])
    years = np.array([_by_month(result, frame, "n_years") for frame, _ in frames])
    known = ~np.isnan(values).any(axis=0)
    # Infinity stands for a month without data, which has no years to compare.
    fewest = np.where(np.isnan(values), np.inf, years).min(axis=(0, 2), initial=np.inf)
    fewest = np.where(np.isfinite(fewest), fewest, np.nan)
    marks = few_years(fewest, YEARS.settled_interval)
    whole = book.numbers(WHOLE)
    cells = []
    for months, count, mark in zip(known, fewest, marks, strict=True):
        full = whole(float(months.sum()))
        shown = full if months.all() else (full[0], book.style("fewer", num_format=WHOLE))
        cells.append([shown, book.marked(whole(count), mark)])
    return cells


def _steep(book: Book, field: Field) -> Shown:
    if not field.runways:
        return "no runway", book.style("middle")
    steep = field.is_steep
    text = f"over {STEEP_SLOPE_PCT:g} % {STEEP}" if steep else "no"
    return text, book.style("middle", bold=steep)


def _by_month(result: StudyResult, frame: pd.DataFrame, column: str) -> np.ndarray:
    fields = [field.id for field in result.fields]
    return grid(frame, column, ("field", fields), ("month", _MONTH_NUMBERS)).astype(float)
