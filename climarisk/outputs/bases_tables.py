"""Tables of the page of bases: ranking, aircraft, months, differences."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
import pandas as pd

from climarisk.bases import fleet_weights
from climarisk.outputs.colours import MOST_EDGES
from climarisk.outputs.report.tables import STEEP_MARK
from climarisk.outputs.report.words import (
    Html,
    count_text,
    el,
    given,
    isolated,
    number,
    scroll,
)
from climarisk.outputs.texts import (
    ICING_SERIOUS,
    MONTH_NAMES,
    MONTHS,
    NO_DATA,
    STEEP_TAIL,
    aircraft_labels,
    band_of,
    field_labels,
    gap_interval,
    gap_text,
    good_share_text,
    grouped,
    hours_interval,
    hours_text,
    icing_basis,
    told_apart,
    whole_down,
    whole_up,
)
from climarisk.results import StudyResult
from climarisk.rules import YEARS

#: Ends of the drawn scale, in units of the picture, and its height.
_LEFT, _RIGHT, _HIGH = 3.0, 117.0, 14.0
#: In place of a rank.
NO_RANK = "\N{EN DASH}"
MINUS = "\N{MINUS SIGN}"
#: In place of an interval whose ends are the figure.
NO_SPREAD = "no spread"
_NO_CELL = el("td", NO_DATA, class_="none")
#: Differences by pair of fields in the order of the ranking, then by aircraft.
Pairs = Mapping[tuple[str, str], Mapping[str, Mapping[str, Any]]]


@dataclass(frozen=True)
class View:
    """The frames of a result by what the page asks of them."""

    result: StudyResult

    @cached_property
    def rows(self) -> dict[tuple[str, str], dict[str, Any]]:
        """The rows of the bases by field and aircraft."""
        table = self.result.bases
        return {(str(r["field"]), str(r["aircraft"])): r for r in table.to_dict("records")}

    @cached_property
    def order(self) -> list[str]:
        """Ids of the fields, the best first."""
        return list(dict.fromkeys(str(f) for f in self.result.bases["field"]))

    @cached_property
    def names(self) -> dict[str, str]:
        """What the fields are called, by id."""
        return dict(zip([f.id for f in self.result.fields], field_labels(self.result), strict=True))

    @cached_property
    def planes(self) -> dict[str, str]:
        """What the aircraft are called, by id."""
        ids = [a.id for a in self.result.aircraft]
        return dict(zip(ids, aircraft_labels(self.result), strict=True))

    @property
    def planning(self) -> Mapping[str, Any]:
        """What the planning answers ask for."""
        return self.result.settings["planning"]

    @property
    def edges(self) -> list[float]:
        """Edges of the bands, as many as there are colours for."""
        return [float(edge) for edge in self.result.settings["bands"]][:MOST_EDGES]

    @property
    def confidence(self) -> float:
        """Of the intervals, 0-1."""
        return float(self.result.settings["confidence"])

    @cached_property
    def monthly(self) -> dict[str, tuple[np.ndarray, np.ndarray]]:
        """Hours offered and usable by the fleet in each month, by field."""
        weights = dict(
            zip(self.planes, fleet_weights(self.planning["fleet"], list(self.planes)), strict=True)
        )
        months = {f: (np.full(12, np.nan), np.zeros(12)) for f in self.names}
        for row in self.result.risk_monthly.itertuples():
            offered, usable = months[str(row.field)]
            part, place = weights[str(row.aircraft)], int(row.month) - 1
            offered[place] = row.hours_offered
            if part > 0.0 and row.hours_offered > 0.0:
                usable[place] += part * row.usable_hours
        return months

    def steep(self, field: str) -> bool:
        """Whether no figure of a field is a pass."""
        return bool(self.rows[field, ""]["steep"] == "yes")

    def called(self, field: str) -> tuple[Html, str]:
        """The name of a field, steepness told."""
        return given(self.names[field]), STEEP_TAIL if self.steep(field) else ""

    def told(self, field: str) -> str:
        """The same as plain text."""
        return isolated(self.names[field]) + (STEEP_TAIL if self.steep(field) else "")

    def ranked(self) -> list[str]:
        """Ids of the fields with a figure for the fleet, the best first."""
        return [f for f in self.order if self.known(f, "")]

    def known(self, field: str, aircraft: str) -> bool:
        """Whether a field has a figure for an aircraft, or for the fleet."""
        return bool(np.isfinite(self.rows[field, aircraft]["usable_hours_month"]))


def percent(share: float) -> str:
    """A share in per cent, with the digits that it has."""
    return f"{round(share * 100, 2):g} %"


def interval_words(row: Mapping[str, Any]) -> str:
    """An interval in whole hours, with a star where it rests on few years."""
    if math.isnan(row["ci_low"]) or math.isnan(row["ci_high"]):
        return f"no interval, {count_text(int(row['n_years']), 'year')}"
    star = "*" if row["n_years"] < YEARS.settled_interval else ""
    ends = hours_interval(row["ci_low"], row["ci_high"])
    # Always unusable, or always usable: the interval is the figure.
    return (ends if "-" in ends else NO_SPREAD) + star


def _gaps(view: View, field: str) -> str:
    """Which months of a field have no figure."""
    offered, usable = view.monthly[field]
    gone = np.flatnonzero(~np.isfinite(np.where(offered == 0.0, 0.0, usable))).tolist()
    if len(gone) in (0, 12):
        return NO_DATA
    return f"{NO_DATA} in {', '.join(MONTHS[m] for m in gone)}"


def fleet_text(view: View) -> list[object]:
    """How many of each aircraft fly."""
    fleet = view.planning["fleet"]
    parts: list[object] = []
    for aircraft, name in view.planes.items():
        count = fleet.get(aircraft, 0.0) if fleet else 1.0
        if count > 0.0:
            parts += [", " if parts else "", f"{count:g} × ", given(name)]
    return parts


def _head(view: View, field: str) -> Html:
    rank = view.rows[field, ""]["rank"]
    shown = NO_RANK if pd.isna(rank) else str(int(rank))
    name = given(view.names[field])
    label = el("span", el("span", shown, class_="no"), " ", name, class_="label")
    mark = [" ", el("small", STEEP_MARK, class_="mark")] if view.steep(field) else []
    return el("th", label, mark, scope="row", class_="place")


def icing_words(view: View) -> str:
    """What the shares of carburettor icing rest on; empty where there are none."""
    frame = view.result.icing_monthly
    if frame.empty or not any(a.carburettor for a in view.result.aircraft):
        return ""
    return icing_basis(str(frame["method"].iloc[0]), str(frame["verified"].iloc[0]))


def ranking_table(view: View, run: int) -> Html:
    """The fields by rank with what else counts for the fleet."""
    basis = icing_words(view)
    heads = (
        ("Rank, field", "field"),
        (f"Usable hours a month, {percent(view.confidence)} interval", "wide"),
        ("Single years, 10th to 90th percentile", None),
        ("Worst season, hours a month", None),
        (f"Days with {run} h in a row", None),
        ("Hours within 1 K; 2.5 K of dew point", None),
        (f"Icing {ICING_SERIOUS}" + (f" ({basis})" if basis else ""), None),
    )
    scale = scale_of(view)
    rows = [el("tr", _ranking_row(view, field, scale)) for field in view.order]
    table = el(
        "table",
        el("caption", "Fields by usable hours of the fleet, the best first"),
        el("thead", el("tr", [el("th", text, scope="col", class_=kind) for text, kind in heads])),
        el("tbody", rows),
        class_="overview bases",
    )
    return scroll(table, "Ranking of the fields")


def _ranking_row(view: View, field: str, scale: tuple[int, int]) -> list[object]:
    row = view.rows[field, ""]
    head = _head(view, field)
    if view.known(field, ""):
        years = (row["year_p10"], row["year_p90"])
        spread = "too few years" if math.isnan(years[0]) else hours_interval(*years)
        cells = [
            el(
                "td",
                el("b", hours_text(row["usable_hours_month"])),
                f" {interval_words(row)}",
                _range(row, scale),
            ),
            el("td", spread),
            _season_cell(row),
        ]
    else:
        cells = [el("td", _gaps(view, field), colspan=3, class_="none")]
    shares = [el("td", _days(row)) if row["days_with_run"] >= 0.0 else _NO_CELL]
    near = [row["share_1k"], row["share_2_5k"]]
    known = not any(math.isnan(share) for share in near)
    shares.append(el("td", "; ".join(_share(s) for s in near)) if known else _NO_CELL)
    shares.append(_icing_cell(view, row))
    return [head, cells, shares]


def _season_cell(row: Mapping[str, Any]) -> Html:
    if not row["worst_season"]:
        return _NO_CELL
    return el("td", given(row["worst_season"]), " ", hours_text(row["worst_season_hours_month"]))


def _days(row: Mapping[str, Any]) -> str:
    """Share of days with a run of usable hours, rounded down."""
    return good_share_text(float(row["days_with_run"]))


def _share(share: float) -> str:
    return f"{number(share)} %"


def _share_cell(share: float) -> Html:
    return _NO_CELL if math.isnan(share) else el("td", _share(share))


def _icing_cell(view: View, row: Mapping[str, Any]) -> Html:
    if not any(a.carburettor for a in view.result.aircraft):
        return el("td", "no carburettor", class_="shut")
    return _share_cell(row["icing_serious"])


def scale_of(view: View) -> tuple[int, int]:
    """The ends of the drawn scale in whole hours, which no figure or spread leaves."""
    rows = [view.rows[f, ""] for f in view.order]
    names = ("usable_hours_month", "ci_low", "ci_high", "year_p10", "year_p90")
    known = [row[name] for row in rows for name in names if not math.isnan(row[name])]
    low, high = whole_down(min(known, default=0.0)), whole_up(max(known, default=1.0))
    return low, max(high, low + 1)


def _range(row: Mapping[str, Any], scale: tuple[int, int]) -> Html:
    """Single years as a pale bar, the interval as a dark one, the figure as a mark on a scale."""

    def at(hours: float) -> float:
        return _LEFT + (_RIGHT - _LEFT) * (hours - scale[0]) / (scale[1] - scale[0])

    def bar(low: float, high: float, height: float, kind: str) -> Html | None:
        if math.isnan(low) or math.isnan(high):
            return None
        start, end = at(low), max(at(high), at(low) + 0.8)
        y = (_HIGH - height) / 2
        size = {"x": f"{start:.1f}", "y": f"{y:.1f}", "width": f"{end - start:.1f}"}
        return el("rect", **size, height=f"{height:g}", class_=kind)

    middle = at(row["usable_hours_month"])
    return el(
        "svg",
        el("path", d=f"M{_LEFT:g},{_HIGH / 2:g}H{_RIGHT:g}", class_="rule"),
        bar(row["year_p10"], row["year_p90"], 8.0, "in-years"),
        bar(row["ci_low"], row["ci_high"], 3.0, "in-interval"),
        el("rect", x=f"{middle - 0.8:.1f}", y="1", width="1.6", height="12", class_="figure"),
        viewBox=f"0 0 120 {_HIGH:g}",
        class_="range",
        aria_hidden="true",
    )


def aircraft_table(view: View, planes: Sequence[str], further: bool) -> Html:
    """The fields by rank with the figures of some aircraft beside each other."""
    heads = [el("th", "Rank, field", scope="col", class_="field")]
    heads += [el("th", given(view.planes[a]), scope="col") for a in planes]
    rows = [
        el("tr", _head(view, field), [_aircraft_cell(view, field, a) for a in planes])
        for field in view.order
    ]
    caption = "Fields in the order of the fleet’s ranking"
    table = el(
        "table",
        el("caption", f"{caption}, further aircraft" if further else caption),
        el("thead", el("tr", heads)),
        el("tbody", rows),
        class_="overview bases",
    )
    return scroll(table, "Table of fields by aircraft")


def _aircraft_cell(view: View, field: str, aircraft: str) -> Html:
    row = view.rows[field, aircraft]
    if not view.known(field, aircraft):
        return el("td", _gaps(view, field), class_="none")
    season: list[Html] = []
    if row["worst_season"]:
        worst = hours_text(row["worst_season_hours_month"])
        season = [el("small", given(row["worst_season"]), f" {worst}")]
    return el(
        "td",
        el("b", hours_text(row["usable_hours_month"])),
        f" {interval_words(row)}",
        season,
        el("small", f"days: {_days(row)}"),
    )


def month_table(view: View) -> Html:
    """Usable hours of the fleet by field and month, coloured by the share that falls short."""
    heads = [el("th", "Rank, field", scope="col", class_="name")]
    heads += [
        el("th", short, scope="col", abbr=name)
        for short, name in zip(MONTHS, MONTH_NAMES, strict=True)
    ]
    heads.append(el("th", "Mean", scope="col"))
    rows = [
        el("tr", _head(view, f), _month_cells(view, f), _mean_cell(view, f)) for f in view.order
    ]
    columns = [el("col", class_="field"), *(el("col") for _ in range(13))]
    table = el(
        "table",
        el("caption", "Usable hours of the fleet by month"),
        el("colgroup", columns),
        el("thead", el("tr", heads)),
        el("tbody", rows),
        class_="periods heat",
    )
    return scroll(table, "Table of fields by month")


def _month_cells(view: View, field: str) -> list[Html]:
    cells = []
    for offered, usable in zip(*(v.tolist() for v in view.monthly[field]), strict=True):
        if offered == 0.0:
            cells.append(el("td", "0", " ", el("small", "no hours"), class_="shut"))
        elif math.isnan(offered) or math.isnan(usable):
            cells.append(_NO_CELL)
        else:
            band = band_of(max(0.0, 1.0 - usable / offered), view.edges)
            below = el("small", f"of {grouped(whole_down(offered))}")
            cells.append(el("td", grouped(whole_down(usable)), " ", below, class_=f"b{band}"))
    return cells


def _mean_cell(view: View, field: str) -> Html:
    if not view.known(field, ""):
        return _NO_CELL
    return el("td", el("b", grouped(whole_down(view.rows[field, ""]["usable_hours_month"]))))


def pairs_of(view: View) -> dict[tuple[str, str], dict[str, dict[str, Any]]]:
    """The differences by pair in the order of the ranking, then by aircraft."""
    place = {field: n for n, field in enumerate(view.order)}
    pairs: dict[tuple[str, str], dict[str, dict[str, Any]]] = {}
    for row in view.result.base_differences.to_dict("records"):
        one, other = sorted((str(row["first"]), str(row["second"])), key=place.__getitem__)
        pairs.setdefault((one, other), {})[str(row["aircraft"])] = row
    return pairs


def pair_table(
    view: View,
    pairs: Pairs,
    columns: Sequence[str],
    further: bool,
) -> Html:
    """Pairs of fields with the difference for the fleet and for each aircraft."""
    heads = [el("th", "First field against the second", scope="col")]
    heads += [el("th", given(view.planes[a]) if a else "Fleet", scope="col") for a in columns]
    rows = []
    for (one, other), by_aircraft in pairs.items():
        names = [*view.called(one), " against ", *view.called(other)]
        cells = [_pair_cell(one, by_aircraft.get(a)) for a in columns]
        rows.append(el("tr", el("th", names, scope="row"), cells))
    caption = "Usable hours a month, difference"
    table = el(
        "table",
        el("caption", f"{caption}, further aircraft" if further else caption),
        el("thead", el("tr", heads)),
        el("tbody", rows),
        class_="pairs",
    )
    return scroll(table, "Table of differences")


def _pair_cell(one: str, row: Mapping[str, Any] | None) -> Html:
    if row is None:
        return _NO_CELL
    sign, hours = 1.0 if row["first"] == one else -1.0, row["difference_hours_month"]
    shown = gap_text(hours)
    if hours > 0.0:
        mark = "+" if sign > 0.0 else MINUS
        shown = f"up to {mark}0.1 h" if shown.startswith("<") else f"{mark}{shown}"
    if math.isnan(row["ci_low"]):
        return el("td", f"{shown} ", el("small", "no interval"))
    apart = told_apart(row["ci_low"], row["ci_high"])
    ends = gap_interval(*sorted((sign * row["ci_low"], sign * row["ci_high"])))
    told = [ends if " to " in ends else NO_SPREAD, *([] if apart else ["not told apart"])]
    value = (el("b", shown), " ") if apart else f"{shown} "
    return el("td", value, el("small", ", ".join(told)), class_=None if apart else "open")
