"""The pages of the air: density altitude, humidity and what they do to engines."""

from __future__ import annotations

import numpy as np

from climarisk.outputs.report.aircraft import MOST_CHARTS, limit_sentence
from climarisk.outputs.report.charts import air_chart, feet_scale
from climarisk.outputs.report.data import N_MONTHS, PERCENTILES, ranked, worst
from climarisk.outputs.report.key import chart_card, gap_words
from climarisk.outputs.report.planning import icing_tables, power_tables
from climarisk.outputs.report.tables import (
    Sheet,
    altitude_tables,
    gaps,
    humidity_tables,
    saturation_tables,
)
from climarisk.outputs.report.words import Html, el, elevation_text, given, isolated
from climarisk.outputs.texts import MONTH_NAMES, NO_DATA, altitude_text
from climarisk.units import METRES_PER_FOOT


def air_section(sheet: Sheet) -> Html:
    """Charts of the highest fields by density altitude, and the tables of all."""
    high = sheet.figures.altitude["p90"][:, :N_MONTHS]
    order = ranked(high).tolist()
    return el(
        "section",
        el("p", "The air", class_="kicker"),
        el("h2", "Density altitude and humidity"),
        el("p", _lead(sheet, high, order), class_="lead"),
        _charts(sheet, order),
        el("p", f"{gap_words()}.", class_="quiet") if _lacks_months(sheet) else None,
        altitude_tables(sheet, order),
        humidity_tables(sheet, order),
        saturation_tables(sheet, order),
        icing_tables(sheet, order),
        power_tables(sheet, order),
        class_="sheet",
        id="air",
    )


def _lacks_months(sheet: Sheet) -> bool:
    figures = sheet.figures
    shown = figures.altitude["p90"], figures.humidity["p50"], figures.saturation["share_2_5k"]
    return gaps(figures, *shown)


def _lead(sheet: Sheet, high: np.ndarray, order: list[int]) -> list[object]:
    month = worst(high[order[0]]) if order else None
    if month is None:
        return ["There is no density altitude for any field: this does not mean no risk."]
    field = sheet.result.fields[order[0]]
    return [
        "Highest: ",
        el("b", given(sheet.fields[order[0]]), f" in {MONTH_NAMES[month]}"),
        f", where one hour in ten exceeds {altitude_text(float(high[order[0], month]))} at an "
        f"elevation of {elevation_text(field.elevation_m)}. Fields are ranked by the highest "
        "90th percentile of a month.",
    ]


def _charts(sheet: Sheet, order: list[int]) -> list[Html]:
    figures = sheet.figures
    feet = [figures.altitude[p][:, :N_MONTHS] for p in PERCENTILES]
    humid = [figures.humidity[p][:, :N_MONTHS] for p in PERCENTILES]
    shown = [f for f in order if worst(feet[2][f]) is not None][:MOST_CHARTS]
    if not shown:
        return []
    ground = np.array([f.elevation_m / METRES_PER_FOOT for f in sheet.result.fields])
    steps = feet_scale(*(values[shown] for values in feet), ground[shown])
    cards = []
    for f in shown:
        top = worst(feet[2][f]) or 0  # every field shown has one
        title = (
            f"{isolated(sheet.fields[f])}: density altitude and relative humidity by month, "
            f"highest 90th percentile {altitude_text(float(feet[2][f][top]))} in {MONTH_NAMES[top]}"
        )
        own = ([v[f] for v in feet], [v[f] for v in humid])
        cards.append(chart_card(sheet, f, air_chart(*own, float(ground[f]), steps, title)))
    return [
        el(
            "p",
            "Band: 10th to 90th percentile; line: median; dashes: the field’s elevation. Above "
            "density altitude, below relative humidity; all charts share their scales; "
            f"crosses: {NO_DATA}. ",
            limit_sentence(len(shown), len(order), "highest"),
            class_="quiet",
        ),
        el("div", cards, class_="cards"),
    ]
