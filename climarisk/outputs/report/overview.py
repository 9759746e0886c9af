"""The first page: what the report answers, the matrix of fields and aircraft, a sketch."""

from __future__ import annotations

import numpy as np

from climarisk.outputs.report.aircraft import summary
from climarisk.outputs.report.charts import month_strip, strip_months
from climarisk.outputs.report.key import band_key, record_words
from climarisk.outputs.report.planning import PLANNING_ID
from climarisk.outputs.report.sketch import fields_sketch
from climarisk.outputs.report.tables import Sheet, overview_tables
from climarisk.outputs.report.words import Html, count_text, el, given, isolated
from climarisk.outputs.texts import (
    CAUTIONS,
    MONTHS,
    band_of,
    share_text,
    window_text,
)

#: Aircraft that find room beside each other in the matrix.
_BESIDE = 5


def overview_section(sheet: Sheet) -> Html:
    """The first page of the report."""
    result = sheet.result
    settings = result.settings
    years = f"{settings['first_year']} to {settings['last_year']}"
    facts = (
        f"Weather of {years}",
        f"hours: {window_text(settings['window'])}",
        count_text(len(result.fields), "field"),
        f"{len(result.aircraft)} aircraft",
    )
    return el(
        "section",
        el("p", "Seasonal report: density altitude, humidity and margins", class_="kicker"),
        el("h1", given(result.title)),
        el("p", " · ".join(facts), class_="facts-line"),
        el("p", el("b", "Caution. "), CAUTIONS[0], class_="caution"),
        el(
            "p",
            "In which months would the air of the past have left each aircraft short of runway, "
            "climb or a stated limit at each field, in how many of its hours, and because of "
            f"what? Every share is a share of the hours with data, {years}, and stands beside "
            "the interval and the source of the air that say how far to trust it.",
            class_="lead",
        ),
        el("div", _glance(sheet), _sketch(sheet), class_="two"),
        el("h2", "Where and when"),
        band_key(sheet, samples=True),
        el("p", record_words(sheet), class_="quiet"),
        overview_tables(sheet, _BESIDE, _strips(sheet), strip_months()),
        _contents(sheet),
        class_="sheet",
        id="overview",
    )


def _glance(sheet: Sheet) -> Html:
    items = [
        el("li", el("h3", given(name)), el("p", summary(sheet, a)))
        for a, name in enumerate(sheet.aircraft)
    ]
    return el("div", el("h2", "At a glance"), el("ul", items, class_="glance"))


def _sketch(sheet: Sheet) -> Html | None:
    fields = sheet.result.fields
    if not fields:
        return None
    highest = np.where(np.isnan(sheet.figures.shares), -1.0, sheet.figures.shares)
    shares = highest.reshape(len(fields), -1).max(axis=1, initial=-1.0)
    bands = [band_of(float(s), sheet.edges) if s >= 0 else -1 for s in shares]
    title = "Sketch of the fields; the table below lists them by the same numbers"
    sketch = fields_sketch(fields, sheet.figures.numbers.tolist(), bands, title)
    text = "Worst month of the worst aircraft. Numbers are those of the tables"
    more = "; where they would overlap, the worst fields keep theirs" if len(fields) > 12 else ""
    return el("figure", sketch, el("figcaption", f"{text}{more}."), class_="sketch-box")


def _strips(sheet: Sheet):
    def strip(field: int, aircraft: int) -> Html:
        shares = sheet.figures.shares[field, aircraft]
        words = ", ".join(
            f"{month} {share_text(share)}"
            for month, share in zip(MONTHS, shares.tolist(), strict=True)
        )
        return month_strip(shares, sheet.edges, words)

    return strip


def _contents(sheet: Sheet) -> Html:
    links = [
        el("li", el("a", isolated(name), href=f"#aircraft-{a + 1}"))
        for a, name in enumerate(sheet.aircraft)
    ]
    works = not (sheet.result.weights_monthly.empty and sheet.result.windows_monthly.empty)
    further = [("Weights and working hours", f"{PLANNING_ID}-1", works and bool(sheet.aircraft))]
    further.append(("Bases side by side", "bases", not sheet.result.bases.empty))
    flights = sheet.result.schedule_flights
    further.append(("Schedule", "schedule", flights is not None and not flights.empty))
    links += [el("li", el("a", text, href=f"#{to}")) for text, to, there in further if there]
    links.append(el("li", el("a", "Density altitude and humidity", href="#air")))
    links.append(el("li", el("a", "Method, sources and cautions", href="#sources")))
    return el("nav", "In this report: ", el("ol", links), class_="contents", aria_label="Contents")
