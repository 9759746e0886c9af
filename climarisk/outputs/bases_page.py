"""Bases side by side as one print-ready page of HTML without a script, in the report's style."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

from climarisk.bases import ALL_PAIRS
from climarisk.outputs.bases_tables import (
    View,
    aircraft_table,
    fleet_text,
    icing_words,
    interval_words,
    month_table,
    pair_table,
    pairs_of,
    percent,
    ranking_table,
    scale_of,
)
from climarisk.outputs.report.key import steep_item
from climarisk.outputs.report.style import paper_page, report_text, style
from climarisk.outputs.report.words import Html, count_text, el, given
from climarisk.outputs.texts import (
    CAUTIONS,
    ICING_SERIOUS,
    NO_DATA,
    band_labels,
    gap_interval,
    gap_text,
    grouped,
    hours_text,
    told_apart,
    window_text,
)
from climarisk.results import StudyResult
from climarisk.rules import YEARS

#: Aircraft that find room beside each other.
_BESIDE = 5
#: Of more ranked fields than this the page shows the best and the next against each other only.
_ALL_SHOWN = 6


def render_bases(result: StudyResult) -> str:
    """The page of a study's bases, the same text for the same result.

    Parameters
    ----------
    result : StudyResult
        ``bases`` and ``base_differences`` filled, ``settings["planning"]`` and the monthly risk.

    Returns
    -------
    str
        A complete HTML document that needs no other file and no network and holds no script.
    """
    view = View(result)
    look = style(result.title, len(view.edges) + 1) + report_text("bases.css")
    sections = [_overview(view), _parts(view), _differences(view), _method(view)]
    return paper_page(f"Bases: {result.title}", look, sections)


def difference_sentence(first: str, second: str, row: Mapping[str, Any], confidence: float) -> str:
    """A difference between two bases in a sentence.

    Parameters
    ----------
    first, second : str
        What the better and the other one are called.
    row : mapping
        ``difference_hours_month``, ``ci_low`` and ``ci_high``, hours a month.
    confidence : float

    Returns
    -------
    str
        Such as ``A beats B by 21 h a month (90 %: 12 to 30).``; whether they are told apart goes by
        the unrounded interval.
    """
    gap = f"{gap_text(row['difference_hours_month'])} a month"
    low, high = row["ci_low"], row["ci_high"]
    if math.isnan(low) or math.isnan(high):
        return f"{first} has {gap} more than {second}; too few years for an interval."
    told = f"({percent(confidence)}: {gap_interval(low, high)})"
    if told_apart(low, high):
        return f"{first} beats {second} by {gap} {told}."
    return f"{first} and {second} are not told apart: {gap} {told}."


def _overview(view: View) -> Html:
    result, settings = view.result, view.result.settings
    facts = [
        f"Weather of {settings['first_year']} to {settings['last_year']}",
        f" · hours: {window_text(settings['window'])}",
        f" · {count_text(len(result.fields), 'field')} · fleet: ",
        *fleet_text(view),
    ]
    run = int(view.planning["consecutive_hours"])
    return el(
        "section",
        el("p", "Bases side by side: usable hours for a fleet", class_="kicker"),
        el("h1", given(result.title)),
        el("p", facts, class_="facts-line"),
        el("p", el("b", "Caution. "), CAUTIONS[0], class_="caution"),
        el(
            "p",
            "At which field could this fleet have worked most hours of a month in the weather of "
            "the record, and how sure is that? Usable hours are hours of the window that do not "
            "fall short, the mean over the twelve months and over the aeroplanes of the fleet.",
            class_="lead",
        ),
        el("h2", "At a glance"),
        el("ul", _glance(view), class_="glance"),
        el("h2", "Ranking for the fleet"),
        ranking_table(view, run),
        _ranking_key(view, run),
        class_="sheet",
        id="ranking",
    )


def _glance(view: View) -> list[Html]:
    ranked = view.ranked()
    if not ranked:
        return [el("li", el("p", "No field has a figure in every month: there is no ranking."))]
    items = [el("li", el("h3", "The fleet"), el("p", _fleet_sentence(view, ranked)))]
    for aircraft, name in view.planes.items():
        known = [f for f in view.order if view.known(f, aircraft)]
        if known:
            items.append(el("li", el("h3", given(name)), el("p", _best_sentence(view, aircraft))))
    return items


def _fleet_sentence(view: View, ranked: Sequence[str]) -> list[object]:
    parts: list[object] = list(_best_sentence(view, ""))
    pairs = pairs_of(view)
    for first, second in zip(ranked[:3], ranked[1:3], strict=False):
        row = pairs[first, second][""]
        better, other = (view.told(row[side]) for side in ("first", "second"))
        parts += [" ", difference_sentence(better, other, row, view.confidence)]
    return parts


def _best_sentence(view: View, aircraft: str) -> list[object]:
    figures = {
        f: view.rows[f, aircraft]["usable_hours_month"]
        for f in view.order
        if view.known(f, aircraft)
    }
    most = max(figures.values())
    best = [f for f, hours in figures.items() if hours == most]
    row = view.rows[best[0], aircraft]
    who: list[object] = [*view.called(best[0])]
    if len(best) > 1:
        who.append(f" and {count_text(len(best) - 1, 'other field')}")
    have = " has" if len(best) == 1 else " have"
    return [*who, f"{have} the most: {hours_text(most)} a month ({interval_words(row)})."]


def _ranking_key(view: View, run: int) -> Html:
    low, high = (grouped(end) for end in scale_of(view))
    years = YEARS.settled_interval
    few = any(r["n_years"] < years and not math.isnan(r["ci_low"]) for r in view.rows.values())
    items = [
        f"Scale: {low} to {high} h; mark: the figure; dark: its interval; pale: single years, one "
        "in ten is below and one above.",
        f"Days with {run} h in a row: share of the days with {run} usable hours one after the "
        "other, inside the window.",
        *([f"* interval from fewer than {years} years."] if few else []),
        f"A field with a month of {NO_DATA} has no rank: {NO_DATA} is not the same as no risk.",
        *_icing_words(view),
    ]
    steep = [steep_item()] if any(view.steep(field) for field in view.order) else []
    return el("ul", [el("li", text) for text in items], steep, class_="key")


def _icing_words(view: View) -> list[str]:
    """How far the icing figures can be trusted, where there are any."""
    basis = icing_words(view)
    text = "Carburettor icing: share of the daylight hours in which it is"
    return [f"{text} {ICING_SERIOUS}; {basis}."] if basis else []


def _parts(view: View) -> Html | None:
    """Usable hours by month for the fleet, and by aircraft for the year."""
    if not view.order:
        return None
    planes = list(view.planes)
    tables = [
        aircraft_table(view, planes[at : at + _BESIDE], at > 0)
        for at in range(0, len(planes), _BESIDE)
    ]
    run = int(view.planning["consecutive_hours"])
    beside = f"Beside the hours their {percent(view.confidence)} interval, below them the worst "
    return el(
        "section",
        el("p", "By month and by aircraft", class_="kicker"),
        el("h2", "Usable hours of each month"),
        el("ul", _band_items(view), class_="key"),
        month_table(view),
        el("h2", "Usable hours a month for each aircraft"),
        el("p", f"{beside}season and the share of days with {run} h in a row.", class_="quiet"),
        tables,
        class_="sheet",
        id="parts",
    )


def _band_items(view: View) -> list[Html]:
    """What the colours of the months mean."""
    items = [
        el("li", el("span", class_=f"swatch b{band}"), f" {label} of the hours fall short")
        for band, label in enumerate(band_labels(view.edges))
    ]
    none = el("span", class_="swatch none")
    return [*items, el("li", none, f" {NO_DATA}: not the same as no risk")]


def _differences(view: View) -> Html | None:
    ranked, pairs = view.ranked(), pairs_of(view)
    if len(ranked) < 2:
        return None
    if len(ranked) > _ALL_SHOWN:
        place = {field: n for n, field in enumerate(ranked)}
        pairs = {
            (a, b): rows
            for (a, b), rows in pairs.items()
            if a == ranked[0] or place[b] == place[a] + 1
        }
    columns = ["", *view.planes]
    tables = [
        pair_table(view, pairs, columns[at : at + _BESIDE + 1], at > 0)
        for at in range(0, len(columns), _BESIDE + 1)
    ]
    return el(
        "section",
        el("p", "Differences", class_="kicker"),
        el("h2", "How much better, and how sure"),
        el("p", _pair_words(view, len(ranked)), class_="quiet"),
        tables,
        class_="sheet",
        id="differences",
    )


def _pair_words(view: View, ranked: int) -> str:
    text = (
        "Hours a month that the first field has more than the second, with the "
        f"{percent(view.confidence)} interval below. Both fields are taken through the same "
        "resampled years, so that weather they share does not blur the difference; the part of "
        "the error of estimated air that stays with a place is not in it. A year for which only "
        "one of the two has data counts for that one alone. An interval that holds zero does not "
        "tell the two apart."
    )
    if ranked <= _ALL_SHOWN:
        return text
    rest = " The other pairs are in base_differences.csv." if ranked <= ALL_PAIRS else ""
    return f"{text} Shown: each field against the best and against the next in rank.{rest}"


def _method(view: View) -> Html:
    run = int(view.planning["consecutive_hours"])
    settings = view.result.settings
    confidence = percent(view.confidence)
    texts = [
        "Usable hours of a month are the hours that the hours window offers by the calendar "
        f"({window_text(settings['window'])}) times the share of known hours that do not fall "
        "short. The figure of a field is the mean over the twelve months; a field with a month "
        "without figures has none. The figure of the fleet is the mean over its aeroplanes.",
        f"Intervals ({confidence}) come from resampling whole years, with the error of estimated "
        f"air, and need {YEARS.interval} years in every month. Single years: 10th and 90th "
        "percentile of the years with figures in every month.",
        "The worst season is the one with the fewest usable hours for its length, told for a "
        "twelfth of a year.",
        f"A day has {run} h in a row when that many hours of local standard time, one after the "
        "other inside the window, do not fall short. An hour without data breaks the row; a day "
        f"on which no {run} hours in a row are known counts neither way.",
        "Near saturation: hours of the window whose temperature is at most 1 K, 2.5 K above the "
        "dew point, where fog and low cloud become likely; wind and cloud base are not known.",
        *_icing_words(view),
        "Usable hours and shares of days are rounded down, differences to the nearest, intervals "
        "outwards. bases.csv holds the unrounded figures.",
    ]
    return el(
        "section",
        el("p", "Behind the figures", class_="kicker"),
        el("h2", "Method and cautions"),
        el("h3", "Cautions"),
        el("ol", [el("li", text) for text in CAUTIONS], class_="prose"),
        el("h3", "How the figures come about"),
        el("ol", [el("li", text) for text in texts], class_="prose"),
        el("h3", "Data and credits"),
        el("ul", [el("li", given(line)) for line in view.result.attributions], class_="prose"),
        class_="sheet",
        id="method",
    )
