"""Tables of the report by month and season; they run on over pages with their headings."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from climarisk.outputs.colours import MOST_EDGES
from climarisk.outputs.report.data import N_MONTHS, PERCENTILES, Figures
from climarisk.outputs.report.words import (
    Html,
    count_text,
    el,
    elevation_text,
    error_text,
    given,
    number,
    own_share_text,
    scroll,
)
from climarisk.outputs.report.worst import coverage_text, interval_words, worst_of
from climarisk.outputs.texts import (
    MONTH_NAMES,
    MONTHS,
    NO_DATA,
    PRESSURE_TOLD_FT,
    aircraft_labels,
    altitude_text,
    band_of,
    field_labels,
    hours_text,
    share_text,
    short_months,
)
from climarisk.results import StudyResult
from climarisk.rules import YEARS

#: Seasons that find room beside the months, and in a table of their own.
_BESIDE_MONTHS, _ALONE = 5, 12
#: A table of so many fields stays on one page.
_WHOLE = 16
#: With fewer seasons than this their columns are too narrow for a long heading above them.
_FEW_SEASONS = 3
#: In place of an interval in a narrow cell, and beside a season that lacks a month.
NO_INTERVAL_MARK, GAP_MARK = "\N{EN DASH}", "\N{DAGGER}"
#: Beside the name of a field with a runway that needs a site-specific procedure.
STEEP_MARK = "steep"
NO_CELL = el("td", NO_DATA, class_="none")


@dataclass(frozen=True)
class Sheet:
    """What every table of a report needs.

    Parameters
    ----------
    result : StudyResult
    figures : Figures
    """

    result: StudyResult
    figures: Figures

    @cached_property
    def fields(self) -> list[str]:
        """What each field is called, no two alike."""
        return field_labels(self.result)

    @cached_property
    def aircraft(self) -> list[str]:
        """What each aircraft is called, no two alike."""
        return aircraft_labels(self.result)

    @property
    def edges(self) -> Sequence[float]:
        """Edges of the bands, as many as there are colours for."""
        return [float(edge) for edge in self.result.settings["bands"]][:MOST_EDGES]

    @property
    def confidence(self) -> str:
        """The confidence of the intervals, as ``90 %``."""
        return f"{round(float(self.result.settings['confidence']) * 100, 2):g} %"


def field_head(sheet: Sheet, place: int, *lines: object, slope: bool = True) -> Html:
    """The head of a field's row: its number, its name and what else is to be said.

    Parameters
    ----------
    sheet : Sheet
    place : int
    *lines : str or Html
    slope : bool
        Mark a runway that needs a site-specific procedure.
    """
    field = sheet.result.fields[place]
    rest = [(" ", el("small", line)) for line in lines]
    if slope and field.is_steep:
        rest.append((" ", el("small", STEEP_MARK, class_="mark")))
    n = el("span", str(sheet.figures.numbers[place]), class_="no")
    label = el("span", n, " ", given(sheet.fields[place]), class_="label")
    return el("th", label, rest, scope="row", class_="place")


def sure_text(own_station: float, stations: int, error_ft: float, pressure_ft: float) -> str:
    """How sure the air of a field is, in a few words.

    Parameters
    ----------
    own_station : float
        Share of its hours from a station on the spot, 0-1.
    stations : int
        Stations that the others are estimated from.
    error_ft, pressure_ft : float
        One standard deviation of the density altitude from the estimated temperature and from
        the pressure; an estimate is told with the root sum of squares of both.
    """
    if own_station <= 0.0 and not stations:
        return "no station"
    estimated = f"estimated {error_text(math.hypot(error_ft, pressure_ft))}"
    if own_station <= 0.0:
        return estimated
    told = f", pressure {error_text(pressure_ft)}" if pressure_ft >= PRESSURE_TOLD_FT else ""
    if own_station >= 1.0:
        return f"air measured{told}" if told else "own station"
    own = f"{'air measured' if told else 'own station'} {own_share_text(own_station)} of hours"
    return f"{own}, else {estimated}{told}"


def sure_texts(result: StudyResult) -> dict[str, str]:
    """How sure the air of each field is, by its id."""
    return {
        str(row["field"]): sure_text(
            float(row["own_station"]),
            int(row["stations"]),
            float(row["transfer_error_ft"]),
            float(row["pressure_error_ft"]),
        )
        for row in result.estimates.to_dict("records")
    }


def _column_groups(seasons: int) -> list[list[int]]:
    """Periods of each table: the months with the first seasons, then the other seasons."""
    first = [*range(N_MONTHS + min(seasons, _BESIDE_MONTHS))]
    rest = [*range(len(first), N_MONTHS + seasons)]
    return [first, *(rest[at : at + _ALONE] for at in range(0, len(rest), _ALONE))]


def period_tables(
    sheet: Sheet,
    order: Sequence[int],
    cell: Callable[[int, int], Html],
    heads: tuple[object, object, object],
    last: tuple[str, Callable[[int], Html]] | None = None,
    seasons: bool = True,
) -> list[Html]:
    """Tables of fields by months and seasons.

    Parameters
    ----------
    sheet : Sheet
    order : sequence of int
        Places of the fields, a row each.
    cell : callable
        The cell of a field's place and a period's.
    heads : tuple
        Caption, heading over the months, heading over the seasons.
    last : tuple of str and callable, optional
        Heading and cell of a last column of the first table.
    seasons : bool
        Whether there are columns for the seasons too; a steep runway is marked only then.
    """
    tables = []
    for periods in _column_groups(len(sheet.figures.seasons) if seasons else 0):
        end = last if periods[0] == 0 else None
        rows = [
            el(
                "tr",
                field_head(sheet, f, slope=last is not None and seasons),
                [cell(f, p) for p in periods],
                end and end[1](f),
            )
            for f in order
        ]
        caption = heads[0] if periods[0] == 0 else (heads[0], ", further seasons")
        table = el(
            "table",
            el("caption", caption),
            _columns(periods, end is not None),
            _head(sheet, periods, heads[1:], end and end[0]),
            el("tbody", rows),
            class_=" ".join(_kinds(len(order), len(periods), end is not None)),
        )
        tables.append(scroll(table, "Table by month and season"))
    return tables


def _kinds(rows: int, columns: int, last: bool) -> list[str]:
    """The classes of a table: on one page where it is short, smaller where it is crowded."""
    kinds = ["periods"]
    if rows <= _WHOLE:
        kinds.append("whole")
    if columns >= N_MONTHS + _BESIDE_MONTHS and not last:
        kinds.append("tight")
    return kinds


def _columns(periods: Sequence[int], last: bool) -> Html:
    """The widths of the columns."""
    beside = sum(p >= N_MONTHS for p in periods)
    # Without a last column the seasons are as wide as the months.
    season = ("season wide" if beside < _FEW_SEASONS else "season") if last else "even"
    kinds = ["month" if p < N_MONTHS else season for p in periods]
    names = ["field", *kinds, *(["last"] if last else [])]
    return el("colgroup", [el("col", class_=name) for name in names])


def _head(
    sheet: Sheet, periods: Sequence[int], groups: tuple[object, ...], last: str | None
) -> Html:
    months = [p for p in periods if p < N_MONTHS]
    seasons = [sheet.figures.seasons[p - N_MONTHS] for p in periods if p >= N_MONTHS]
    top = [el("th", "Field", scope="col", rowspan="2", class_="name")]
    if months:
        top.append(el("th", groups[0], scope="colgroup", colspan=len(months)))
    if seasons:
        top.append(el("th", groups[1], scope="colgroup", colspan=len(seasons), class_="first"))
    if last:
        top.append(el("th", last, scope="col", rowspan="2", class_="end"))
    heads = [el("th", MONTHS[m], scope="col", abbr=MONTH_NAMES[m]) for m in months]
    heads += [
        el("th", given(name), scope="col", class_="season first" if n == 0 else "season")
        for n, name in enumerate(seasons)
    ]
    return el("thead", el("tr", top), el("tr", heads))


# Shortfall


def few_years(figures: Figures) -> bool:
    """Whether any interval rests on few years."""
    few = figures.risk["n_years"] < YEARS.settled_interval
    return bool((few & ~np.isnan(figures.risk["ci_low"])).any())


def missing_intervals(figures: Figures) -> bool:
    """Whether any season with a share has no interval."""
    share, low = (figures.risk[name][:, :, N_MONTHS:] for name in ("shortfall", "ci_low"))
    return bool((np.isnan(low) & ~np.isnan(share)).any())


def gaps(figures: Figures, *values: np.ndarray) -> bool:
    """Whether any season has a figure although one of its months has none.

    Parameters
    ----------
    *values : ndarray, shape (..., 12 + n_seasons)
    """
    periods = range(N_MONTHS, N_MONTHS + len(figures.seasons))
    rows = (row for table in values for row in table.reshape(-1, table.shape[-1]))
    return any(figures.lacks_month(row, period) for row in rows for period in periods)


def _season_interval(figures: Figures, at: tuple[int, int, int]) -> str:
    """The interval below the share of a season; a dash without one."""
    low, high, years = (float(figures.risk[c][at]) for c in ("ci_low", "ci_high", "n_years"))
    if math.isnan(low) or math.isnan(high):
        return NO_INTERVAL_MARK
    return interval_words(low, high, years).replace(" %", "")


def shortfall_tables(sheet: Sheet, aircraft: int, order: Sequence[int]) -> list[Html]:
    """Shares of an aircraft by month and season, coloured by band, the number in each cell."""
    figures = sheet.figures
    shares = figures.risk["shortfall"][:, aircraft].tolist()
    usable = figures.risk["usable_hours"][:, aircraft].tolist()

    def cell(field: int, period: int) -> Html:
        share = shares[field][period]
        if math.isnan(share):
            return NO_CELL
        below = (
            hours_text(usable[field][period])
            if period < N_MONTHS
            else _season_interval(figures, (field, aircraft, period))
        )
        gap = gap_mark(figures, figures.risk["shortfall"][field, aircraft], period)
        kind = f"b{band_of(share, sheet.edges)}" + (" first" if period == N_MONTHS else "")
        return el("td", number(share), gap, " ", el("small", below), class_=kind)

    def last(field: int) -> Html:
        return _worst_cell(sheet, aircraft, field)

    few = len(figures.seasons) < _FEW_SEASONS
    heads = (
        "Share of hours that fall short, fields ranked by their worst month; "
        f"below a season’s share its {sheet.confidence} interval",
        (given(sheet.aircraft[aircraft]), ": share short in %, usable hours"),
        "Season" if few else f"Season: share in %, {sheet.confidence} interval",
    )
    return period_tables(sheet, order, cell, heads, ("Worst month, limited by", last))


def _worst_cell(sheet: Sheet, aircraft: int, field: int) -> Html:
    figures = sheet.figures
    worst = worst_of(figures, field, aircraft)
    if worst is None:
        return el("td", NO_DATA, class_="none end")
    covered = coverage_text([worst.coverage])
    if worst.share == 0.0:
        known = int((~np.isnan(figures.shares[field, aircraft])).sum())
        where = "" if known == N_MONTHS else f" in {count_text(known, 'known month')}"
        return el("td", f"none falls short{where} ", el("small", covered), class_="end")
    what = ", ".join(text for text in (" or ".join(worst.limits), worst.outside) if text)
    small = [el("small", text) for text in (worst.interval, covered, what) if text]
    first = f"{short_months(worst.months)} {share_text(worst.share)} "
    return el("td", first, [(part, " ") for part in small], class_="end")


def gap_mark(figures: Figures, values: np.ndarray, period: int) -> Html | None:
    """The mark of a season that has a figure although one of its months has none."""
    return el("span", GAP_MARK, class_="gap") if figures.lacks_month(values, period) else None


# Air


def altitude_tables(sheet: Sheet, order: Sequence[int]) -> list[Html]:
    """Density altitude by month and season: 90th percentile above, median below."""
    high, middle = (sheet.figures.altitude[p].tolist() for p in ("p90", "p50"))

    def cell(field: int, period: int) -> Html:
        if math.isnan(high[field][period]):
            return NO_CELL
        upper, lower = (altitude_text(v[field][period]).removesuffix(" ft") for v in (high, middle))
        gap = gap_mark(sheet.figures, sheet.figures.altitude["p90"][field], period)
        return el("td", upper, gap, " ", el("small", lower), class_=edge_class(period))

    heads = (
        "Density altitude, ft: 90th percentile, below it the median",
        "Month: exceeded in 1 hour of 10; median",
        "Season",
    )
    return period_tables(sheet, order, cell, heads)


def humidity_tables(sheet: Sheet, order: Sequence[int]) -> list[Html]:
    """Relative humidity by month and season: median above, 10th and 90th percentile below."""
    low, middle, high = (sheet.figures.humidity[p].tolist() for p in PERCENTILES)

    def cell(field: int, period: int) -> Html:
        if math.isnan(middle[field][period]):
            return NO_CELL
        text, *ends = (number(v[field][period] / 100.0) for v in (middle, low, high))
        gap = gap_mark(sheet.figures, sheet.figures.humidity["p50"][field], period)
        return el("td", text, gap, " ", el("small", "-".join(ends)), class_=edge_class(period))

    heads = (
        "Relative humidity, %: median, below it the 10th and 90th percentile",
        "Month: median; 1 hour in 10 is below, 1 in 10 above",
        "Season",
    )
    return period_tables(sheet, order, cell, heads)


def saturation_tables(sheet: Sheet, order: Sequence[int]) -> list[Html]:
    """Shares of hours near saturation by month and season."""
    near, nearest = (sheet.figures.saturation[s].tolist() for s in ("share_2_5k", "share_1k"))

    def cell(field: int, period: int) -> Html:
        if math.isnan(near[field][period]):
            return NO_CELL
        below = el("small", number(nearest[field][period]))
        gap = gap_mark(sheet.figures, sheet.figures.saturation["share_2_5k"][field], period)
        return el("td", number(near[field][period]), gap, " ", below, class_=edge_class(period))

    heads = (
        "Near saturation, % of hours: within 2.5 K of the dew point, below it within 1 K",
        "Month: within 2.5 K; 1 K",
        "Season",
    )
    return period_tables(sheet, order, cell, heads)


def edge_class(period: int) -> str | None:
    """The class of the first season's cells, which stand apart from the months."""
    return "first" if period == N_MONTHS else None


