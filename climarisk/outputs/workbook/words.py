"""Sheets of the workbook that explain: method and sources, cautions and findings."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

import pandas as pd

from climarisk.aircraft import AircraftProfile
from climarisk.outputs.texts import (
    CAUTIONS,
    METHOD,
    NO_DATA,
    PRESSURE_TOLD_FT,
    aircraft_labels,
    field_labels,
    grouped,
)
from climarisk.outputs.workbook.cells import ERROR, GAP, MARK, STEEP, TENTH, WHOLE, Book, Sheet
from climarisk.outputs.workbook.grids import NO_CHECK, NO_INTERVAL, NO_MARGIN
from climarisk.results import StudyResult
from climarisk.rules import DAYS

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
        "The month with the highest shortfall share among those with data, or the months that tie; "
        "“of so many months” where some of the twelve have no data. The interval of months that "
        "tie goes from the lowest end to the highest.",
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
    (
        "Years that count",
        "Years with any hour that enters. An hour enters when its month and hour of day have "
        f"values on at least {DAYS.share_of_days * 100:g} % of the days of that year’s month. "
        "“Years, fewest”: of the months with data.",
    ),
    (
        "Coverage",
        "Share of the period’s cells that count: of a month, one cell per year and hour of day in "
        "the hours window; of a season, its hours in the window.",
    ),
    (
        "Margin, P10",
        "Available over required times the operator’s factors, less one: 1 hour in 10 has a "
        f"smaller one. “{NO_MARGIN}”: a stated limit is passed or not, it has no margin.",
    ),
    (
        "Share failing",
        "Hours in which this check fails, whatever the others do, over hours known.",
    ),
    (
        f"Steep runway, {STEEP}",
        "A runway is steeper than the published factors hold for: no figure of the field is a "
        "pass, it needs a site-specific procedure.",
    ),
    (
        f"Few years, {MARK}",
        "A share or an interval rests on fewer years than a settled interval needs, or a "
        "percentile on fewer than percentiles need.",
    ),
    (
        f"Gap, {GAP}",
        "A month that the season touches has no data: the figure of the season rests on the "
        "other months.",
    ),
    (
        "Air",
        "How the air at the field is known: measured at a station on the spot, or estimated from "
        "stations nearby. The error of the pressure is told beside it from "
        f"{PRESSURE_TOLD_FT:g} ft on: the pressure is then not measured well, or not at all.",
    ),
    (
        "Error, ft (1 sd)",
        "One standard deviation of the air, in feet of density altitude: the root of the sum of "
        "the squares of the transfer error (of the hours estimated from stations nearby) and of "
        "the pressure error, which come from different readings and are taken as independent. "
        f"“{MEASURED}”: nothing is transferred and the pressure error is below "
        f"{PRESSURE_TOLD_FT:g} ft.",
    ),
    (
        "Mass, useful load",
        "The largest mass at which every check of take-off, climb and landing held in the stated "
        "share of the hours, and what it leaves above the empty mass, rounded down; never above "
        "the maximum mass. “cannot be met”: at no tabulated mass did they hold that often.",
    ),
    ("Hours in which no mass holds", "Hours in which some check fails at every tabulated mass."),
    (
        "Hours of the day, LST",
        "Hours of the hours window whose own shortfall share is below the target, by local "
        "standard time; “h no data” counts hours of the day without a figure.",
    ),
    (
        "Usable daylight hours",
        "Hours of civil daylight that do not fall short, whatever the hours window; known hours "
        "stand for the others.",
    ),
    (
        "Days with hours in a row",
        "Share of the days, of those known, with so many usable hours one after the other.",
    ),
    (
        "Usable hours a month",
        "Hours of the window that do not fall short, mean over the twelve months; of the fleet, "
        "the mean over its aeroplanes.",
    ),
    (
        "Expected to fall short",
        "The sum of the shares of the flights, rounded up; single years of the record beside it.",
    ),
    (
        "Carburettor icing",
        "Daylight hours whose surface air lies in a band of the chart or the screening; serious in "
        "some phase of a flight includes a descent at low power. Wherever such a figure stands, so "
        "does whether the chart was verified.",
    ),
    (
        "Power",
        "At full throttle, in per cent of that in standard air at sea level. “not computed”: the "
        "profile lacks what the method needs.",
    ),
    (
        "Humidity, ft and % of power",
        "What the vapour alone adds to the density altitude and takes from the power, against "
        "dry air of the same pressure and temperature.",
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
    sheet.line(text or "none", first=1, label=name)


def _plain(value: Any) -> str:
    if isinstance(value, Mapping):
        return "; ".join(f"{name}: {_within(part)}" for name, part in value.items()) or "none"
    if isinstance(value, list | tuple):
        # Texts are the first and the last day of a season, or the ends of a window.
        between = " to " if all(isinstance(part, str) for part in value) else ", "
        return between.join(_plain(part) for part in value)
    if isinstance(value, bool):
        return "yes" if value else "no"
    return f"{value:g}" if isinstance(value, float) else str(value)


def _within(value: Any) -> str:
    """A value inside another one; a mapping there in brackets."""
    if isinstance(value, Mapping):
        return f"({', '.join(f'{name} {_plain(part)}' for name, part in value.items())})"
    return _plain(value)


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


def air_text(own: float, stations: float, pressure_error_ft: float) -> str:
    """How the air of a field is known, and its pressure where that is not known well."""
    told = pressure_error_ft >= PRESSURE_TOLD_FT
    if own >= 1.0:
        how = "air measured" if told else "own station"
    elif not stations > 0:
        if not own > 0:
            return NO_DATA
        how = f"own station {_part_text(own)}"
    else:
        count = f"{stations:.0f} station" + ("" if stations == 1 else "s")
        how = (
            f"own station {_part_text(own)}, else {count}" if own > 0 else f"estimated from {count}"
        )
    if not told:
        return how
    return f"{how}, pressure \N{PLUS-MINUS SIGN}{grouped(int(two_digits(pressure_error_ft)))} ft"


def _part_text(share: float) -> str:
    """A share below all, never shown as all and never as nothing."""
    if share > 0.99:
        return "over 99 %"
    return "< 1 %" if share < 0.01 else f"{math.floor(share * 100 + 0.5)} %"


def error_shown(
    transfer_error_ft: float, pressure_error_ft: float, own: float, stations: float
) -> float | str:
    """Both errors together in feet to two digits; a word where there is none to speak of."""
    if not (own > 0 or stations > 0):
        return math.nan
    if own >= 1.0 and pressure_error_ft < PRESSURE_TOLD_FT:
        return MEASURED
    # Readings of temperature and of pressure err independently, so their squares add up.
    return two_digits(math.hypot(transfer_error_ft, pressure_error_ft))


def two_digits(value: float) -> float:
    """The value to two significant digits, whole below ten; what is below a half stays."""
    if not math.isfinite(value) or value < 0.5:
        return value
    return float(f"{value:.2g}") if value >= 10.0 else float(math.floor(value + 0.5))


def _write_air(sheet: Sheet, result: StudyResult) -> None:
    """How the air of each field is known, and how well."""
    _section(sheet, "How the air of each field is known")
    sheet.line("Errors are one standard deviation; those in feet are of density altitude.")
    heads = "Field|Own station, share of hours|Pressure from|Stations estimated from"
    heads += "|Transfer error, K|Transfer error, ft|Pressure error, ft|Error, ft (1 sd)"
    sheet.head([*heads.split("|"), "Stations of the lapse", "Stations hidden to learn it"], 44.0)
    sources: dict[str, list[str]] = {}
    for part in result.pressure_sources.itertuples():
        sources.setdefault(str(part.field), []).append(f"{part.source} {_part_text(part.share)}")
    estimates = {str(one.field): one for one in result.estimates.itertuples()}
    book = sheet.book
    shows = [book.numbers(TENTH), *[book.numbers(ERROR)] * 3, *[book.numbers(WHOLE)] * 2]
    for field, label in zip(result.fields, field_labels(result), strict=True):
        row: Any = estimates.get(field.id)
        known = row is not None and (row.own_station > 0 or row.stations > 0)
        pressure = ", ".join(sources.get(field.id, []))
        sheet.cell(0, (label, book.style("top")))
        sheet.cell(1, book.parts()(row.own_station if known else math.nan))
        sheet.cell(2, (pressure, book.style("wrapped")) if pressure else book.no_data)
        sheet.cell(3, book.numbers(WHOLE)(row.stations if known else math.nan))
        errors = _errors(row) if known else [math.nan] * len(shows)
        for column, (show, value) in enumerate(zip(shows, errors, strict=True), start=4):
            sheet.cell(column, show(value))
        sheet.fit([(pressure, 2, 2)])
        sheet.next_row()


def _errors(row: Any) -> list[float | str]:
    """The errors of a field's air and what they were learned from, as in the table of the air."""
    measured = row.own_station >= 1.0
    # A tenth of a kelvin, rounded up: no error looks smaller than it is.
    kelvin = math.ceil(round(row.transfer_error_k * 10, 6)) / 10
    both = error_shown(row.transfer_error_ft, row.pressure_error_ft, row.own_station, row.stations)
    return [
        MEASURED if measured else kelvin,
        MEASURED if measured else two_digits(row.transfer_error_ft),
        two_digits(row.pressure_error_ft),
        both,
        float(row.lapse_stations) or "fixed table",
        MEASURED if measured else float(row.verified_stations) or "planning values",
    ]


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
        "coverage": book.parts(),
        "share_of_hours": book.parts(),
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
        sheet.line(text, "caution" if number == 1 else "plain", first=1, label=f"{number}.")
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
        told = (finding.subject, finding.id, name, finding.check, finding.message)
        for column, word in enumerate(told, start=1):
            sheet.cell(column, (word, book.style("wrapped")))
        sheet.fit([(word, column, column) for column, word in enumerate(told, start=1)])
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
