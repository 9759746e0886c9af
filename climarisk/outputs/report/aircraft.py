"""The page of one aircraft: what its figures are, its shares in a table and as charts."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from climarisk.aircraft import AircraftProfile, PerformanceTable
from climarisk.outputs.report.charts import share_chart, share_top
from climarisk.outputs.report.data import N_MONTHS, ranked, worst
from climarisk.outputs.report.key import band_key, chart_card
from climarisk.outputs.report.tables import Sheet, shortfall_tables
from climarisk.outputs.report.words import Html, count_text, el, given, isolated, unbroken
from climarisk.outputs.report.worst import Worst, worst_of
from climarisk.outputs.texts import NO_DATA, band_labels, grouped, months_text, share_text

#: So many charts find room; the tables hold every field.
MOST_CHARTS = 12
#: Single figures of a profile that stand in for the table of an operation.
_SINGLE = {
    "takeoff": ("takeoff_ground_roll_m", "takeoff_distance_50ft_m"),
    "landing": ("landing_distance_50ft_m",),
    "climb": ("climb_rate_ft_min",),
}


def aircraft_sections(sheet: Sheet) -> list[Html]:
    """A section for each aircraft."""
    return [_section(sheet, a) for a in range(len(sheet.result.aircraft))]


def _section(sheet: Sheet, aircraft: int) -> Html:
    profile = sheet.result.aircraft[aircraft]
    order = ranked(sheet.figures.shares[:, aircraft]).tolist()
    title = f"Aircraft {aircraft + 1} of {len(sheet.result.aircraft)}"
    scaled = el("span", "scaled, no table", class_="mark") if profile.is_scaled else None
    said = [
        el("li", el("b", f.severity), ": ", given(f.message))
        for f in sheet.result.findings
        if f.subject == "aircraft" and f.id == profile.id
    ]
    return el(
        "section",
        el("p", title, class_="kicker"),
        el("h2", given(sheet.aircraft[aircraft]), " " if scaled else None, scaled),
        _facts(profile),
        el("ul", said, class_="said") if said else None,
        el("p", summary(sheet, aircraft), class_="lead"),
        band_key(sheet),
        shortfall_tables(sheet, aircraft, order),
        _charts(sheet, aircraft, order),
        class_="sheet",
        id=f"aircraft-{aircraft + 1}",
    )


def summary(sheet: Sheet, aircraft: int) -> list[object]:
    """The worst month of an aircraft and how many fields it can use all year, in two sentences."""
    shares = sheet.figures.shares[:, aircraft]
    order = ranked(shares)
    there = worst_of(sheet.figures, int(order[0]), aircraft) if len(order) else None
    if there is None:
        return ["There is no data for this aircraft at any field: this does not mean no risk."]
    if there.share == 0.0:
        first: list[object] = ["No hour with data falls short at any field."]
    else:
        few = there.interval.startswith("too")
        first = [
            "Worst: ",
            el("b", given(sheet.fields[int(order[0])]), f" in {_when(there)}"),
            ", ",
            unbroken(share_text(there.share)),
            " of the hours fall short (",
            f"{there.interval} for an interval" if few else unbroken(there.interval),
            ")",
            f", limited most often by {' or '.join(there.limits)}." if there.limits else ".",
        ]
    return [*first, " ", *_all_year(sheet, shares)]


def _when(there: Worst) -> str:
    return months_text(there.months)


def _all_year(sheet: Sheet, shares: np.ndarray) -> list[object]:
    """How many fields stay in the lowest band all year; a steep one is never counted as such."""
    highest = np.where(np.isnan(shares), -1.0, shares).max(axis=1)
    gaps = np.isnan(shares).any(axis=1)
    steep = np.array([field.is_steep for field in sheet.result.fields])
    low = int(((highest >= 0.0) & (highest < sheet.edges[0]) & ~gaps & ~steep).sum())
    part = int((gaps & (highest >= 0.0)).sum())
    none = int((highest < 0.0).sum())
    many = f"{grouped(low)} of {count_text(len(shares), 'field')}" if low else "No field"
    verb = "stay" if low > 1 else "stays"
    rest = " in every month"
    if steep.any():
        ones = count_text(int(steep.sum()), "steep one needs", "steep ones need")
        rest += f"; {ones} a procedure of {'its' if steep.sum() == 1 else 'their'} own"
    if part:
        rest += f"; {count_text(part, 'field')} {'lacks' if part == 1 else 'lack'} some months"
    rest += f"; {count_text(none, 'field')} without data." if none else "."
    return [f"{many} {verb} at ", unbroken(band_labels(sheet.edges)[0]), rest]


# Facts


def _facts(profile: AircraftProfile) -> Html:
    facts = [
        ("Figures from", given(profile.source) if profile.source else "not stated"),
        ("Mass", _masses(profile)),
        ("Take-off", _figures(profile, "takeoff", f"factor {profile.takeoff_factor:g}")),
        ("Landing", _figures(profile, "landing", f"factor {profile.landing_factor:g}")),
        ("Climb", _figures(profile, "climb", _climb_asked(profile))),
        ("Limits", _limits(profile)),
        ("Engine", f"{profile.aspiration}, {'with' if profile.carburettor else 'no'} carburettor"),
    ]
    return el("dl", [el("div", el("dt", k), el("dd", v)) for k, v in facts], class_="facts")


def _masses(profile: AircraftProfile) -> str:
    planned, most, empty = (
        _kg(m) for m in (profile.planning_kg, profile.maximum_kg, profile.empty_kg)
    )
    return f"planned {planned}; maximum {most}, empty {empty}"


def _kg(mass: float) -> str:
    return f"{grouped(round(mass))}\N{NO-BREAK SPACE}kg"


def _figures(profile: AircraftProfile, operation: str, policy: str) -> str:
    tables: tuple[PerformanceTable, ...] = getattr(profile, operation)
    if tables:
        masses = ", ".join(grouped(round(t.mass_kg)) for t in tables)
        feet = min(float(t.pressure_altitude_ft[-1]) for t in tables)
        warm = min(float(t.temperature_c[-1]) for t in tables)
        up_to = f"up to {grouped(math.floor(feet))} ft and {warm:g}\N{NO-BREAK SPACE}°C"
        return f"{policy}; table at {masses} kg, {up_to}"
    single = any(getattr(profile.scaled, name, None) for name in _SINGLE[operation])
    rest = "no table, scaled from a sea-level figure" if single else "no figures, not checked"
    return f"{policy}; {rest}"


def _climb_asked(profile: AircraftProfile) -> str:
    asked = []
    if profile.climb_rate_ft_min is not None:
        asked.append(f"{grouped(math.ceil(profile.climb_rate_ft_min))} ft/min")
    if profile.climb_gradient_pct is not None:
        asked.append(f"{profile.climb_gradient_pct:g} %")
    return f"asked {' and '.join(asked)}" if asked else "nothing asked"


def _limits(profile: AircraftProfile) -> str:
    limits = []
    if profile.limit_temperature_c is not None:
        limits.append(f"{profile.limit_temperature_c:g} °C")
    if profile.limit_density_altitude_ft is not None:
        feet = grouped(math.floor(profile.limit_density_altitude_ft))
        limits.append(f"density altitude {feet} ft")
    return ", ".join(limits) or "none stated"


# Charts


def _charts(sheet: Sheet, aircraft: int, order: Sequence[int]) -> list[Html]:
    figures = sheet.figures
    known = [f for f in order if worst(figures.shares[f, aircraft]) is not None]
    shown = known[:MOST_CHARTS]
    if not shown:
        return []
    parts = [figures.risk[c][:, aircraft, :N_MONTHS] for c in ("shortfall", "ci_low", "ci_high")]
    top = share_top(np.fmax(parts[0], parts[2])[shown])
    cards = []
    for f in shown:
        name = isolated(sheet.fields[f])
        worst_there = worst_of(figures, f, aircraft)
        highest = worst_there and f"{share_text(worst_there.share)} in {_when(worst_there)}"
        title = f"{name}: share of hours short by month, highest {highest}"
        picture = share_chart(tuple(p[f] for p in parts), sheet.edges, top, title)
        cards.append(chart_card(sheet, f, picture))
    return [
        el("h3", "Month by month"),
        el(
            "p",
            f"Per cent of hours that fall short; lines: {sheet.confidence} intervals; all charts"
            f" share one scale; crosses: {NO_DATA}. ",
            limit_sentence(len(shown), len(order), "worst"),
            class_="quiet",
        ),
        el("div", cards, class_="cards small"),
    ]


def limit_sentence(shown: int, fields: int, which: str) -> str | None:
    """Says so where not every field has its chart."""
    if shown >= fields:
        return None
    if shown < MOST_CHARTS:
        return f"Fields without data have no chart; the table holds all {grouped(fields)}."
    return f"Shown are the {shown} {which} of {count_text(fields, 'field')}; the table holds all."