# Overview


def overview_tables(sheet: Sheet, per_table: int, strip: Callable[[int, int], Html], head: Html):
    """Fields by aircraft: worst month and the picture of the year, so many aircraft to a table.

    Parameters
    ----------
    sheet : Sheet
    per_table : int
    strip : callable
        The picture of a field's place and an aircraft's.
    head : Html
        The months over the pictures.
    """
    aircraft = range(len(sheet.result.aircraft))
    parts = [aircraft[at : at + per_table] for at in range(0, len(aircraft), per_table)]
    return [_overview_table(sheet, part, strip, head, n) for n, part in enumerate(parts)]


def _overview_table(
    sheet: Sheet, aircraft: Sequence[int], strip: Callable[[int, int], Html], head: Html, n: int
) -> Html:
    result, sure = sheet.result, sure_texts(sheet.result)
    heads = [el("th", "Field", scope="col", class_="field")]
    heads += [
        el("th", given(sheet.aircraft[a]), head, scope="col", class_="plane") for a in aircraft
    ]
    heads.append(el("th", "How sure is the air", scope="col", class_="sure"))
    rows = []
    for f in sheet.figures.order.tolist():
        cells = [_overview_cell(sheet, f, a, strip) for a in aircraft]
        field = result.fields[f]
        known = el("td", sure.get(field.id, NO_DATA), _years(sheet.figures, f), class_="sure")
        rows.append(el("tr", field_head(sheet, f, elevation_text(field.elevation_m)), cells, known))
    caption = "Worst month and the year’s picture: fields by aircraft, worst first"
    table = el(
        "table",
        el("caption", caption if n == 0 else f"{caption}, further aircraft"),
        el("thead", el("tr", heads)),
        el("tbody", rows),
        class_="overview",
    )
    return scroll(table, "Table of fields by aircraft")


