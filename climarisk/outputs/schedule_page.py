"""The print-ready page of a schedule: which flights fall short, when, and what would help.

Made of the pieces of the report (`climarisk.outputs.report`): one HTML document without a
script, every text from a file escaped, nothing loaded.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from importlib.resources import files
from typing import Any

import pandas as pd

from climarisk.aircraft import AircraftProfile
from climarisk.fields import Field
from climarisk.outputs.report.key import steep_item
from climarisk.outputs.report.style import paper_page, style
from climarisk.outputs.report.words import Html, count_text, el, given, join, scroll, unbroken
from climarisk.outputs.report.worst import interval_words
from climarisk.outputs.schedule_words import (
    SchedulePage,
    count_words,
    field_words,
    flown_words,
    holding_words,
    is_steep,
    nearest_words,
    note_words,
    place_cell,
    remedy,
    span_text,
    unknown_of,
    when_text,
)
from climarisk.outputs.texts import (
    CAUTIONS,
    NO_DATA,
    affected_text,
    band_labels,
    band_of,
    flights_interval,
    flights_text,
    grouped,
    share_text,
)
from climarisk.rules import YEARS

#: Rows of the tables at most; the CSV files hold all.
MOST_FLIGHTS, MOST_DAYS, MOST_FIRST = 1000, 14, 8


def render_schedule(
    title: str,
    fields: Sequence[Field],
    aircraft: Sequence[AircraftProfile],
    settings: Mapping[str, Any],
    frames: Mapping[str, pd.DataFrame],
) -> str:
    """The whole HTML page of a schedule, the same text for the same frames.

    Parameters
    ----------
    title : str
    fields : sequence of Field
    aircraft : sequence of AircraftProfile
    settings : mapping
        Of the study, as `climarisk.study.Study.settings` gives them.
    frames : mapping of str to DataFrame
        ``schedule_flights``, ``schedule_seasons`` and ``schedule_days`` of
        `climarisk.schedule.schedule_frames`.

    Returns
    -------
    str
        A complete HTML document that needs no other file and no network and holds no script;
        printed, it gives A4 pages.
    """
    page = SchedulePage(title, fields, aircraft, settings, frames)
    more = (files("climarisk.outputs") / "schedule_page.css").read_text(encoding="utf-8")
    look = style(title, len(page.edges) + 1) + more
    sections = [_overview(page), _flights(page), _behind(page)]
    return paper_page(f"{title}: schedule", look, sections)


# The first page


def _overview(page: SchedulePage) -> Html:
    rows = len(page.flights)
    facts = (
        f"{count_text(int(page.whole['flights']), 'flight')} in {count_text(rows, 'row')}",
        span_text(page.frames["schedule_days"]["date"]),
        f"weather of {page.years}",
    )
    return el(
        "section",
        el("p", "Schedule: flights against the weather of the past", class_="kicker"),
        el("h1", given(page.title)),
        el("p", " · ".join(facts), class_="facts-line"),
        el("p", _headline(page), class_="headline"),
        el("p", _spread(page), class_="lead"),
        el("p", el("b", "Caution. "), CAUTIONS[0], class_="caution"),
        el("div", _look_first(page), _worst_days(page), class_="two"),
        el("h2", "Flights that can never be met at the mass planned"),
        _never(page),
        el("h2", "By season"),
        _seasons(page),
        class_="sheet",
        id="overview",
    )


def _headline(page: SchedulePage) -> Html:
    row = page.whole
    if pd.isna(row["affected"]):
        return join([f"None of the {count_text(int(row['flights']), 'flight')} has figures."])
    known = int(row["flights"]) - int(row["unknown_flights"])
    words = [f"Of {count_text(known, 'flight')}", " with figures" if unknown_of(row) else ""]
    return join([*words, " about ", el("b", flights_text(row["affected"])), " would fall short."])


def _spread(page: SchedulePage) -> list[object]:
    row, told = page.whole, []
    if not pd.isna(row["ci_low"]):
        ends = flights_interval(row["ci_low"], row["ci_high"])
        told.append(
            f"{page.confidence} interval {ends}, with all flights sharing the weather of the same "
            "years. "
        )
    elif not pd.isna(row["affected"]):
        told.append("Too few years for an interval. ")
    if not pd.isna(row["year_low"]):
        worst = "" if pd.isna(row["worst_year"]) else f", {int(row['worst_year'])}"
        told.append(
            f"In the best year of the record {flights_text(row['year_low'])}, in the worst{worst}, "
            f"{flights_text(row['year_high'])}. "
        )
    if unknown_of(row):
        told.append(
            f"{count_text(unknown_of(row), 'flight')} without figures: too little data at that "
            "hour and time of year. They are not among the flights that can be met."
        )
    return [*told]


def _look_first(page: SchedulePage) -> Html:
    rows = [row for row in page.flights if not pd.isna(row["affected"]) and row["affected"] > 0]
    rows = sorted(rows, key=lambda row: -row["affected"])[:MOST_FIRST]
    items = [
        el(
            "li",
            el("h3", given(row["flight"])),
            el(
                "p",
                field_words(page, row),
                f" {row['clock_time']}: about {affected_text(row)}, {row['limiting']}. ",
                remedy(page, row),
            ),
        )
        for row in rows
    ]
    if not items:
        return el("div", el("h2", "Look at first"), el("p", "No flight with figures falls short."))
    return el("div", el("h2", "Look at first"), el("ul", items, class_="glance"))


def _worst_days(page: SchedulePage) -> Html:
    days = page.frames["schedule_days"]
    rows = [
        el(
            "tr",
            el("th", unbroken(str(row["date"])), f" {str(row['weekday'])[:3]}", scope="row"),
            el("td", count_words(row)),
            el("td", flights_text(row["affected"])),
            el("td", share_text(row["share"])),
        )
        for row in days[days["affected"] > 0].head(MOST_DAYS).to_dict("records")
    ]
    if not rows:
        return el("div", el("h2", "Worst days"), el("p", "No day with figures has a flight short."))
    heads = ("Day", "Flights", "Fall short", "Share")
    return el(
        "div", el("h2", "Worst days"), _table("counts days whole", "", heads, rows, "Worst days")
    )


def _never(page: SchedulePage) -> Html:
    rows = [row for row in page.flights if row["never_met"] == "yes"]
    if not rows:
        return el("p", "None: every flight with figures was possible in some hour of the record.")
    items = [
        el(
            "li",
            el("b", given(row["flight"])),
            ": ",
            field_words(page, row),
            ", ",
            flown_words(page, row),
            f", {row['clock_time']}: short in every hour of the record, {row['limiting']}. ",
            remedy(page, row),
        )
        for row in rows[:MOST_FLIGHTS]
    ]
    return el("ul", items, class_="never")


def _seasons(page: SchedulePage) -> Html:
    rows = []
    for row in page.frames["schedule_seasons"].to_dict("records"):
        if not int(row["flights"]):
            continue
        worst = flights_text(row["year_high"])
        if not pd.isna(row["worst_year"]):
            worst += f" ({int(row['worst_year'])})"
        few = "*" if 0 < int(row["n_years"]) < YEARS.settled_interval else ""
        interval = flights_interval(row["ci_low"], row["ci_high"])
        name = given(row["season"]) if row["season"] else "Whole schedule"
        cells = (
            count_words(row),
            flights_text(row["affected"]),
            interval + (few if interval != "none" else ""),
            flights_text(row["year_low"]),
            worst,
        )
        rows.append(el("tr", el("th", name, scope="row"), [el("td", cell) for cell in cells]))
    heads = (
        "Season",
        "Flights",
        "Fall short",
        f"{page.confidence} interval",
        "Best year",
        "Worst year",
    )
    caption = "Flights expected to fall short; a date may lie in several seasons or in none"
    return _table("counts whole", caption, heads, rows, "By season")


def _table(kind: str, caption: str, heads: Sequence[str], rows: Iterable[Html], label: str) -> Html:
    table = el(
        "table",
        el("caption", caption) if caption else None,
        el("thead", el("tr", [el("th", text, scope="col") for text in heads])),
        el("tbody", rows),
        class_=kind,
    )
    return scroll(table, label)


# The flights


def _flights(page: SchedulePage) -> Html:
    shown = page.flights[:MOST_FLIGHTS]
    note = ""
    if len(shown) < len(page.flights):
        note = (
            f"The first {grouped(len(shown))} of {grouped(len(page.flights))} rows; the CSV files "
            "hold all. "
        )
    heads = (
        "Flight",
        "What",
        "When, local clock",
        "Falls short",
        "Limiting",
        f"Mass that holds in {page.holds_in}",
        f"Nearest time below {page.target}",
    )
    key = [
        el("li", el("span", class_=f"swatch b{band}"), f" {label}")
        for band, label in enumerate(band_labels(page.edges))
    ]
    key.append(el("li", el("span", class_="swatch none"), f" {NO_DATA}: not the same as no risk"))
    if any(is_steep(row) for row in page.flights):
        key.append(steep_item())
    return el(
        "section",
        el("p", "Row by row, in the order of the schedule", class_="kicker"),
        el("h2", "The flights"),
        el("ul", key, class_="key"),
        el(
            "p",
            f"{note}Share of the hours of the record that fall short, with its {page.confidence} "
            "interval; beside it the expected number of flights. * interval from fewer than "
            f"{YEARS.settled_interval} years.",
            class_="quiet",
        ),
        _table("plain flights", "", heads, [_flight_row(page, row) for row in shown], "Flights"),
        class_="sheet",
        id="flights",
    )


def _flight_row(page: SchedulePage, row: Mapping[str, Any]) -> Html:
    lines = [
        el("th", given(row["flight"]), scope="row"),
        place_cell(page, row),
        el(
            "td",
            unbroken(row["clock_time"]),
            el("small", when_text(row)),
            el("small", _times(row)),
            note_words(row),
        ),
    ]
    share = row["shortfall"]
    if pd.isna(share):
        cells = [el("td", NO_DATA, class_="none"), el("td", "–"), el("td", "–"), el("td", "–")]
        return el("tr", lines, cells)
    interval = interval_words(float(row["ci_low"]), float(row["ci_high"]), float(row["n_years"]))
    never = el("small", "in every hour of the record") if row["never_met"] == "yes" else None
    cells = [
        el(
            "td",
            el("b", share_text(share)),
            el("small", interval),
            el("small", f"about {affected_text(row)}"),
            never,
            class_=f"b{band_of(float(share), page.edges)}",
        ),
        el("td", row["limiting"] or "–"),
        el("td", *holding_words(row)),
        el("td", *nearest_words(row)),
    ]
    return el("tr", lines, cells)


def _times(row: Mapping[str, Any]) -> str:
    return count_text(int(row["flights"]), "flight")


# Method and cautions

_METHOD = (
    "Each date and clock time is turned into an instant by the rules of the field’s time zone in "
    "that year, daylight saving included, and that into the nearest full hour of local standard "
    "time. A reading that clocks skip is taken as the instant after the change, one that comes "
    "twice as the first.",
    "What stands for a flight are the hours of every year of the record at that hour of the day on "
    "the 31 days around its date. An hour enters when its year counts for its month and hour (at "
    "least 80 % of the month’s days have a value there), whatever the other months of that year "
    "have. A date has figures where the hourly tables have some at its month and hour; otherwise "
    "it is counted as unknown.",
    "A take-off is held against runway, distance to 50 ft, climb and limits; a landing against the "
    "landing distance and limits, at the same mass. Flights at a mass of their own are scored at "
    "that mass.",
    "Expected numbers are sums of shares. Their interval comes from drawing whole years, the same "
    "ones for all flights, and with them the lasting part of the error of estimated air: a hot "
    "year is hot for every flight.",
    "The mass that holds is the largest at which every check of the operation holds in the stated "
    "share of these hours. The nearest time lies at most 12 h away and inside the hours window.",
)  # fmt: skip


def _behind(page: SchedulePage) -> Html:
    return el(
        "section",
        el("p", "Behind the figures", class_="kicker"),
        el("h2", "Method and cautions"),
        el("h3", "Cautions"),
        el("ol", [el("li", text) for text in CAUTIONS], class_="prose"),
        el("h3", "How the figures come about"),
        el("ol", [el("li", text) for text in _METHOD], class_="prose"),
        class_="sheet",
        id="behind",
    )
