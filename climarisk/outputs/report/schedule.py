"""The page of the schedule: what it comes to, by season, its worst days and its worst flights."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from typing import Any

import pandas as pd

from climarisk.outputs.report.planning import NOT_MET
from climarisk.outputs.report.tables import STEEP_MARK, Sheet
from climarisk.outputs.report.words import Html, el, given, number, scroll
from climarisk.outputs.report.worst import interval_words
from climarisk.outputs.schedule_words import note_words
from climarisk.outputs.texts import (
    NO_DATA,
    affected_text,
    band_of,
    flights_interval,
    flights_text,
    grouped,
    mass_text,
    no_time_text,
    operation_text,
    schedule_words,
    share_text,
)

#: So many of the worst days and flights find room; the workbook and the CSV files hold the others.
MOST_DAYS, MOST_FLIGHTS = 12, 30
_Row = Mapping[Any, Any]


def schedule_section(sheet: Sheet) -> Html | None:
    """The page of the schedule; None for a study without one."""
    result = sheet.result
    flights, seasons, days = (
        result.schedule_flights,
        result.schedule_seasons,
        result.schedule_days,
    )
    if flights is None or seasons is None or days is None or flights.empty:
        return None
    asked = result.settings["planning"]
    first, *others = schedule_words(
        result.schedule_flights, result.schedule_seasons, float(result.settings["confidence"])
    )
    lead = [el("b", first), *(f" {text}" for text in others)]
    return el(
        "section",
        el("p", "The schedule", class_="kicker"),
        el("h2", "Flights that are expected to fall short"),
        el("p", lead, class_="lead"),
        el(
            "p",
            f"Dates and clock times of {asked['year']}, weather of {result.settings['first_year']} "
            f"to {result.settings['last_year']}. Flights share their weather, so the intervals "
            "come from whole years; intervals are rounded outwards. Never met: short in "
            "every hour of the record.",
            class_="quiet",
        ),
        el("div", _season_table(sheet, seasons), _day_table(days), class_="tallies"),
        _flight_part(sheet, flights),
        class_="sheet",
        id="schedule",
    )


def _table(kind: str, caption: str, heads: Sequence[str], rows: Iterable[Html]) -> Html:
    head = el("tr", [el("th", text, scope="col") for text in heads])
    parts = (el("caption", caption), el("thead", head), el("tbody", rows))
    return scroll(el("table", *parts, class_=kind), caption)


def _season_table(sheet: Sheet, seasons: pd.DataFrame) -> Html:
    rows = [
        el("tr", _season_cells(row)) for row in seasons.to_dict("records") if int(row["flights"])
    ]
    heads = ["Season", "Flights", "Fall short", f"{sheet.confidence} interval"]
    heads += ["Best and worst year", "Without figures"]
    return _table("tally", "By season", heads, rows)


def _season_cells(row: _Row) -> list[Html]:
    name = given(row["season"]) if row["season"] else "whole schedule"
    head = el("th", name, scope="row")
    known = not pd.isna(row["affected"])
    ends = flights_interval(float(row["ci_low"]), float(row["ci_high"]))
    years = " and ".join(flights_text(float(row[end])) for end in ("year_low", "year_high"))
    if known and not pd.isna(row["worst_year"]):
        years += f" in {int(row['worst_year'])}"
    told = [
        grouped(int(row["flights"])),
        flights_text(float(row["affected"])),
        "too few years" if known and ends == "none" else ends if known else NO_DATA,
        years if known else NO_DATA,
        grouped(int(row["unknown_flights"])) if row["unknown_flights"] else "–",
    ]
    return [head, *(el("td", text) for text in told)]


def _day_table(days: pd.DataFrame) -> Html:
    worst = days[days["affected"] > 0]
    if worst.empty:
        return el("p", "No day has a flight that is expected to fall short.")
    worst = worst.sort_values("affected", ascending=False, kind="stable").head(MOST_DAYS)
    rows = [
        el(
            "tr",
            el("th", str(row["date"]), " ", el("small", str(row["weekday"])), scope="row"),
            el("td", grouped(int(row["flights"]))),
            el("td", flights_text(float(row["affected"]))),
            el("td", share_text(float(row["share"]))),
        )
        for row in worst.to_dict("records")
    ]
    caption = f"The {len(worst)} worst days of {grouped(len(days))}"
    return _table("tally", caption, ("Day", "Flights", "Fall short", "Share"), rows)


# Flights


def _flight_part(sheet: Sheet, flights: pd.DataFrame) -> list[Html]:
    worst = flights.assign(never=flights["never_met"] == "yes").sort_values(
        ["never", "shortfall", "affected"], ascending=False, kind="stable"
    )
    shown = worst.head(MOST_FLIGHTS)
    names = {f.id: sheet.fields[n] for n, f in enumerate(sheet.result.fields)}
    planes = {a.id: sheet.aircraft[n] for n, a in enumerate(sheet.result.aircraft)}
    rows = [el("tr", _flight_cells(sheet, row, names, planes)) for row in shown.to_dict("records")]
    asked = sheet.result.settings["planning"]
    often, target = (share_text(float(asked[name])) for name in ("holds_in", "target"))
    heads = ["Flight", "Field, aircraft", "Operation", "Short", "Flights short", "Limited by"]
    heads += [f"Mass that holds in {often}", f"Nearest time below {target}"]
    rest = len(flights) - len(shown)
    more = (
        f"Further rows of flights: {grouped(rest)}; the sheet “Schedule” of the workbook and "
        "schedule_flights.csv hold them all."
    )
    return [
        _table("plain worst-flights", "The worst flights, those never met first", heads, rows),
        *([el("p", more, class_="quiet")] if rest else []),
    ]


def _flight_cells(
    sheet: Sheet, row: _Row, names: Mapping[str, str], planes: Mapping[str, str]
) -> list[Html]:
    when = [given(row["when"]), f" {row['clock_time']}"]
    field, plane = (
        given(of.get(str(row[key]), str(row[key])))
        for of, key in ((names, "field"), (planes, "aircraft"))
    )
    mark = [" ", el("small", STEEP_MARK, class_="mark")] if row["steep"] == "yes" else []
    head = [
        el(
            "th",
            el("span", given(row["flight"]), class_="label"),
            " ",
            el("small", when),
            note_words(row),
            scope="row",
        ),
        el("td", el("span", field, class_="label"), mark, " ", el("small", plane)),
        el("td", operation_text(str(row["operation"]))),
    ]
    if pd.isna(row["shortfall"]):
        return [*head, el("td", NO_DATA, class_="none", colspan=5)]
    share = float(row["shortfall"])
    interval = interval_words(float(row["ci_low"]), float(row["ci_high"]), float(row["n_years"]))
    never = [" ", el("small", "never met")] if row["never_met"] == "yes" else []
    return [
        *head,
        el("td", share_text(share), " ", el("small", interval), never,
           class_=f"share b{band_of(share, sheet.edges)}"),
        el("td", affected_text(row)),
        el("td", str(row["limiting"]) or "none"),
        _mass_cell(row),
        _nearest_cell(row),
    ]  # fmt: skip


def _mass_cell(row: _Row) -> Html:
    if row["outcome"] == NOT_MET:
        return el("td", NOT_MET)
    mass, load = float(row["mass_that_holds_kg"]), float(row["useful_load_kg"])
    if math.isnan(mass):
        return el("td", NO_DATA, class_="none")
    return el("td", mass_text(mass), " ", el("small", f"load {mass_text(load)}"))


def _nearest_cell(row: _Row) -> Html:
    if not row["nearest_time"] or pd.isna(row["nearest_time"]):
        return el("td", no_time_text(row["note"]))
    if row["nearest_shift_h"] == 0:
        return el("td", "as planned")
    share = number(float(row["nearest_shortfall"]))
    return el("td", str(row["nearest_time"]), " ", el("small", f"{share} %"))
