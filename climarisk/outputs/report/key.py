"""Legends and chart cards of the report."""

from __future__ import annotations

from climarisk.fields import STEEP_SLOPE_PCT
from climarisk.outputs.colours import NO_DATA_SHAPE, SHAPES
from climarisk.outputs.report.charts import band_sample
from climarisk.outputs.report.tables import (
    GAP_MARK,
    NO_INTERVAL_MARK,
    STEEP_MARK,
    Sheet,
    few_years,
    gaps,
    missing_intervals,
)
from climarisk.outputs.report.words import Html, el, given
from climarisk.outputs.report.worst import LOW_COVERAGE, low_coverage
from climarisk.outputs.texts import NO_DATA, band_labels
from climarisk.rules import YEARS


def band_key(sheet: Sheet, samples: bool = False) -> Html:
    """What the colours mean; with the bars of the strips and the shapes of the sketch too."""
    items = []
    for band, label in enumerate(band_labels(sheet.edges)):
        shape = SHAPES[min(band, len(SHAPES) - 1)]
        mark = (
            band_sample(band, len(sheet.edges), shape)
            if samples
            else el("span", class_=f"swatch b{band}")
        )
        items.append(el("li", mark, " ", label))
    mark = (
        band_sample(-1, len(sheet.edges), NO_DATA_SHAPE)
        if samples
        else el("span", class_="swatch none")
    )
    items.append(el("li", mark, f" {NO_DATA}: not the same as no risk"))
    if few_years(sheet.figures):
        items.append(el("li", f"* interval from fewer than {YEARS.settled_interval} years"))
    if not samples:
        items += _season_items(sheet)
    if any(field.is_steep for field in sheet.result.fields):
        items.append(steep_item())
    return el("ul", items, class_="key")


def steep_item() -> Html:
    """What the mark beside the name of a field means."""
    need = "needs a site-specific procedure, no figure is a pass"
    text = f" slope over {STEEP_SLOPE_PCT:g} %: {need}"
    return el("li", el("span", STEEP_MARK, class_="mark"), text)


def _season_items(sheet: Sheet) -> list[Html]:
    """What the marks in the cells of the seasons mean, where there are any."""
    items = []
    if missing_intervals(sheet.figures):
        few = f"fewer than {YEARS.interval} years"
        items.append(el("li", f"{NO_INTERVAL_MARK} below a season: no interval, from {few}"))
    if gaps(sheet.figures, sheet.figures.risk["shortfall"]):
        items.append(el("li", gap_words()))
    return items


def gap_words() -> str:
    """What the mark of a season that lacks a month means."""
    return f"{GAP_MARK} a month of this season has {NO_DATA}"


def record_words(sheet: Sheet) -> str:
    """What the years, the coverage and the errors told beside the figures are."""
    text = "Years: those with any hour that enters the month’s figures. "
    if low_coverage(sheet.figures):
        text += (
            "Coverage: the share of the period’s years and hours of the day with enough days to "
            f"count, told below {LOW_COVERAGE * 100:g} %. "
        )
    return (
        text + "Estimated: the errors of temperature and pressure together (root sum of squares)."
    )


def chart_card(sheet: Sheet, field: int, *pictures: Html) -> Html:
    """A chart with the number and the name of its field over it."""
    n = el("span", str(sheet.figures.numbers[field]), class_="no")
    name = el("span", given(sheet.fields[field]), class_="name")
    return el("figure", el("figcaption", n, " ", name), pictures, class_="card")
