"""What a run says at its end: worst cells, planning answers, missing data, findings, files.

Plain text in lines of 80 columns.  Names from files are cleaned and cut here; what else a
console may take for a command is for the caller to escape.
"""

from __future__ import annotations

import math
import textwrap
import unicodedata
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import pandas as pd

from climarisk.findings import Finding
from climarisk.outputs.texts import (
    LOAD_LABELS,
    MONTH_NAMES,
    STEEP_TAIL,
    band_labels,
    gap_text,
    grouped,
    hours_interval,
    interval_text,
    schedule_words,
    share_text,
    short_months,
    unique_labels,
    whole_down,
    window_text,
    worst_months,
)
from climarisk.results import StudyResult
from climarisk.rules import YEARS

WIDTH = 80
#: Fields shown of each aircraft by the number of aircraft, one among more.
_WORST_FIELDS = {1: 3, 2: 3, 3: 2}
_MOST_AIRCRAFT = 5
#: A name is never cut below this width.
_LEAST_NAME = 12
_ELLIPSIS = "\N{HORIZONTAL ELLIPSIS}"
_WORDS = {"reject": "rejection", "caution": "caution", "note": "note"}
#: What the files made for people are.
_FOR_PEOPLE = {
    "report.html": "to print",
    "bases.html": "bases",
    "schedule.html": "flights",
    "tables.xlsx": "workbook",
}
_MAP = "map.html"


def summary_lines(result: StudyResult, folder: Path, files: Sequence[Path]) -> list[str]:
    """A short summary of a run for a terminal.

    Parameters
    ----------
    result : StudyResult
    folder : Path
        Where the files were written.
    files : sequence of Path
        The files written.

    Returns
    -------
    list of str
        About 24 lines of at most 80 columns; only the path of the folder is never cut.
    """
    names = _names(result)
    settings = result.settings
    about = (
        f": {_counted(len(result.fields), 'field')} x {len(result.aircraft)} aircraft, "
        f"{settings['first_year']}-{settings['last_year']}, {window_text(settings['window'])}"
    )
    sure = f"{settings['confidence'] * 100:.4g}"
    return [
        cut(result.title, max(_LEAST_NAME, WIDTH - columns(about))) + about,
        f"Share of hours that fall short ({sure} % interval), worst month of the worst fields:",
        *_aircraft_lines(result, names),
        *_steep_lines(result),
        *_base_lines(result, names),
        *_weight_lines(result, names),
        *_schedule_lines(
            result.schedule_flights, result.schedule_seasons, float(settings["confidence"])
        ),
        *_data_lines(result, names),
        *_finding_lines(result.findings),
        *_file_lines(folder, files),
    ]


# Names


@dataclass(frozen=True)
class _Label:
    """What something is called: its name, and its id behind it where names look the same."""

    name: str
    tail: str

    def within(self, width: int, more: str = "") -> str:
        """The label with what follows it; of what is too wide only the name is cut."""
        end = (f" {cut(self.tail, WIDTH // 2)}" if self.tail else "") + more
        return cut(self.name, max(_LEAST_NAME, width - columns(end))) + end


@dataclass(frozen=True)
class _Names:
    """The labels of the fields and the aircraft, by id."""

    fields: dict[str, _Label]
    aircraft: dict[str, _Label]


def _names(result: StudyResult) -> _Names:
    return _Names(
        _labels([(f.name, f.id) for f in result.fields]),
        _labels([(a.name, a.id) for a in result.aircraft]),
    )


def _labels(called: Sequence[tuple[str, str]]) -> dict[str, _Label]:
    """Labels that stay apart in a terminal, which shows less than a name may hold."""
    names = [_plain(name) for name, _ in called]
    ids = [key for _, key in called]
    told = unique_labels(names, ids)
    return {
        key: _Label(name, "" if label == name else f"({key})")
        for key, name, label in zip(ids, names, told, strict=True)
    }


def columns(text: str) -> int:
    """Columns that a text takes in a terminal (Unicode Standard Annex 11: wide and fullwidth 2)."""
    return sum(_columns(character) for character in text)


def _columns(character: str) -> int:
    if unicodedata.category(character) in ("Mn", "Me"):
        return 0
    return 2 if unicodedata.east_asian_width(character) in "WF" else 1


