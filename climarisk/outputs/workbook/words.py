"""Sheets of the workbook that explain: method and sources, cautions and findings."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

import pandas as pd

from climarisk.aircraft import AircraftProfile
from climarisk.outputs.texts import CAUTIONS, METHOD
from climarisk.outputs.workbook.cells import ERROR, PART, SHARE, TENTH, WHOLE, Book, Sheet, Show
from climarisk.outputs.workbook.grids import (
    NO_CHECK,
    NO_INTERVAL,
    NO_MARGIN,
    aircraft_labels,
    field_labels,
)
from climarisk.results import StudyResult

MEASURED = "measured"
_COLOURS = (
    "Colours: ColorBrewer 2.0, sequential scheme YlOrBr, by Cynthia Brewer and Mark Harrower, "
    "Pennsylvania State University."
)

#: What the columns and figures mean, in the order of the sheets.
_MEANINGS = (
    ("Highest density altitude", "The highest P90 of the twelve months: 1 hour in 10 is above."),
    (
        "Worst month",
        "The month with the highest shortfall share among those with data; the first of several.",
    ),
    (
        "Shortfall share",
        "Hours that fall short over hours known, inside the hours window. An hour falls short "
        "when any check fails in the most favourable direction that may be used.",
    ),
    (
        "Interval, low and high",
        "Where the share lies with the study’s confidence, from resampling whole years. "
        f"“{NO_INTERVAL}”: too few years for one.",
    ),
    (
        "Usable hours",
        "Hours of the month in a year that do not fall short, rounded down: the hours in the "
        "window at the share of the known hours.",
    ),
    (
        "Hours in the window",
        "Hours that the hours window offers in that month of a year, rounded down.",
    ),
    (
        "Limiting check",
        "The check with the smallest margin most often among the hours that fall short. "
        f"“{NO_CHECK}”: no known hour falls short.",
    ),
    ("Years that count", "Years with values on at least 80 % of the days of the month."),
    (
        "Margin, P10",
        "Available over required times the operator’s factors, less one: 1 hour in 10 has a "
        f"smaller one. “{NO_MARGIN}”: a stated limit is passed or not, it has no margin.",
    ),
    ("Share failing", "Hours in which this one check fails over hours known."),
    (
        "Steep runway",
        "A runway is steeper than the published factors hold for: no figure of the field is a "
        "pass, it needs a site-specific procedure.",
    ),
    (
        "Air",
        "How the air at the field is known: measured at a station on the spot, or estimated from "
        "stations nearby. The error is one standard deviation, in feet of density altitude.",
    ),
    ("Cautions", "Findings about the field that are more than a note; see the sheet “Cautions”."),
    ("no data", "The record does not meet the completeness rule: it does not mean no risk."),
)


def write_method(book: Book, result: StudyResult) -> None:
    """The sheet of method, settings, sources and stations."""
    widths = [30.0, 14.0, 28.0, 13.0, 11.0, 12.0, 12.0, 12.0, 11.0, 11.0, 18.0]
    sheet = book.sheet("Method and sources", widths)
    sheet.line("Method and sources", "title")
    version = str(result.provenance.get("version", "")) or "not told"
    sheet.line(
        f"climarisk, version {version}. The file study.json beside this workbook holds the inputs "
        "with their checksums; the CSV files hold every number unrounded."
    )
    _section(sheet, "Method")
    for text in METHOD:
        sheet.line(text)
    _section(sheet, "What the columns mean")
    for name, text in _MEANINGS:
        _told(sheet, name, text)
    _section(sheet, "Settings")
    for key, value in result.settings.items():
        _told(sheet, str(key).replace("_", " "), _plain(value))
    _section(sheet, "Aircraft")
    for profile, label in zip(result.aircraft, aircraft_labels(result), strict=True):
        _told(sheet, label, _aircraft_text(profile))
    _section(sheet, "Sources of the data")
    for line in result.attributions or ("No attribution was supplied with the data.",):
        sheet.line(line)
    sheet.line(_COLOURS)
    _write_air(sheet, result)
    _write_stations(sheet, result)
    sheet.page.freeze_panes(1, 0)


def _section(sheet: Sheet, title: str) -> None:
    sheet.next_row()
    sheet.line(title, "heading")


def _told(sheet: Sheet, name: str, text: str) -> None:
    """A name in the first column and what there is to say beside it."""
    sheet.cell(0, (name, sheet.book.style("label")))
    sheet.line(text or "none", first=1)


def _plain(value: Any) -> str:
    if isinstance(value, Mapping):
        # Seasons by their first and last day.
        return "; ".join(
            f"{name}: {' to '.join(map(_plain, days))}" for name, days in value.items()
        )
    if isinstance(value, list | tuple):
        return ", ".join(_plain(part) for part in value)
    if isinstance(value, bool):
        return "yes" if value else "no"
    return str(value)


def _aircraft_text(profile: AircraftProfile) -> str:
    parts = [
        f"figures: {profile.source}",
        f"{profile.aspiration}, {'carburettor' if profile.carburettor else 'no carburettor'}",
        f"planned at {profile.planning_kg:,.0f} kg of at most {profile.maximum_kg:,.0f} kg",
        f"factors: take-off {profile.takeoff_factor:g}, landing {profile.landing_factor:g}",
    ]
    asked = (
        ("rate of climb asked for: {:g} ft/min", profile.climb_rate_ft_min),
        ("climb gradient asked for: {:g} %", profile.climb_gradient_pct),
        ("temperature limit {:g} °C", profile.limit_temperature_c),
        ("density altitude limit {:,.0f} ft", profile.limit_density_altitude_ft),
    )
    parts += [text.format(value) for text, value in asked if value is not None]
    if profile.is_scaled:
        parts.append("scaled, no table: generic rules from single figures")
    return "; ".join(parts) + "."


# Air and stations


def air_text(own: float, stations: float) -> str:
    """How the air of a field is known."""
    if own >= 1.0:
        return "own station"
    if not stations > 0:
        return "no data" if not own > 0 else f"own station {_part_text(own)}"
    count = f"{stations:.0f} station" + ("" if stations == 1 else "s")
    if own > 0:
        return f"own station {_part_text(own)}, else {count}"
    return f"estimated from {count}"


def _part_text(share: float) -> str:
    """A share below all, never shown as all and never as nothing."""
    if share > 0.99:
        return "over 99 %"
    return "< 1 %" if share < 0.01 else f"{math.floor(share * 100 + 0.5)} %"


def _part(book: Book) -> Show:
    """How to show a share that never shows as nothing, nor as all, when it is neither."""
    low, high = book.numbers(SHARE), book.numbers(PART)
    return lambda value: (low if value < 0.5 else high)(value)


def error_shown(feet: float, own: float, stations: float) -> float | str:
    """An error in feet to two digits, or a word where there is nothing to estimate."""
    if own >= 1.0:
        return MEASURED
    return two_digits(feet) if own > 0 or stations > 0 else math.nan


def two_digits(value: float) -> float:
    """The value to two significant digits, whole below ten; what is below a half stays."""
    if not math.isfinite(value) or value < 0.5:
        return value
    return float(f"{value:.2g}") if value >= 10.0 else float(math.floor(value + 0.5))


def _write_air(sheet: Sheet, result: StudyResult) -> None:
    """How the air of each field is known, and how well."""
    _section(sheet, "How the air of each field is known")
    heads = "Field|Own station, share of hours|Pressure from|Stations estimated from"
    heads += "|Error, K (1 sd)|Error, ft (1 sd)|Pressure error, ft (1 sd)"
    sheet.head([*heads.split("|"), "Stations of the lapse", "Stations hidden to learn it"], 44.0)
    sources: dict[str, list[str]] = {}
    for part in result.pressure_sources.itertuples():
        sources.setdefault(str(part.field), []).append(f"{part.source} {_part_text(part.share)}")
    estimates = {str(one.field): one for one in result.estimates.itertuples()}
    book = sheet.book
    kelvin, feet, whole = book.numbers(TENTH), book.numbers(ERROR), book.numbers(WHOLE)
    for field, label in zip(result.fields, field_labels(result), strict=True):
        row: Any = estimates.get(field.id)
        sheet.cell(0, (label, book.style("top")))
        pressure = ", ".join(sources.get(field.id, []))
        sheet.cell(2, (pressure, book.style("wrapped")) if pressure else book.no_data)
        known = row is not None and (row.own_station > 0 or row.stations > 0)
        own, stations = (row.own_station, row.stations) if known else (math.nan, math.nan)
        # A tenth of a kelvin, rounded up: no error looks smaller than it is.
        error_k = math.ceil(round(row.transfer_error_k * 10, 6)) / 10 if known else math.nan
        sheet.cell(1, _part(book)(own))
        sheet.cell(3, whole(stations))
        sheet.cell(4, kelvin(MEASURED if own >= 1.0 else error_k))
        sheet.cell(5, feet(error_shown(row.transfer_error_ft, own, stations) if known else own))
        sheet.cell(6, feet(two_digits(row.pressure_error_ft) if known else math.nan))
        sheet.cell(7, whole(float(row.lapse_stations) or "fixed table" if known else math.nan))
        hidden = float(row.verified_stations) or "planning values" if known else math.nan
        sheet.cell(8, whole(MEASURED if own >= 1.0 else hidden))
        sheet.next_row()


def _write_stations(sheet: Sheet, result: StudyResult) -> None:
    """The stations used at each field, as a table to filter."""
    _section(sheet, "Stations used")
    heads = "Field|Station|Name|Archive|Distance, km|Field above station, m|First|Last|Coverage"
    sheet.head([*heads.split("|"), "Share of hours", "Pressure kind"], 32.0)
    head, book = sheet.row - 1, sheet.book
    labels = dict(zip([f.id for f in result.fields], field_labels(result), strict=True))
    numbers = {
        "distance_km": book.numbers(TENTH),
        "height_difference_m": book.numbers(WHOLE),
        "coverage": _part(book),
        "share_of_hours": _part(book),
    }
    text = book.style("text")
    for row in result.station_use.to_dict("records"):
        sheet.cell(0, (labels.get(str(row["field"]), str(row["field"])), text))
        for column, name in enumerate((c for c in row if c != "field"), start=1):
            value = row[name]
            if name in numbers:
                sheet.cell(column, numbers[name](math.nan if pd.isna(value) else float(value)))
            else:
                sheet.cell(column, book.no_data if pd.isna(value) else (str(value), text))
        sheet.next_row()
    if sheet.row > head + 1:
        sheet.page.autofilter(head, 0, sheet.row - 1, len(sheet.widths) - 1)
        sheet.page.repeat_rows(head)


# Cautions


def write_cautions(book: Book, result: StudyResult) -> None:
    """The sheet of cautions and of everything the quality control has to say."""
    sheet = book.sheet("Cautions", [11.0, 10.0, 18.0, 30.0, 20.0, 90.0])
    sheet.line("Cautions", "title")
    for number, text in enumerate(CAUTIONS, start=1):
        sheet.cell(0, (f"{number}.", book.style("label")))
        sheet.line(text, "caution" if number == 1 else "plain", first=1)
    _section(sheet, "Findings of the quality control")
    sheet.line(
        "reject: data were not used because of it. caution: read it before using the figures. "
        "note: good to know."
    )
    sheet.head(["Severity", "Subject", "Id", "Name", "Check", "Message"], 18.0)
    head = sheet.row - 1
    names = _names(result)
    for finding in result.findings:
        loud = finding.severity != "note"
        sheet.cell(0, (finding.severity, book.style("strong" if loud else "top")))
        name = names.get((finding.subject, finding.id), "")
        for column, word in enumerate((finding.subject, finding.id, name, finding.check), start=1):
            sheet.cell(column, (word, book.style("wrapped")))
        sheet.cell(5, (finding.message, book.style("wrapped")))
        sheet.next_row()
    if not result.findings:
        sheet.cell(0, ("none", book.style("text")))
        sheet.next_row()
    else:
        sheet.page.autofilter(head, 0, sheet.row - 1, 5)
    sheet.page.repeat_rows(head)
    sheet.page.freeze_panes(1, 0)


def _names(result: StudyResult) -> dict[tuple[str, str], str]:
    """What the ids of the findings stand for."""
    use = result.station_use
    known = use[use["name"].notna()]
    stations = {
        ("station", str(s)): str(n) for s, n in zip(known["station"], known["name"], strict=True)
    }
    return (
        stations
        | {("field", f.id): f.name for f in result.fields}
        | {("aircraft", a.id): a.name for a in result.aircraft}
    )
