"""The page of the bases: the fields ranked for the fleet, and what the best one is ahead by."""

from __future__ import annotations

from climarisk.fields import STEEP_SLOPE_PCT
from climarisk.outputs.bases_page import difference_sentence
from climarisk.outputs.bases_tables import (
    View,
    fleet_text,
    icing_words,
    interval_words,
    pairs_of,
    percent,
    ranking_table,
)
from climarisk.outputs.report.tables import Sheet
from climarisk.outputs.report.words import Html, el, isolated
from climarisk.outputs.texts import ICING_SERIOUS, NO_DATA, hours_text
from climarisk.rules import YEARS


def bases_section(sheet: Sheet) -> Html | None:
    """The page of the bases; None without any."""
    if sheet.result.bases.empty:
        return None
    view = View(sheet.result)
    run = int(view.planning["consecutive_hours"])
    return el(
        "section",
        el("p", "Bases side by side", class_="kicker"),
        el("h2", "Where the fleet could work most hours"),
        el("p", "Fleet: ", fleet_text(view), class_="facts-line"),
        el("p", _lead(view), class_="lead"),
        ranking_table(view, run),
        el("ul", [el("li", text) for text in _key(view, run)], class_="key"),
        class_="sheet",
        id="bases",
    )


def _lead(view: View) -> list[object]:
    ranked = view.ranked()
    if not ranked:
        return ["No field has a figure in every month: there is no ranking."]
    row = view.rows[ranked[0], ""]
    lead: list[object] = [
        el("b", view.called(ranked[0])),
        f" comes first: {hours_text(row['usable_hours_month'])} a month ({interval_words(row)}).",
    ]
    pairs = pairs_of(view)
    for first, second in zip(ranked[:3], ranked[1:3], strict=False):
        gap = pairs.get((first, second), {}).get("")
        if gap is not None:
            better, other = (view.told(str(gap[side])) for side in ("first", "second"))
            lead += [" ", difference_sentence(better, other, gap, view.confidence)]
    return lead


def _key(view: View, run: int) -> list[str]:
    years = YEARS.settled_interval
    few = any(0 < row["n_years"] < years for row in view.rows.values())
    items = [
        f"Usable hours: of the window, mean over the twelve months and the fleet; below them the "
        f"{percent(view.confidence)} interval (dark) and single years (pale).",
        f"Days with {run} h in a row: of the days known, inside the window.",
        f"A field with a month of {NO_DATA} has no rank: {NO_DATA} is not the same as no risk.",
        "Numbers here are ranks. Each aircraft, all differences: sheet “Bases” of the workbook.",
    ]
    steep = [view.names[field] for field in view.order if view.steep(field)]
    if steep:
        told = ", ".join(isolated(name) for name in steep)
        items.append(f"Steeper than {STEEP_SLOPE_PCT:g} %, no figure is a pass: {told}.")
    if few:
        items.append(f"* interval from fewer than {years} years.")
    if basis := icing_words(view):
        items.append(f"Carburettor icing {ICING_SERIOUS}: of the daylight hours; {basis}.")
    return items