def _years(figures: Figures, field: int) -> list[object]:
    """The fewest and the most years with any hour that enters a month, and a low coverage."""
    known = ~np.isnan(figures.shares[field])
    if not known.any():
        return []
    years, coverage = (figures.risk[c][field, :, :N_MONTHS][known] for c in ("n_years", "coverage"))
    least, most = int(years.min()), int(years.max())
    text = count_text(most, "year") if least == most else f"{least}-{most} years"
    parts = [part for part in (text, coverage_text(coverage.tolist())) if part]
    return [" ", el("small", ", ".join(parts))]


def _overview_cell(
    sheet: Sheet, field: int, aircraft: int, strip: Callable[[int, int], Html]
) -> Html:
    worst = worst_of(sheet.figures, field, aircraft)
    if worst is None:
        return el("td", NO_DATA, class_="none")
    some = worst.share > 0.0
    gone = int(np.isnan(sheet.figures.shares[field, aircraft]).sum())
    head = el(
        "span",
        f"{short_months(worst.months)} " if some else "",
        el("b", number(worst.share), " %"),
        class_=f"worst b{band_of(worst.share, sheet.edges)}",
    )
    missing = f"{count_text(gone, 'month')} no data" if gone else None
    small = el("small", ", ".join(t for t in (worst.interval if some else None, missing) if t))
    return el("td", head, " ", small, strip(field, aircraft))
