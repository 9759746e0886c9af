"""Sheets of the bases side by side and of a schedule flight by flight."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

import pandas as pd

from climarisk.outputs.texts import (
    ICING_SERIOUS,
    NO_DATA,
    STEEP_TAIL,
    aircraft_labels,
    field_labels,
    good_share,
    icing_basis,
    nearest,
    no_time_text,
    operation_text,
    outwards,
    ranges_text,
    schedule_words,
    share_text,
    told_apart,
    whole_down,
    whole_up,
)
from climarisk.outputs.workbook.cells import (
    EDGE,
    MARK,
    SHARE,
    STEEP,
    TENTH,
    WHOLE,
    Book,
    Sheet,
    Shown,
)
from climarisk.outputs.workbook.grids import FEW, NO_CHECK, NO_INTERVAL, NO_PASS, label_width, scope
from climarisk.outputs.workbook.planning import NOT_MET
from climarisk.results import StudyResult
from climarisk.rules import YEARS

BASES, SCHEDULE = "Bases", "Schedule"
FLEET, NO_RANK, NO_CARBURETTOR = "fleet", "no rank", "no carburettor"
#: Days of a schedule that the workbook shows; the CSV file holds them all.
MOST_DAYS = 50
ICING_NOTE = " Carburettor icing: of the daylight hours."
#: What is above zero and rounds to it.
_RARE = '"< 0.1"'
_TENTH = TENTH + ';"\N{MINUS SIGN}"0.0;0'

_Row = Mapping[Any, Any]


class _Cells:
    """What things are called and how the figures of these sheets are shown."""

    def __init__(self, book: Book, result: StudyResult) -> None:
        self.book = book
        self.whole, self.part, self.band = book.numbers(WHOLE), book.parts(), book.banded()
        self.good = book.numbers(SHARE)
        self.name, self.middle = book.style("text"), book.style("middle", shrink=True)
        self.fields = dict(zip([f.id for f in result.fields], field_labels(result), strict=True))
        planes = zip([a.id for a in result.aircraft], aircraft_labels(result), strict=True)
        self.aircraft = {"": FLEET, **dict(planes)}
        self.steep = {f.id for f in result.fields if f.is_steep}

    def field(self, key: Any) -> Shown:
        """The name of a field, told where no figure is a pass; an unknown id stays as it is."""
        key = str(key)
        return self.fields.get(key, key) + (STEEP_TAIL if key in self.steep else ""), self.name

    def plane(self, key: Any) -> Shown:
        """The name of an aircraft, or the word for the fleet."""
        key = "" if pd.isna(key) else str(key)
        return self.aircraft.get(key, key), self.name

    def text(self, value: Any, without: str = NO_DATA) -> Shown:
        """A text, or a word where there is none."""
        if not pd.isna(value) and value != "":
            return str(value), self.name
        return self.book.no_data if without == NO_DATA else (without, self.middle)

    def down(self, value: Any, without: str = NO_DATA) -> Shown:
        """A number rounded down, or a word where there is none."""
        return self._or(math.nan if pd.isna(value) else float(whole_down(float(value))), without)

    def up(self, value: Any, without: str = NO_DATA) -> Shown:
        """A number rounded up, or a word where there is none."""
        return self._or(math.nan if pd.isna(value) else float(whole_up(float(value))), without)

    def share(self, value: Any, without: str = NO_DATA) -> Shown:
        """A share, or a word where there is none."""
        if pd.isna(value):
            return self.book.no_data if without == NO_DATA else (without, self.middle)
        return self.part(float(value))

    def days(self, value: Any) -> Shown:
        """A share of days that are good, rounded down."""
        return self.good(good_share(float(value)))

    def tenth(self, value: Any, without: str = NO_DATA) -> Shown:
        """Flights or hours to the nearest tenth below ten, else whole; or a word without any."""
        if pd.isna(value):
            return self._or(math.nan, without)
        rounded = nearest(float(value))
        if rounded == 0.0 and value > 0.0:
            return self.book.numbers(_RARE)(float(value))
        return self._stepped(rounded)

    def ends(self, low: Any, high: Any, without: str) -> list[Shown]:
        """The ends of an interval of such numbers, outwards, or a word for each."""
        if pd.isna(low) or pd.isna(high):
            return [self._or(math.nan, without)] * 2
        return [self._stepped(end) for end in outwards(float(low), float(high))]

    def _stepped(self, value: float) -> Shown:
        return self.book.numbers(_TENTH if abs(value) < 10.0 else WHOLE)(value)

    def marks(self, field: Any, years: Any) -> str:
        """What stands behind a figure of a field from so many years."""
        few = MARK if 0 < years < YEARS.settled_interval else ""
        return few + (STEEP if str(field) in self.steep else "")

    def _or(self, value: float, without: str) -> Shown:
        if math.isnan(value) and without != NO_DATA:
            return without, self.middle
        return self.whole(value)


def _written(sheet: Sheet, cells: Sequence[Shown], **more: Any) -> None:
    """Write one row, each cell with further properties of its format."""
    for column, (value, shape) in enumerate(cells):
        sheet.cell(column, (value, sheet.book.varied(shape, **more) if more else shape))
    sheet.next_row()


# Bases


def write_bases(book: Book, result: StudyResult) -> None:
    """The sheet of the bases: the ranking for the fleet, each aircraft, and the differences."""
    cells = _Cells(book, result)
    run = int(result.settings["planning"]["consecutive_hours"])
    names = label_width(list(cells.fields.values()))
    others = max(names, label_width(list(cells.aircraft.values())))
    sheet = book.sheet(BASES, [10.0, names, others, 18.0, *[11.0] * 4, 17.0, *[12.0] * 6])
    sheet.line("Bases side by side", "title")
    sheet.line(
        "Hours of a month, mean over the year, in which the fleet and each aircraft could have "
        f"worked at each field; {scope(result)}. The fleet is the mean over its aeroplanes: "
        f"{_fleet(result, cells)}. Usable hours and shares of days are rounded down, intervals "
        f"outwards. A field with a month of {NO_DATA} has no rank.",
    )
    sheet.line(f"{FEW} {NO_PASS}{ICING_NOTE if len(result.icing_monthly) else ''}", "note")
    sure = f"{round(float(result.settings['confidence']) * 100)} % interval"
    sheet.head(
        [
            *("Rank", "Field", "Aircraft", "Usable hours a month", f"{sure}, low", "high"),
            *("Single years, 10th percentile", "90th percentile", "Worst season", "Hours a month"),
            *(f"Days with {run} h in a row", "Within 1 K of saturation", "Within 2.5 K"),
            *(_icing_head(result), "Years, fewest"),
        ]
    )
    head = sheet.row - 1
    for row in result.bases.to_dict("records"):
        fleet = cells.plane(row["aircraft"])[0] == FLEET
        more = {**EDGE, "bold": True} if fleet else {}
        _written(sheet, _base_cells(result, cells, row), **more)
    sheet.finish(head, 3)
    _write_differences(sheet, result, cells, sure)


def _fleet(result: StudyResult, cells: _Cells) -> str:
    fleet = result.settings["planning"]["fleet"]
    counts = {a.id: float(fleet.get(a.id, 0.0)) if fleet else 1.0 for a in result.aircraft}
    told = [f"{n:g} × {cells.plane(key)[0]}" for key, n in counts.items() if n > 0]
    return ", ".join(told) or "none"


def _icing_head(result: StudyResult) -> str:
    """The head of the icing shares, with what they rest on."""
    frame, head = result.icing_monthly, f"Icing {ICING_SERIOUS}"
    if frame.empty:
        return head
    return f"{head} ({icing_basis(str(frame['method'].iloc[0]), str(frame['verified'].iloc[0]))})"


def _base_cells(result: StudyResult, cells: _Cells, row: _Row) -> list[Shown]:
    known = not pd.isna(row["usable_hours_month"])
    marks = cells.marks(row["field"], row["n_years"])
    few = NO_INTERVAL if known else NO_DATA
    usable = cells.book.marked(cells.down(row["usable_hours_month"]), marks)
    planes = [a for a in result.aircraft if cells.plane(row["aircraft"])[0] == FLEET
              or a.id == row["aircraft"]]  # fmt: skip
    carburettor = any(profile.carburettor for profile in planes)
    return [
        cells.down(row["rank"], NO_RANK),
        cells.field(row["field"]),
        cells.plane(row["aircraft"]),
        usable,
        cells.down(row["ci_low"], few),
        cells.up(row["ci_high"], few),
        cells.down(row["year_p10"], few),
        cells.down(row["year_p90"], few),
        cells.text(row["worst_season"]),
        cells.down(row["worst_season_hours_month"]),
        cells.days(row["days_with_run"]),
        cells.share(row["share_1k"]),
        cells.share(row["share_2_5k"]),
        cells.share(row["icing_serious"], NO_DATA if carburettor else NO_CARBURETTOR),
        cells.down(row["n_years"]),
    ]


def _write_differences(sheet: Sheet, result: StudyResult, cells: _Cells, sure: str) -> None:
    sheet.next_row()
    sheet.line("Differences", "heading")
    sheet.line(
        "Usable hours a month that the first field has more than the second. Both are taken "
        "through the same resampled years; an interval that holds zero does not tell them apart."
    )
    sheet.head(
        ["Told apart", "First", "Second", "Aircraft", "Hours a month", f"{sure}, low", "high"]
    )
    for row in result.base_differences.to_dict("records"):
        none = pd.isna(row["ci_low"])
        apart = "unknown" if none else "yes" if told_apart(row["ci_low"], row["ci_high"]) else "no"
        plane = cells.plane(row["aircraft"])[0]
        told = [
            (apart, cells.middle),
            cells.field(row["first"]),
            cells.field(row["second"]),
            (plane, cells.book.style("text", shrink=True)),
            cells.tenth(row["difference_hours_month"]),
            *cells.ends(row["ci_low"], row["ci_high"], NO_INTERVAL),
        ]
        _written(sheet, told, **({"bold": True} if plane == FLEET else {}))
    if result.base_differences.empty:
        _written(sheet, [("none", cells.name)])


# Schedule


def write_schedule(book: Book, result: StudyResult) -> None:
    """The sheet of the schedule; none for a study without one."""
    flights, seasons, days = (
        result.schedule_flights,
        result.schedule_seasons,
        result.schedule_days,
    )
    if flights is None or seasons is None or days is None:
        return
    cells = _Cells(book, result)
    widths = [24.0, label_width([*cells.fields.values()]), label_width([*cells.aircraft.values()])]
    widths += [19.0, 24.0, 11.0, 11.0, 11.0, 10.0, *[11.0] * 5, 19.0]
    widths += [*[11.0] * 6, 26.0]
    sheet = book.sheet(SCHEDULE, widths)
    sheet.line("Schedule", "title")
    asked = result.settings["planning"]
    settings = result.settings
    words = schedule_words(flights, seasons, float(settings["confidence"]))
    years = f"{settings['first_year']}-{settings['last_year']}"
    sheet.line(" ".join([*words, f"Dates of {asked['year']}, weather of the record: {years}."]))
    sheet.line(
        "Intervals of the flights expected to fall short are rounded outwards; they come from "
        "resampling whole years, because the flights of a season share their weather.",
        "note",
    )
    sure = f"{round(float(result.settings['confidence']) * 100)} % interval"
    _write_seasons(sheet, cells, seasons, sure)
    _write_days(sheet, cells, days)
    _write_flights(sheet, cells, flights, result, sure)


def _write_seasons(sheet: Sheet, cells: _Cells, seasons: pd.DataFrame, sure: str) -> None:
    sheet.next_row()
    sheet.line("By season", "heading")
    heads = ["Season", "Flights", "Without figures", "Expected to fall short", f"{sure}, low"]
    sheet.head([*heads, "high", "Best year", "Worst year", "Which", "Years"])
    for row in seasons[seasons["flights"] > 0].to_dict("records"):
        few = NO_INTERVAL if not pd.isna(row["affected"]) else NO_DATA
        told = [
            cells.text(row["season"] or "whole schedule"),
            cells.down(row["flights"]),
            cells.down(row["unknown_flights"]),
            cells.tenth(row["affected"]),
            *cells.ends(row["ci_low"], row["ci_high"], few),
            cells.tenth(row["year_low"], few),
            cells.tenth(row["year_high"], few),
            ("none" if pd.isna(row["worst_year"]) else str(int(row["worst_year"])), cells.middle),
            cells.down(row["n_years"]),
        ]
        _written(sheet, told, **({"bold": True} if not row["season"] else {}))


def _write_days(sheet: Sheet, cells: _Cells, days: pd.DataFrame) -> None:
    worst = days[days["affected"] > 0]
    worst = worst.sort_values("affected", ascending=False, kind="stable").head(MOST_DAYS)
    sheet.next_row()
    sheet.line("Worst days", "heading")
    if worst.empty:
        sheet.line("No day has a flight that is expected to fall short.")
        return
    heads = ["Day", "Weekday", "Flights", "Without figures", "Expected to fall short", "Share"]
    sheet.head(heads)
    for row in worst.to_dict("records"):
        told = [
            cells.text(row["date"]),
            cells.text(row["weekday"]),
            cells.down(row["flights"]),
            cells.down(row["unknown_flights"]),
            cells.tenth(row["affected"]),
            cells.band(float(row["share"])),
        ]
        _written(sheet, told)
    if len(worst) < len(days):
        sheet.line(
            f"Shown are {len(worst)} of {len(days)} days; schedule_days.csv holds all.", "note"
        )


def worst_first(flights: pd.DataFrame) -> pd.DataFrame:
    """The flights, the one that falls short most often first, those without figures last."""
    return flights.sort_values(["shortfall", "affected"], ascending=False, kind="stable")


def _write_flights(
    sheet: Sheet, cells: _Cells, flights: pd.DataFrame, result: StudyResult, sure: str
) -> None:
    asked = result.settings["planning"]
    target, often = share_text(float(asked["target"])), share_text(float(asked["holds_in"]))
    sheet.next_row()
    sheet.line("Flight by flight, the worst first", "heading")
    sheet.line(
        f"Nearest time: the nearest clock time at which the share stays below {target}. Mass that "
        f"holds: in {often} of the hours, rounded down; it is not a permitted mass. Never met: it "
        f"fell short in every hour of the record. {FEW} {NO_PASS}",
        "note",
    )
    sheet.legend("Bands of the share", 4)
    sheet.head(
        [
            *("Flight", "Field", "Aircraft", "Operation", "When", "Clock time", "Hours, LST"),
            *("Mass, kg", "Flights", "Without figures", "Shortfall share", f"{sure}, low", "high"),
            *("Expected to fall short", "Limiting check", "Mass that holds, kg", "Useful load, kg"),
            *("Nearest time", "Its share", "Never met", "Years that count", "Note"),
        ]
    )
    head = sheet.row - 1
    for row in worst_first(flights).to_dict("records"):
        _written(sheet, _flight_cells(cells, row))
    if sheet.row > head + 1:
        sheet.page.autofilter(head, 0, sheet.row - 1, len(sheet.widths) - 1)
    sheet.page.freeze_panes(1, 1)
    sheet.page.repeat_rows(head)


def _flight_cells(cells: _Cells, row: _Row) -> list[Shown]:
    known = not pd.isna(row["shortfall"])
    marks = cells.marks(row["field"], row["n_years"])
    few = NO_INTERVAL if known else NO_DATA
    load = NOT_MET if row["outcome"] == NOT_MET else NO_DATA
    share = cells.band(float(row["shortfall"]))
    hours = ranges_text(str(row["hours"])) if isinstance(row["hours"], str) else ""
    never = row["never_met"] == "yes"
    told = str(row["never_met"]) if known else ""
    none = no_time_text(row["note"]) if known else NO_DATA
    return [
        cells.text(row["flight"]),
        cells.field(row["field"]),
        cells.plane(row["aircraft"]),
        cells.text(operation_text(str(row["operation"]))),
        cells.text(row["when"]),
        cells.text(row["clock_time"]),
        cells.text(hours),
        cells.down(row["mass_kg"]),
        cells.down(row["flights"]),
        cells.down(row["unknown_flights"]),
        cells.book.marked(share, marks),
        cells.share(row["ci_low"], few),
        cells.share(row["ci_high"], few),
        cells.tenth(row["affected"]),
        cells.text(row["limiting"], NO_CHECK if known else NO_DATA),
        cells.down(row["mass_that_holds_kg"], load),
        cells.down(row["useful_load_kg"], load),
        cells.text(row["nearest_time"], none),
        cells.share(row["nearest_shortfall"], none),
        (told, cells.book.style("middle", bold=never)) if told else cells.book.no_data,
        cells.down(row["n_years"]),
        cells.text(row["note"], "\N{EN DASH}"),
    ]
