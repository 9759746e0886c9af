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
from climarisk.outputs.texts import CAUTIONS, MONTHS, NO_DATA, interval_text
from climarisk.outputs.workbook.cells import (
    ERROR,
    MARK,
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
    NO_CHECK,
    NO_INTERVAL,
    aircraft_labels,
    field_labels,
    hundreds,
    label_width,
    scope,
    whole_feet,
    write_aircraft,
    write_altitude,
    write_humidity,
    write_margins,
)
from climarisk.outputs.workbook.words import air_text, error_shown, write_cautions, write_method
from climarisk.results import StudyResult
from climarisk.rules import YEARS

SUMMARY = "Summary"
OTHER_SHEETS = ("Density altitude", "Humidity", "Margins", "Method and sources", "Cautions")
#: Excel keeps this name for itself.
_RESERVED = "History"
_LONGEST_NAME = 31
#: Stands in the file in place of the clock, so that the same input gives the same bytes.
_FIXED_DATE = datetime(2000, 1, 1)
_MONTH_NUMBERS = tuple(range(1, 13))


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
        shown = "".join(c if c.isprintable() else " " for c in re.sub(r"[\[\]:*?/\\]", " ", name))
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
    widths = [label_width(labels), 10.0, 10.0, 10.0, 9.0, 7.5]
    widths += [7.5, 9.0, 12.0] * len(result.aircraft) + [9.5, 29.0, 9.5, 9.0, 9.5]
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
        altitude, *aircraft, air, months = (part[at] for part in columns)
        cells: list[Shown] = [(labels[at], book.style("text", bold=True)), (field.id, text)]
        cells += [whole(whole_feet(field.elevation_m)), whole(float(round(field.elevation_m)))]
        cells += [*altitude, *(cell for part in aircraft for cell in part)]
        cells += [_steep(book, field), *air, whole(float(cautions.get(field.id, 0))), *months]
        for column, shown in enumerate(cells):
            sheet.cell(column, shown)
        sheet.next_row()
    sheet.finish(head, 1)
    sheet.page.activate()


def _write_top(sheet: Sheet, result: StudyResult) -> None:
    """Title, scope, caution, legend and the headings."""
    book = sheet.book
    sheet.line(result.title, "title")
    sheet.line(
        "How often each aircraft falls short of its margins at each field, month by month, from "
        f"past hourly weather: {scope(result)}. One row per field, one sheet per aircraft, and "
        "behind them the air, the margins, the method and every caution."
    )
    sheet.line(CAUTIONS[0], "caution")
    sheet.cell(0, ("Bands of the shortfall share", book.style("label")))
    sheet.legend(1)
    after = len(book.labels) + 2
    note = f"{MARK} interval from fewer than {YEARS.settled_interval} years"
    sheet.cell(after + 1, (note, book.style("note")))
    sheet.next_row()
    _write_heads(sheet, result)


def _write_heads(sheet: Sheet, result: StudyResult) -> None:
    book = sheet.book
    group = book.style("group")
    column = 6
    groups = [(0, 3, "Field"), (4, 5, "Highest density altitude, P90")]
    for label in aircraft_labels(result):
        groups.append((column, column + 2, label))
        column += 3
    groups += [(column + 1, column + 2, "How the air is known"), (column + 3, column + 4, "Data")]
    sheet.cell(column, ("Runways", group))
    for first, last, label in groups:
        sheet.page.merge_range(sheet.row, first, sheet.row, last, "", group)
        sheet.cell(first, (label, group))
    sheet.page.set_row(sheet.row, 30.0)
    sheet.next_row()
    sure = f"{round(float(result.settings['confidence']) * 100)} % interval"
    sheet.head(
        [
            *("Field", "Id", "Elevation, ft", "Elevation, m", "ft", "Month"),
            *["Worst month", "Shortfall share", sure] * len(result.aircraft),
            *("Steep runway", "Air", "Error, ft (1 sd)", "Cautions", "Months with data"),
        ]
    )


def _altitude_cells(book: Book, result: StudyResult) -> list[list[Shown]]:
    monthly = result.distributions_monthly
    feet = _by_month(result, monthly[monthly["variable"] == "density_altitude"], "p90")
    whole = book.numbers(WHOLE)
    return [
        [whole(hundreds(row[at])), _month(book, at)] if at >= 0 else [book.no_data] * 2
        for row, at in zip(feet, _highest(feet), strict=True)
    ]


def _aircraft_cells(book: Book, result: StudyResult, aircraft: str) -> list[list[Shown]]:
    """The worst month of one aircraft at each field, its share and interval."""
    risk = result.risk_monthly[result.risk_monthly["aircraft"] == aircraft]
    share, low, high, years = (
        _by_month(result, risk, name) for name in ("shortfall", "ci_low", "ci_high", "n_years")
    )
    banded, middle = book.banded(), book.style("middle")
    cells = []
    for row, at in enumerate(_highest(share)):
        if at < 0:
            cells.append([book.no_data] * 3)
            continue
        interval = interval_text(low[row, at], high[row, at])
        if interval != NO_INTERVAL and years[row, at] < YEARS.settled_interval:
            interval += f" {MARK}"
        none = (NO_CHECK, middle)
        month = _month(book, at) if share[row, at] > 0 else none
        cells.append([month, banded(share[row, at]), (interval, middle)])
    return cells


def _air_cells(book: Book, result: StudyResult) -> list[list[Shown]]:
    """How the air of each field is known, with its error."""
    estimates = {str(row.field): row for row in result.estimates.itertuples()}
    feet = book.numbers(ERROR)
    cells = []
    for field in result.fields:
        row = estimates.get(field.id)
        how = NO_DATA if row is None else air_text(row.own_station, row.stations)
        if row is None or how == NO_DATA:
            cells.append([book.no_data] * 2)
            continue
        error = error_shown(row.transfer_error_ft, row.own_station, row.stations)
        cells.append([(how, book.style("text")), feet(error)])
    return cells


def _data_cells(book: Book, result: StudyResult) -> list[list[Shown]]:
    """Months with a density altitude and with a share of every aircraft."""
    monthly = result.distributions_monthly
    air = monthly[monthly["variable"] == "density_altitude"]
    known = ~np.isnan(_by_month(result, air, "p90"))
    for profile in result.aircraft:
        risk = result.risk_monthly[result.risk_monthly["aircraft"] == profile.id]
        known &= ~np.isnan(_by_month(result, risk, "shortfall"))
    whole, fewer = book.numbers(WHOLE), book.numbers(WHOLE, bold=True)
    return [[(whole if row.all() else fewer)(float(row.sum()))] for row in known]


def _steep(book: Book, field: Field) -> Shown:
    shape = book.style("middle", text_wrap=True)
    if not field.runways:
        return "no runway", shape
    steep = any(abs(way.slope_pct) > STEEP_SLOPE_PCT for way in field.runways)
    return (f"over {STEEP_SLOPE_PCT:g} %" if steep else "no"), book.style("middle", bold=steep)


def _by_month(result: StudyResult, frame: pd.DataFrame, column: str) -> np.ndarray:
    fields = [field.id for field in result.fields]
    return grid(frame, column, ("field", fields), ("month", _MONTH_NUMBERS)).astype(float)


def _highest(values: np.ndarray) -> list[int]:
    """The first column with the highest value of each row; -1 where there is none."""
    known = ~np.isnan(values)
    first = np.where(known, values, -np.inf).argmax(axis=1) if len(values) else []
    return [int(at) if some else -1 for at, some in zip(first, known.any(axis=1), strict=True)]


def _month(book: Book, at: int) -> Shown:
    return MONTHS[at], book.style("middle")