def cut(text: str, width: int) -> str:
    """One clean line of a text, cut with an ellipsis where it is wider than `width` columns.

    Control, format and bidirectional characters are left out, line ends become spaces, and
    what no font has becomes a replacement character.
    """
    clean = _plain(text)
    # Marks that take no column of their own cannot make a line endless.
    if columns(clean) <= width and len(clean) <= 2 * width:
        return clean
    kept, used = "", 0
    for character in clean[: 2 * width]:
        used += _columns(character)
        if used > width - 1:
            break
        kept += character
    return kept.rstrip() + _ELLIPSIS


def _plain(text: str) -> str:
    return " ".join("".join(_cleaned(c) for c in text).split())


def _cleaned(character: str) -> str:
    category = unicodedata.category(character)
    if character.isspace() or category in ("Zl", "Zp"):
        return " "
    if category in ("Cs", "Co", "Cn"):
        return "\N{REPLACEMENT CHARACTER}"
    return "" if category[0] == "C" else character


def _listed(labels: Sequence[tuple[_Label, str]], width: int) -> str:
    """As many labels with what follows each as fit, then how many more; at least one."""
    for shown in range(len(labels), 0, -1):
        more = f" and {len(labels) - shown} more" if shown < len(labels) else ""
        text = (
            ", ".join(label.within(30 + columns(end), end) for label, end in labels[:shown]) + more
        )
        if columns(text) <= width:
            return text
    label, end = labels[0]
    return label.within(width - len(more), end) + more


def _counted(number: int, word: str) -> str:
    return f"{grouped(number)} {word}{'' if number == 1 else 's'}"


# Aircraft


def _worst_cells(result: StudyResult) -> pd.DataFrame:
    """The worst months, each of another field, of the aircraft that are shown; worst first."""
    risk = result.risk_monthly
    known = risk[risk["shortfall"] > 0]
    ordered = known.sort_values("shortfall", ascending=False, kind="stable")
    distinct = ordered.drop_duplicates(["aircraft", "field"]).groupby("aircraft")
    cells = distinct.head(_WORST_FIELDS.get(len(result.aircraft), 1))
    shown = cells["aircraft"].drop_duplicates().head(_MOST_AIRCRAFT)
    return cells[cells["aircraft"].isin(shown)]


def _aircraft_lines(result: StudyResult, names: _Names) -> list[str]:
    worst = _worst_cells(result)
    shown = result.aircraft
    if len(shown) > _MOST_AIRCRAFT:
        first = [*dict.fromkeys(worst["aircraft"]), *(a.id for a in shown)]
        kept = list(dict.fromkeys(first))[:_MOST_AIRCRAFT]
        shown = tuple(a for a in shown if a.id in kept)
    lines = []
    for profile in shown:
        risk = result.risk_monthly[result.risk_monthly["aircraft"] == profile.id]
        scaled = " (scaled, no table)" if profile.is_scaled else ""
        head = names.aircraft[profile.id].within(40, scaled) + ": "
        if not risk["shortfall"].notna().any():
            lines.append(f"{head}no data at any field")
            continue
        lines.append(head + _usable_text(result, risk, names, WIDTH - columns(head)))
        cells = worst[worst["aircraft"] == profile.id]
        lines += [_cell_line(cell, risk, names) for cell in cells.itertuples()]
        if cells.empty:
            lines.append("  no hour falls short where there are data")
    if more := len(result.aircraft) - len(shown):
        lines.append(f"{more} aircraft more: see the map.")
    return lines


def _steep(result: StudyResult) -> list[str]:
    """Fields with a runway that needs a procedure of its own: no figure there is a pass."""
    return [field.id for field in result.fields if field.is_steep]


def _steep_lines(result: StudyResult) -> list[str]:
    steep = len(_steep(result))
    if not steep:
        return []
    need = "needs a procedure of its own" if steep == 1 else "need a procedure of their own"
    return [f"{_counted(steep, 'steep field')} {need}: no figure there is a pass."]


def _usable_text(result: StudyResult, risk: pd.DataFrame, names: _Names, width: int) -> str:
    """Where the share of every month of the year is known and in the lowest band."""
    edges = result.settings["bands"]
    months = risk.groupby("field", sort=False)["shortfall"]
    good = (months.count() == len(MONTH_NAMES)) & (months.max() < edges[0])
    steep = set(_steep(result))
    ids = [field for field, usable in good.items() if usable and field not in steep]
    text = f"{band_labels(edges)[0]} all year at "
    if ids and len(ids) == len(result.fields) - len(steep):
        others = " not steep" if steep else ""
        return f"{text}all {_counted(len(ids), 'field')}{others}"
    labels = [(names.fields[str(i)], "") for i in ids]
    return text + (_listed(labels, width - len(text)) if ids else "no field")


