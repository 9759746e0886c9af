"""What a run says at its end: the worst cells, what lacks data, the findings, where the files are.

Plain text in lines of 80 columns.  Names from files are cleaned and cut here; what else a
console may take for a command is for the caller to escape.
"""

from __future__ import annotations

import unicodedata
from collections.abc import Iterable, Sequence
from pathlib import Path

import pandas as pd

from climarisk.findings import Finding, sort_findings
from climarisk.outputs.texts import (
    MONTH_NAMES,
    band_labels,
    grouped,
    interval_text,
    share_text,
    window_text,
)
from climarisk.results import StudyResult

WIDTH = 80
#: Fields shown of each aircraft by the number of aircraft, one among more.
_WORST_FIELDS = {1: 3, 2: 3, 3: 2}
_MOST_AIRCRAFT = 5
_MOST_FINDINGS = 3
#: A name is never cut below this width.
_LEAST_NAME = 12
_ELLIPSIS = "\N{HORIZONTAL ELLIPSIS}"
_WORDS = {"reject": "rejection", "caution": "caution", "note": "note"}
#: What the files made for people are; every other file is a table.
_FOR_PEOPLE = {"tables.xlsx": "workbook", "report.html": "to print"}
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
        About 18 lines of at most 80 columns; only the path of the folder is never cut.
    """
    worst = _worst_cells(result)
    settings = result.settings
    about = (
        f": {len(result.fields)} fields x {len(result.aircraft)} aircraft, "
        f"{settings['first_year']}-{settings['last_year']}, {window_text(settings['window'])}"
    )
    sure = f"{settings['confidence'] * 100:.4g}"
    return [
        cut(result.title, max(_LEAST_NAME, WIDTH - columns(about))) + about,
        f"Share of hours that fall short ({sure} % interval), worst month of the worst fields:",
        *_aircraft_lines(result, worst),
        *_data_lines(result),
        *_finding_lines(result.findings, worst),
        *_file_lines(folder, files),
    ]


# Names


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
    clean = " ".join("".join(_cleaned(c) for c in text).split())
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


def _cleaned(character: str) -> str:
    category = unicodedata.category(character)
    if character.isspace() or category in ("Zl", "Zp"):
        return " "
    if category in ("Cs", "Co", "Cn"):
        return "\N{REPLACEMENT CHARACTER}"
    return "" if category[0] == "C" else character


def _listed(names: Sequence[str], width: int) -> str:
    """As many names as fit, then how many more there are; at least one."""
    for shown in range(len(names), 0, -1):
        more = f" and {len(names) - shown} more" if shown < len(names) else ""
        text = ", ".join(cut(name, 30) for name in names[:shown]) + more
        if columns(text) <= width:
            return text
    return cut(names[0], max(_LEAST_NAME, width - len(more))) + more


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


def _aircraft_lines(result: StudyResult, worst: pd.DataFrame) -> list[str]:
    names = {field.id: field.name for field in result.fields}
    shown = result.aircraft
    if len(shown) > _MOST_AIRCRAFT:
        first = [*dict.fromkeys(worst["aircraft"]), *(a.id for a in shown)]
        kept = list(dict.fromkeys(first))[:_MOST_AIRCRAFT]
        shown = tuple(a for a in shown if a.id in kept)
    lines = []
    for profile in shown:
        risk = result.risk_monthly[result.risk_monthly["aircraft"] == profile.id]
        scaled = " (scaled, no table)" if profile.is_scaled else ""
        head = cut(profile.name, 40 - len(scaled)) + scaled + ": "
        if not risk["shortfall"].notna().any():
            lines.append(f"{head}no data at any field")
            continue
        lines.append(head + _usable_text(result, risk, names, WIDTH - columns(head)))
        cells = worst[worst["aircraft"] == profile.id]
        lines += [_cell_line(cell, names) for cell in cells.itertuples()]
        if cells.empty:
            lines.append("  no hour falls short where there are data")
    if more := len(result.aircraft) - len(shown):
        lines.append(f"{more} aircraft more: see the map.")
    return lines


def _usable_text(result: StudyResult, risk: pd.DataFrame, names: dict[str, str], width: int) -> str:
    """Where the share of every month of the year is known and in the lowest band."""
    edges = result.settings["bands"]
    months = risk.groupby("field", sort=False)["shortfall"]
    good = (months.count() == len(MONTH_NAMES)) & (months.max() < edges[0])
    ids = [field for field, usable in good.items() if usable]
    text = f"{band_labels(edges)[0]} all year at "
    if len(ids) == len(names):
        return f"{text}all {_counted(len(ids), 'field')}"
    return text + (_listed([names[i] for i in ids], width - len(text)) if ids else "no field")


def _cell_line(cell, names: dict[str, str]) -> str:
    interval = interval_text(cell.ci_low, cell.ci_high)
    sure = "(no interval)" if interval == "none" else f"({interval})"
    when = MONTH_NAMES[cell.month - 1]
    start = f"  {share_text(cell.shortfall):>6}  {sure:<13} {when} at "
    end = f": {cell.limiting}" if cell.limiting else ""
    return start + cut(names[cell.field], max(_LEAST_NAME, WIDTH - len(start + end))) + end


# Data


def _data_lines(result: StudyResult) -> list[str]:
    known = result.risk_hourly["shortfall"].notna()
    cells, have = len(known), int(known.sum())
    line = f"Data: {grouped(have)} of {grouped(cells)} month x hour cells have figures"
    lines = [f"{line}; {grouped(cells - have)} have none." if have < cells else f"{line}."]
    counts = result.risk_monthly.groupby("field", sort=False)["shortfall"].count()
    empty = [field.name for field in result.fields if not counts.get(field.id, 0)]
    if empty:
        end = ". That does not mean no risk."
        start = "No data at all: "
        lines.append(start + _listed(empty, WIDTH - len(start + end)) + end)
    return lines


# Findings


def _finding_lines(findings: Iterable[Finding], worst: pd.DataFrame) -> list[str]:
    told = sort_findings(findings)
    if not told:
        return ["Findings: none."]
    counts = {s: sum(f.severity == s for f in told) for s in _WORDS}
    words = [_counted(n, _WORDS[s]) for s, n in counts.items() if n]
    serious = [f for f in told if f.severity != "note"]
    concerned = {*worst["field"], *worst["aircraft"]}
    order = {"reject": 0, "caution": 1}
    serious.sort(key=lambda f: (order[f.severity], f.id not in concerned))
    # One line for each kind: forty stations refused for one reason would hide the rest.
    kinds: dict[tuple[str, str], list[Finding]] = {}
    for finding in serious:
        kinds.setdefault((finding.severity, finding.check), []).append(finding)
    shown = list(kinds.values())[:_MOST_FINDINGS]
    head = f"Findings, all in study.json: {', '.join(words)}"
    return [head + ("; most serious:" if shown else "."), *map(_finding_line, shown)]


def _finding_line(alike: Sequence[Finding]) -> str:
    more = f" (and {len(alike) - 1} alike)" if len(alike) > 1 else ""
    return f"  {cut(str(alike[0]), WIDTH - 2 - len(more))}{more}"


# Files


def _file_lines(folder: Path, files: Sequence[Path]) -> list[str]:
    names = [path.name for path in files]
    parts = [f"{name} ({what})" for name, what in _FOR_PEOPLE.items() if name in names]
    tables = len([n for n in names if n != _MAP and n not in _FOR_PEOPLE])
    parts += [_counted(tables, "table")] if tables else []
    first = f"Map: {folder / _MAP}" if _MAP in names else f"Files: {folder}"
    return [first, f"Beside it: {', '.join(parts)}."] if parts else [first]
