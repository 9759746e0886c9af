"""Sheets of the planning answers by month: weights, windows, carburettor icing, engine power."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence

import numpy as np
import pandas as pd

from climarisk.aircraft import AircraftProfile
from climarisk.icing import LABELS, bands, serious, serious_in_cruise, verified
from climarisk.outputs.texts import (
    ICING_SERIOUS,
    LOAD_LABELS,
    MONTHS,
    NO_DATA,
    aircraft_labels,
    engine_groups,
    field_labels,
    good_share,
    icing_basis,
    load_class,
    ranges_text,
    share_text,
    whole_down,
    whole_up,
)
from climarisk.outputs.workbook.cells import (
    EDGE,
    PERCENT,
    SHARE,
    TENTH,
    WHOLE,
    Book,
    Sheet,
    Show,
    Shown,
    grid,
    lines_of,
)
from climarisk.outputs.workbook.grids import (
    FEW,
    FEW_AIR,
    GAPS,
    MONTH_NUMBERS,
    NO_INTERVAL,
    NO_PASS,
    QUIETER,
    Block,
    Periods,
    few_years,
    label_width,
    mapped,
    period_widths,
    periods_of,
    rounded_down,
    scope,
    shown_cells,
    steep_marks,
)
from climarisk.results import StudyResult
from climarisk.rules import YEARS

NOT_MET, MAXIMUM = LOAD_LABELS[-1], "maximum mass"
NO_HOUR, NOT_COMPUTED = "none", "not computed"
WEIGHTS, WINDOWS, ICING, POWER = "Weights", "Windows", "Carburettor icing", "Engine power"
_FIGURE_WIDTH = 28.0
#: Points of a line of small letters, and letters of them in a column of a month.
_SMALL_LINE, _SMALL_LETTERS = 11.0, 14.0

#: What stands in the first column, and the figures that belong to it.
_Group = tuple[str, Sequence[Block]]


# Weights


def write_weights(book: Book, result: StudyResult) -> None:
    """The sheet of the masses that hold, by aircraft, field, month and season."""
    asked = result.settings["planning"]
    groups = [
        (label, _weight_blocks(book, result, profile))
        for label, profile in zip(aircraft_labels(result), result.aircraft, strict=True)
    ]
    seasons = _weight_periods(result, "").seasons
    sheet = _open(book, WEIGHTS, result, aircraft_labels(result), seasons)
    sheet.line("Weight that holds", "title")
    often = share_text(float(asked["holds_in"]))
    sheet.line(
        f"The largest mass at which every check, landing included, held in {often} of the hours, "
        f"and what it leaves above the empty mass; kilograms, rounded down; {scope(result)}. "
        f"“{NOT_MET}”: at no tabulated mass did the checks hold that often. Landing is reckoned "
        "at the take-off mass. It is not a permitted mass."
    )
    told = [FEW, NO_PASS, *([GAPS] if seasons else [])]
    sheet.line(
        " ".join([*told, "Colours: useful load as a share of that at maximum mass."]), "note"
    )
    sheet.legend("Share of the useful load", 3, LOAD_LABELS)
    _write_groups(sheet, result, "Aircraft", seasons, groups)


def _weight_periods(result: StudyResult, aircraft: str) -> Periods:
    monthly, seasonal = result.weights_monthly, result.weights_seasonal
    return periods_of(
        result,
        monthly[monthly["aircraft"] == aircraft],
        seasonal[seasonal["aircraft"] == aircraft],
        seasonal,
    )


def _weight_blocks(book: Book, result: StudyResult, profile: AircraftProfile) -> list[Block]:
    table = _weight_periods(result, profile.id)
    outcome, load = table.values("outcome"), table.values("useful_load_kg")
    mass, years = table.values("mass_kg"), table.values("n_years")
    few = few_years(years, YEARS.settled_interval)
    marks = few + steep_marks(result.fields) + table.gaps(table.values("never_met"))
    full = profile.maximum_kg - profile.empty_kg
    steps = np.array(
        [
            [load_class(float(kg) / full, str(word)) for kg, word in zip(*row, strict=True)]
            for row in zip(load, outcome, strict=True)
        ],
        int,
    ).reshape(load.shape)
    show = _loads(book)
    sure = _sure(result)
    ends = [_ends(table.values(f"ci_{end}_kg"), outcome, years) for end in ("low", "high")]
    whole, never = book.numbers(WHOLE), table.values("never_met")
    return [
        Block("Useful load, kg", _with_steps(load, steps), show, marks=marks),
        Block("Mass, kg", _with_steps(mass, steps), show, marks=marks),
        Block(f"Mass, {sure}, low", mapped(_whole_down, ends[0]), whole, marks=marks),
        Block(f"Mass, {sure}, high", mapped(_whole_up, ends[1]), whole, marks=marks),
        Block("Hours in which no mass holds", never, book.numbers(SHARE), marks=marks),
        Block("Years that count", years, whole, marks=few),
    ]


def _with_steps(values: np.ndarray, steps: np.ndarray) -> np.ndarray:
    """Masses each with its class."""
    pairs = np.empty(values.shape, object)
    for at, step in np.ndenumerate(steps):
        pairs[at] = (_whole_down(values.item(at)), int(step))
    return pairs


def _loads(book: Book) -> Show:
    """How to show a mass with its class: words where no mass would do."""
    count = len(LOAD_LABELS)
    plain = [book.step(step, count, num_format=WHOLE) for step in range(count - 1)]
    unmet = NOT_MET, book.step(count - 1, count, "key")

    def show(pair: tuple[float, int]) -> Shown:
        mass, step = pair
        if step < 0:
            return book.no_data
        return unmet if step == count - 1 else (float(mass), plain[step])

    return show


def _ends(values: np.ndarray, outcome: np.ndarray, years: np.ndarray) -> np.ndarray:
    """Ends of an interval, in words where there is none and where no mass would do."""
    known = np.array([bool(w == w and w) for w in outcome.ravel()], bool).reshape(values.shape)
    few = years.astype(float) < YEARS.interval
    words = np.where(few, NO_INTERVAL, NOT_MET)
    return np.where(known & pd.isna(values), words, values).astype(object)


# Windows


def write_windows(book: Book, result: StudyResult) -> None:
    """The sheet of the hours at which a field works, by aircraft and month."""
    asked = result.settings["planning"]
    target, run = share_text(float(asked["target"])), int(asked["consecutive_hours"])
    groups = [
        (label, _window_blocks(book, result, profile.id, run))
        for label, profile in zip(aircraft_labels(result), result.aircraft, strict=True)
    ]
    sheet = _open(book, WINDOWS, result, aircraft_labels(result), ())
    sheet.line("Usable windows", "title")
    sheet.line(
        f"Hours of the day whose shortfall share stays below {target}, {scope(result)}: by local "
        f"standard time (LST), and by the civil clock of {asked['year']}; a slash stands between "
        "the days before and after the clocks change. Usable daylight hours are those of civil "
        "daylight that do not fall short, whatever the hours window; days with "
        f"{run} hours in a row are days of the window. Both are rounded down."
    )
    sheet.line(
        f"{FEW} {NO_PASS} “{NO_HOUR}”: no hour of the day with figures stays below the target.",
        "note",
    )
    _write_groups(sheet, result, "Aircraft", (), groups)


def _window_blocks(book: Book, result: StudyResult, aircraft: str, run: int) -> list[Block]:
    frame = result.windows_monthly[result.windows_monthly["aircraft"] == aircraft]
    values = _months(result, frame)
    years = values("n_years")
    few = few_years(years, YEARS.settled_interval)
    marks = few + steep_marks(result.fields)
    hours, clock = _hours_told(frame), _clock_told(frame)
    sure, words = _sure(result), book.numbers(WHOLE)
    usable = values("usable_hours")
    ends = {
        end: np.where(pd.isna(ends) & ~pd.isna(usable), NO_INTERVAL, ends).astype(object)
        for end, ends in ((end, values(f"usable_{end}")) for end in ("low", "high"))
    }
    return [
        _told(book, "Hours of the day, LST", _months(result, hours)("told")),
        _told(book, "The same, civil clock", _months(result, clock)("told")),
        Block("Usable daylight hours", mapped(_whole_down, usable), words, marks=marks),
        Block(f"{sure}, low", mapped(_whole_down, ends["low"]), words, marks=marks),
        Block(f"{sure}, high", mapped(_whole_up, ends["high"]), words, marks=marks),
        Block("Daylight hours", mapped(_whole_down, values("daylight_hours")), words),
        Block(
            f"Days with {run} h in a row",
            mapped(good_share, values("days_with_run")),
            book.numbers(SHARE),
            marks=marks,
        ),
        Block("Years that count", years, words, marks=few),
    ]


def _told(book: Book, name: str, texts: np.ndarray) -> Block:
    """A figure in words, its rows as high as the longest of them needs."""
    known = [text for text in texts.ravel() if isinstance(text, str)]
    lines = max([1, *(lines_of(text, _SMALL_LETTERS) for text in known)])

    def show(value: str | float) -> Shown:
        return book.words(value if isinstance(value, str) else None)

    return Block(name, texts, show, lines * _SMALL_LINE + 5.0)


def _hours_told(frame: pd.DataFrame) -> pd.DataFrame:
    """The usable hours of the day in words, those without figures told beside them."""
    told: list[str | float] = []
    for row in frame.itertuples():
        if pd.isna(row.n_clock_hours):
            told.append(math.nan)
            continue
        unknown = 0 if pd.isna(row.hours_without_figures) else int(row.hours_without_figures)
        rest = f" ({unknown} h {NO_DATA})" if unknown else ""
        told.append((ranges_text(str(row.hours)) if row.n_clock_hours else NO_HOUR) + rest)
    return frame[["field", "month"]].assign(told=pd.Series(told, frame.index, object))


def _clock_told(frame: pd.DataFrame) -> pd.DataFrame:
    """The usable hours by the civil clock."""
    told = [
        math.nan
        if pd.isna(row.n_clock_hours)
        else " / ".join(ranges_text(text) for text in str(row.clock_hours).split(" / "))
        if row.n_clock_hours
        else NO_HOUR
        for row in frame.itertuples()
    ]
    return frame[["field", "month"]].assign(told=pd.Series(told, frame.index, object))


# Carburettor icing


def write_icing(book: Book, result: StudyResult) -> None:
    """The sheet of the carburettor icing; none for a study without a carburettor."""
    if not any(profile.carburettor for profile in result.aircraft):
        return
    frame = result.icing_monthly
    method = str(result.settings["planning"]["carburettor_icing"])
    checked = str(frame["verified"].iloc[0]) if len(frame) else verified(method)
    basis = icing_basis(method, checked)
    axes = _months(result, frame.drop_duplicates(["field", "month"]))
    years, few = axes("n_years"), few_years(axes("n_years"), YEARS.percentiles)
    share = book.numbers(SHARE)

    def block(name: str, names: Sequence[str]) -> Block:
        part = frame[frame["band"].isin(names)].groupby(["field", "month"], sort=False)["share"]
        told = _months(result, part.sum(min_count=1).reset_index())("share")
        return Block(name, told, share, marks=few)

    worst = serious_in_cruise(method)
    blocks = [
        block(_capital(ICING_SERIOUS), worst),
        block("Serious at least in descent", serious(method)),
        *(block(_capital(LABELS[name]), [name]) for name in bands(method) if name not in worst),
        Block("Years that count", years, book.numbers(WHOLE), marks=few),
    ]
    sheet = _open(book, ICING, result, [basis], (), figure=38.0)
    sheet.line("Carburettor icing", "title")
    sheet.line(
        "Share of the daylight hours whose surface air lies in each band of temperature and dew "
        f"point, for aircraft with a carburettor; {basis}, {_period(result)}. The second "
        "figure adds up all bands that are serious at some power, a descent included. Engines "
        "differ; it is no forecast of ice."
    )
    if basis.endswith("not verified"):
        sheet.line(
            "The zones of the chart are a reconstruction from memory, each corner uncertain by 2 "
            "to 3 K, and were not checked against the official chart.",
            "caution",
        )
    sheet.line(FEW_AIR, "note")
    _write_groups(sheet, result, "Basis", (), [(basis, blocks)])


# Engine power


def write_power(book: Book, result: StudyResult) -> None:
    """The sheet of the power that the air leaves and of what humidity takes."""
    engines = engine_groups(result)
    methods = result.power_monthly.drop_duplicates("aircraft").set_index("aircraft")["method"]
    sheet = _open(book, POWER, result, [*engines], ())
    sheet.line("Engine power", "title")
    sheet.line(
        "Power at full throttle in per cent of that in standard air at sea level, rounded down, "
        f"and what humidity alone takes, rounded up; {scope(result)}. Power: by the density of "
        "the dry air; “optimistic” is the more favourable of that and SAE J1349. Mixture, "
        "ignition and the condition of the engine are not in it."
    )
    for engine, profiles in engines.items():
        names = dict(zip([a.id for a in result.aircraft], aircraft_labels(result), strict=True))
        told = ", ".join(names[profile.id] for profile in profiles)
        sheet.line(f"{told}. {_capital(str(methods.get(profiles[0].id, NO_DATA)))}.", first=1,
                   label=_capital(engine))  # fmt: skip
    sheet.line(FEW_AIR, "note")
    groups = [
        (_capital(engine), _power_blocks(book, result, profiles[0].id))
        for engine, profiles in engines.items()
    ]
    _write_groups(sheet, result, "Engine", (), groups)


def _power_blocks(book: Book, result: StudyResult, aircraft: str) -> list[Block]:
    frame = result.power_monthly[result.power_monthly["aircraft"] == aircraft]
    values = _months(result, frame)
    years = values("n_years")
    few = few_years(years, YEARS.percentiles)
    known = ~pd.isna(values("humidity_ft_p50"))
    parts, tenths, feet = book.numbers(PERCENT), book.numbers(TENTH), book.numbers(WHOLE)

    def block(name: str, column: str, show: Show, change: Callable[[float], float]) -> Block:
        told = values(column)
        told = np.where(pd.isna(told) & known, NOT_COMPUTED, told).astype(object)
        return Block(name, mapped(change, told), show, marks=few)

    def down(share: float) -> float:
        return rounded_down(share, 0.01) if not isinstance(share, str) else share

    return [
        block("Power, P50: the median", "power_p50", parts, down),
        block("Power, P10: 1 hour in 10 is below", "power_p10", parts, down),
        block("Power, P90: 1 hour in 10 is above", "power_p90", parts, down),
        block("Power, P50, optimistic", "optimistic_p50", parts, down),
        block("Humidity, % of power, P50", "humidity_power_pct_p50", tenths, _up(0.1)),
        block("Humidity, % of power, P90", "humidity_power_pct_p90", tenths, _up(0.1)),
        block("Humidity, ft, P50", "humidity_ft_p50", feet, _up(10.0)),
        block("Humidity, ft, P90", "humidity_ft_p90", feet, _up(10.0)),
        Block("Years that count", years, feet, marks=few),
    ]


# What these sheets share


def _months(result: StudyResult, frame: pd.DataFrame) -> Callable[[str], np.ndarray]:
    """Reads a column of a frame, shape (n_fields, 12)."""
    fields = ("field", [field.id for field in result.fields])
    return lambda column: grid(frame, column, fields, ("month", MONTH_NUMBERS))


def _sure(result: StudyResult) -> str:
    return f"{round(float(result.settings['confidence']) * 100)} % interval"


def _period(result: StudyResult) -> str:
    return f"{result.settings['first_year']}-{result.settings['last_year']}"


def _capital(text: str) -> str:
    return text[:1].upper() + text[1:]


def _whole_down(value: float) -> float:
    return value if isinstance(value, str) or math.isnan(value) else float(whole_down(value))


def _whole_up(value: float) -> float:
    return value if isinstance(value, str) or math.isnan(value) else float(whole_up(value))


def _up(step: float) -> Callable[[float], float]:
    """Rounds up to a whole number of steps, so that no loss looks smaller than it is."""
    return lambda v: v if isinstance(v, str) else -rounded_down(-v, step)


def _open(
    book: Book,
    name: str,
    result: StudyResult,
    first: Sequence[str],
    seasons: Sequence[str],
    figure: float = _FIGURE_WIDTH,
) -> Sheet:
    widths = [label_width(first), figure, label_width(field_labels(result))]
    return book.sheet(name, [*widths, *period_widths(seasons)])


def _write_groups(
    sheet: Sheet, result: StudyResult, head: str, seasons: Sequence[str], groups: Sequence[_Group]
) -> None:
    """The headings, and all figures of all groups below each other as one table to filter."""
    sheet.head([head, "Figure", "Field", *MONTHS, *seasons])
    top, book, labels = sheet.row - 1, sheet.book, field_labels(result)
    text, quiet = book.style("text"), book.style("text", **QUIETER)
    for name, blocks in groups:
        for block in blocks:
            for at, label in enumerate(labels):
                cells: list[Shown] = [(name, quiet), (block.name, quiet), (label, text)]
                cells += shown_cells(book, block, at)
                if at == 0:
                    cells[0], cells[1] = (name, text), (block.name, book.varied(text, bold=True))
                    cells = [(value, book.varied(shape, **EDGE)) for value, shape in cells]
                for column, shown in enumerate(cells):
                    sheet.cell(column, shown)
                if block.height is not None:
                    sheet.page.set_row(sheet.row, block.height)
                sheet.next_row()
    sheet.finish(top, 3)