def _cell_line(cell, risk: pd.DataFrame, names: _Names) -> str:
    own = risk[risk["field"] == cell.field].set_index("month")["shortfall"]
    months = worst_months(own.reindex(range(1, len(MONTH_NAMES) + 1)).tolist())
    equal = risk[(risk["field"] == cell.field) & risk["month"].isin([m + 1 for m in months])]
    when = MONTH_NAMES[months[0]] if len(months) == 1 else short_months(months)
    limits = list(dict.fromkeys(text for text in equal["limiting"] if text))
    start = f"  {share_text(cell.shortfall):>6}  {_sure(equal):<15} {when} at "
    end = f": {limits[0] if len(limits) == 1 else 'several checks'}" if limits else ""
    return start + names.fields[cell.field].within(WIDTH - len(start + end)) + end


def _sure(equal: pd.DataFrame) -> str:
    """The widest interval of the worst months, or why there is none."""
    low, high = (equal[end].to_numpy(dtype=float) for end in ("ci_low", "ci_high"))
    interval = interval_text(float(low.min()), float(high.max()))
    if interval != "none":
        return f"({interval})"
    return "(too few years)" if equal["n_years"].min() < YEARS.interval else "(no interval)"


# Planning answers


def _base_lines(result: StudyResult, names: _Names) -> list[str]:
    """The best base for the fleet, its hours and how far the next one is behind."""
    fleet = result.bases[result.bases["aircraft"] == ""]
    ranked = fleet[fleet["rank"].notna()].sort_values("rank", kind="stable")
    if ranked.empty:
        told = "no field has figures in every month"
        return [] if fleet.empty else [f"Best base for the fleet: none, {told}."]
    best = ranked.iloc[0]
    end = f"{_steep_tail(result, best)}: {_hours(best['usable_hours_month'])} a month,"
    start = "Best base for the fleet: "
    lines = [start + names.fields[best["field"]].within(WIDTH - len(start + end)) + end]
    second = f"  {_hours_interval(result, best)}"
    behind = ranked["usable_hours_month"] < best["usable_hours_month"]
    if behind.any():
        other = ranked[behind].iloc[0]
        gap = float(best["usable_hours_month"] - other["usable_hours_month"])
        end = f"{_steep_tail(result, other)}, {gap_text(gap)} fewer"
        second += "; next "
        second += names.fields[other["field"]].within(WIDTH - len(second + end) - 1) + end
    return [*lines, f"{second}."]


def _steep_tail(result: StudyResult, row: pd.Series) -> str:
    return STEEP_TAIL if row["field"] in _steep(result) else ""


def _hours(hours: float) -> str:
    return f"{grouped(whole_down(hours))} h"


def _hours_interval(result: StudyResult, row: pd.Series) -> str:
    if pd.isna(row["ci_low"]) or pd.isna(row["ci_high"]):
        return "too few years for an interval"
    ends = hours_interval(float(row["ci_low"]), float(row["ci_high"]))
    return f"{result.settings['confidence'] * 100:.4g} %: {ends} h"


