"""The last pages: method, how sure the air is, stations, settings, findings and cautions."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from typing import Any

import pandas as pd

from climarisk.findings import Finding
from climarisk.outputs.report.tables import Sheet, sure_text
from climarisk.outputs.report.words import (
    Html,
    count_text,
    distance_text,
    el,
    error_text,
    given,
    height_text,
    join,
    own_share_text,
    scroll,
    unbroken,
)
from climarisk.outputs.texts import CAUTIONS, METHOD, NO_DATA, share_text, window_text
from climarisk.results import StudyResult


def sources_section(sheet: Sheet) -> Html:
    """Method, sources and cautions, whole."""
    result = sheet.result
    return el(
        "section",
        el("p", "Behind the figures", class_="kicker"),
        el("h2", "Method, sources and cautions"),
        el("h3", "Cautions"),
        el("ol", [el("li", text) for text in CAUTIONS], class_="prose"),
        el("h3", "How the figures come about"),
        el("ol", [el("li", text) for text in METHOD], class_="prose"),
        el("h3", "Settings"),
        _settings(result.settings),
        el("h3", "How sure the air of each field is"),
        _sureness(sheet),
        el("h3", "Stations"),
        _stations(sheet),
        el("h3", "Data and credits"),
        el("ul", [el("li", line) for line in _credits(result)], class_="prose"),
        el("h3", "Findings"),
        _findings(sheet),
        class_="sheet",
        id="sources",
    )


def _table(kind: str, caption: str, heads: Sequence[str], rows: Iterable[Html]) -> Html:
    head = el("tr", [el("th", text, scope="col") for text in heads])
    table = el(
        "table",
        el("caption", caption),
        el("thead", head),
        el("tbody", rows),
        class_=f"plain {kind}",
    )
    return scroll(table, caption)


def _field_cell(sheet: Sheet, place: int, rows: int = 1) -> Html:
    n = el("span", str(sheet.figures.numbers[place]), class_="no")
    span = {"rowspan": rows} if rows > 1 else {}
    scope = "rowgroup" if rows > 1 else "row"
    return el("th", n, " ", given(sheet.fields[place]), scope=scope, class_="place", **span)


def _settings(settings: Mapping[str, Any]) -> Html:
    items = [
        el("div", el("dt", given(str(name).replace("_", " "))), el("dd", given(_setting(name, v))))
        for name, v in settings.items()
    ]
    return el("dl", items, class_="facts")


def _setting(name: str, value: Any) -> str:
    if name == "window":
        return window_text(value)
    if isinstance(value, Mapping):
        return "; ".join(f"{key}: {_setting('', part)}" for key, part in value.items()) or "none"
    if isinstance(value, list | tuple):
        between = " to " if all(isinstance(part, str) for part in value) else ", "
        return between.join(_setting("", part) for part in value) or "none"
    if isinstance(value, bool):
        return "yes" if value else "no"
    return f"{value:g}" if isinstance(value, float) else str(value)


# How sure


def _sureness(sheet: Sheet) -> Html:
    result = sheet.result
    estimates = {str(row["field"]): row for row in result.estimates.to_dict("records")}
    pressure = _pressure(result)
    rows = []
    for f in sheet.figures.order.tolist():
        field = result.fields[f].id
        row = estimates.get(field)
        cells = [NO_DATA] * 4 if row is None else _sure_cells(row)
        cells.append(pressure.get(field, NO_DATA))
        rows.append(el("tr", _field_cell(sheet, f), [el("td", text) for text in cells]))
    heads = ("Field", "Air", "Stations", "Error learned from", "Pressure error", "Pressure from")
    caption = (
        "Errors are one standard deviation, in feet of density altitude; that of estimated air is "
        "the root sum of squares of temperature and pressure"
    )
    return _table("sureness", caption, heads, rows)


def _sure_cells(row: Mapping[str, Any]) -> list[str]:
    own, stations = float(row["own_station"]), int(row["stations"])
    if own <= 0.0 and not stations:
        return [NO_DATA, "none", "–", NO_DATA]
    hidden = int(row["verified_stations"])
    learned = f"{count_text(hidden, 'station')} hidden" if hidden else "planning values"
    return [
        sure_text(own, stations, float(row["transfer_error_ft"]), float(row["pressure_error_ft"])),
        str(stations) if stations else "own",
        learned if stations else "–",
        error_text(float(row["pressure_error_ft"])),
    ]


def _pressure(result: StudyResult) -> dict[str, Html]:
    texts: dict[str, list[Html]] = {}
    table = result.pressure_sources
    for field, source, share in zip(table["field"], table["source"], table["share"], strict=True):
        part = join([given(source), " ", own_share_text(float(share))])
        texts.setdefault(str(field), []).append(part)
    return {
        field: join([parts[0], *((", ", part) for part in parts[1:])])
        for field, parts in texts.items()
    }


# Stations


def _stations(sheet: Sheet) -> Html:
    by_field = {str(f): rows for f, rows in sheet.result.station_use.groupby("field", sort=False)}
    bodies = []
    for place in sheet.figures.order.tolist():
        used = by_field.get(sheet.result.fields[place].id)
        if used is None:
            cell = el("td", "no station could be used", colspan="8", class_="none")
            bodies.append(el("tr", _field_cell(sheet, place), cell))
            continue
        for n, row in enumerate(used.to_dict("records")):
            head = _field_cell(sheet, place, len(used)) if n == 0 else None
            bodies.append(el("tr", head, [el("td", cell) for cell in _station_cells(row)]))
    heads = (
        "Field",
        "Station",
        "Distance",
        "Field above it",
        "Record",
        "Coverage",
        "Share of hours",
        "Pressure",
        "Archive",
    )
    return _table("stations", "Stations used at each field", heads, bodies)


def _station_cells(row: Mapping[str, Any]) -> list[object]:
    name = row["station"] if pd.isna(row["name"]) or not row["name"] else row["name"]
    first, last = (str(row[end]) for end in ("first", "last"))
    return [
        join([given(name), " ", el("span", given(row["station"]), class_="id")]),
        distance_text(float(row["distance_km"])),
        height_text(float(row["height_difference_m"])),
        join([unbroken(first), " to ", unbroken(last)]) if first and last else NO_DATA,
        own_share_text(float(row["coverage"])),
        share_text(float(row["share_of_hours"])),
        given(row["pressure_kind"]),
        given(row["archive"]),
    ]


# Findings and credits


def _findings(sheet: Sheet) -> Html:
    findings = sheet.result.findings
    if not findings:
        return el("p", "None.")
    places = {field.id: place for place, field in enumerate(sheet.result.fields)}
    rows = [
        el(
            "tr",
            el("th", f.severity, scope="row"),
            el("td", _subject(sheet, places, f)),
            el("td", f.check),
            el("td", given(f.message)),
        )
        for f in findings
    ]
    caption = "What the quality control and the completeness rules say; reject: not used"
    return _table("findings", caption, ("Severity", "Of", "Check", "Finding"), rows)


def _subject(sheet: Sheet, places: Mapping[str, int], finding: Finding) -> list[object]:
    place = places.get(finding.id) if finding.subject == "field" else None
    if place is None:
        return [finding.subject, " ", given(finding.id)]
    number = f"field {sheet.figures.numbers[place]} "
    return [number, given(sheet.fields[place])]


def _credits(result: StudyResult) -> list[object]:
    lines: list[object] = [given(line) for line in result.attributions]
    if not lines:
        lines.append("No attribution was supplied with the data.")
    version = str(result.provenance.get("version", ""))
    return [
        *lines,
        "Colours: ColorBrewer 2.0, sequential scheme YlOrBr, by Cynthia Brewer and Mark "
        "Harrower, Pennsylvania State University.",
        join(["Made with climarisk ", given(version), ". The file study.json beside this report "
              "holds the inputs with their checksums, every setting and all findings; the CSV "
              "files hold every number unrounded, with trends and return levels."]),
    ]  # fmt: skip