def _weight_lines(result: StudyResult, names: _Names) -> list[str]:
    """Where least weight holds: what cannot be met, else the least part of a full load."""
    weights = result.weights_monthly
    if weights.empty:
        return []
    often = share_text(float(weights["holds_in"].iloc[0]))
    start = f"Least weight in {often} of hours: "
    unmet = weights[weights["outcome"] == LOAD_LABELS[-1]]
    known = weights[weights["useful_load_kg"].notna()]
    if not unmet.empty:
        row = unmet.loc[unmet["never_met"].idxmax()]
        load = LOAD_LABELS[-1]
    elif not known.empty:
        full = {a.id: a.maximum_kg - a.empty_kg for a in result.aircraft}
        row = known.loc[(known["useful_load_kg"] / known["aircraft"].map(full)).idxmin()]
        most = grouped(whole_down(full[row["aircraft"]]))
        load = f"load {grouped(whole_down(row['useful_load_kg']))} of {most} kg"
        if (known["outcome"] == "maximum mass").all():
            return [f"{start}the maximum mass wherever there are data."]
    else:
        return [f"{start}no data. That does not mean no risk."]
    start += f"{load}, {MONTH_NAMES[int(row['month']) - 1]},"
    # The names stand in a line of their own: both are told as whole as they can be.
    plane = names.aircraft[row["aircraft"]].within(WIDTH // 2 - 4)
    field = names.fields[row["field"]].within(WIDTH - columns(plane) - 5)
    return [start, f"  {field}: {plane}."]


def _schedule_lines(
    flights: pd.DataFrame | None, seasons: pd.DataFrame | None, confidence: float
) -> list[str]:
    """What the schedule comes to, in three lines at most."""
    words = schedule_words(flights, seasons, confidence)
    if not words:
        return []
    line = f"Schedule: {' '.join(words)}"
    return textwrap.wrap(
        line, WIDTH, subsequent_indent="  ", max_lines=3, placeholder=" \N{HORIZONTAL ELLIPSIS}"
    )


# Data


def _data_lines(result: StudyResult, names: _Names) -> list[str]:
    known = result.risk_hourly["shortfall"].notna()
    cells, have = len(known), int(known.sum())
    line = f"Data: {grouped(have)} of {grouped(cells)} month x hour cells"
    line += _years_text(result) if have else ""
    line += f"; {grouped(cells - have)} empty." if have < cells else "."
    lines = textwrap.wrap(line, WIDTH, subsequent_indent="  ")
    by_aircraft = result.risk_monthly.groupby(["field", "aircraft"])["shortfall"].count()
    least = by_aircraft.groupby("field").min()
    most = by_aircraft.groupby("field").max()
    months = {f.id: (int(least.get(f.id, 0)), int(most.get(f.id, 0))) for f in result.fields}
    empty = [(names.fields[key], "") for key, (_, top) in months.items() if not top]
    if empty:
        end = ". That does not mean no risk."
        start = "No data at all: "
        lines.append(start + _listed(empty, WIDTH - len(start + end)) + end)
    part = [
        (names.fields[key], f" ({low} of {len(MONTH_NAMES)})")
        for key, (low, top) in months.items()
        if top and low < len(MONTH_NAMES)
    ]
    if part:
        start = "Some months only: "
        lines.append(start + _listed(part, WIDTH - len(start) - 1) + ".")
    return lines


def _years_text(result: StudyResult) -> str:
    """The years behind the cells with figures, of those of the study's period."""
    risk = result.risk_hourly
    years = risk["n_years"][risk["shortfall"].notna()]
    least, most = math.floor(years.min()), math.floor(years.max())
    period = int(result.settings["last_year"]) - int(result.settings["first_year"]) + 1
    if least == most == period:
        return f", from all {_counted(period, 'year')}" if period > 1 else ", from its one year"
    span = _counted(most, "year") if least == most else f"{least} to {_counted(most, 'year')}"
    return f", from {span} of the {period}"


# Findings


def _finding_lines(findings: Iterable[Finding]) -> list[str]:
    """How many of each kind; the run has told the serious ones on its other stream."""
    told = list(findings)
    counts = {s: sum(f.severity == s for f in told) for s in _WORDS}
    words = [_counted(n, _WORDS[s]) for s, n in counts.items() if n]
    return [f"Findings, all in study.json: {', '.join(words)}." if words else "Findings: none."]


# Files


def bases_lines(result: StudyResult, folder: Path, files: Sequence[Path]) -> list[str]:
    """What `climarisk bases` ends with: the best base and where the files are.

    Parameters
    ----------
    result : StudyResult
    folder : Path
    files : sequence of Path
    """
    return [*_base_lines(result, _names(result)), *_file_lines(folder, files)]


def schedule_lines(
    frames: Mapping[str, pd.DataFrame], confidence: float, folder: Path, files: Sequence[Path]
) -> list[str]:
    """What `climarisk schedule` ends with: how many fall short and where the files are.

    Parameters
    ----------
    frames : mapping of str to DataFrame
        ``schedule_flights``, ``schedule_seasons``.
    confidence : float
    folder : Path
    files : sequence of Path
    """
    flights, seasons = frames["schedule_flights"], frames["schedule_seasons"]
    return [*_schedule_lines(flights, seasons, confidence), *_file_lines(folder, files)]


def _file_lines(folder: Path, files: Sequence[Path]) -> list[str]:
    names = [path.name for path in files]
    parts = [f"{name} ({what})" for name, what in _FOR_PEOPLE.items() if name in names]
    tables = sum(name.endswith(".csv") for name in names)
    parts += [_counted(tables, "CSV table")] if tables else []
    first = f"Map: {folder / _MAP}" if _MAP in names else f"Files: {folder}"
    beside = textwrap.wrap(f"Beside it: {', '.join(parts)}.", WIDTH, subsequent_indent="  ")
    return [first, *beside] if parts else [first]
