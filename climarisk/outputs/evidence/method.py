"""The method statement of an evidence: one page of HTML without a script, made to be printed."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from climarisk.aircraft import AircraftProfile
from climarisk.icing import chart_source, verified
from climarisk.outputs.evidence.sources import (
    DECISIONS,
    EQUATIONS,
    LIMITS,
    OTHER_FACTORS,
    RECALLED_BESIDES,
    SCALED,
    SENSITIVITY,
    surface_factors,
)
from climarisk.outputs.report.style import paper_page, style
from climarisk.outputs.report.words import Html, el, given, scroll
from climarisk.outputs.texts import CAUTIONS, METHOD, window_text
from climarisk.performance import SCALING
from climarisk.provenance import program_version
from climarisk.results import StudyResult
from climarisk.study import Study

#: Widths of the columns of the tables, which the report has not.
_WIDTHS = (
    ".equations thead th{width:15%}.equations thead th:nth-child(2){width:41%}"
    ".equations thead th:nth-child(3){width:24%}.equations thead th:nth-child(4){width:20%}"
    ".surfaces thead th{width:12%}.surfaces thead th:nth-child(n+4){width:32%}"
    ".factors thead th{width:25%}.factors thead th:nth-child(2){width:10%}"
    ".factors thead th:nth-child(3){width:45%}.factors thead th:nth-child(4){width:20%}"
    ".aircraft thead th{width:11%}.aircraft thead th:nth-child(1){width:20%}"
    ".aircraft thead th:nth-child(2){width:30%}.aircraft thead th:nth-child(n+5){width:10%}"
    ".tried thead th{width:20%}.tried thead th:nth-child(2){width:80%}"
)

_RECALLED_WORDS = (
    "The main figures and sources that are recalled and were not read; hold them against the "
    "documents before relying on them."
)


def method_page(study: Study, result: StudyResult) -> str:
    """The method statement of a study, the same text for the same study.

    Parameters
    ----------
    study : Study
    result : StudyResult
        Of that study.

    Returns
    -------
    str
        A complete HTML document that needs no other file, no network and no script.
    """
    sections = [_method(study), _figures(study), _data(study, result)]
    look = style(study.title, len(study.bands) + 1) + _WIDTHS
    return paper_page(f"Method: {study.title}", look, sections)


def _sheet(*content: object, name: str) -> Html:
    return el("section", *content, class_="sheet", id=name)


def _table(kind: str, caption: str, heads: Sequence[str], rows: Iterable[Sequence[object]]) -> Html:
    """A table whose first column heads its rows."""
    head = el("tr", [el("th", text, scope="col") for text in heads])
    body = [
        el("tr", el("th", row[0], scope="row"), [el("td", cell) for cell in row[1:]])
        for row in rows
    ]
    table = el(
        "table",
        el("caption", caption),
        el("thead", head),
        el("tbody", body),
        class_=f"plain {kind}",
    )
    return scroll(table, caption)


def _prose(texts: Iterable[object], tag: str = "ol") -> Html:
    return el(tag, [el("li", text) for text in texts], class_="prose")


def _method(study: Study) -> Html:
    """The question, the way the figures come about, the equations and the decisions."""
    period = f"{study.first_year}-{study.last_year}"
    return _sheet(
        el("p", "Method statement", class_="kicker"),
        el("h1", given(study.title)),
        el(
            "p",
            f"{period}; {len(study.fields)} fields, {len(study.aircraft)} aircraft, hours window: "
            f"{window_text(study.window)}; climarisk {program_version()}",
            class_="facts-line",
        ),
        el("p", CAUTIONS[0], class_="caution"),
        el("h2", "How the figures come about"),
        _prose(METHOD),
        el("h2", "Equations and their sources"),
        _table(
            "equations",
            "Every equation that shapes a figure, and how its source is known",
            ("Quantity", "Equation", "Source", "How it is known"),
            EQUATIONS,
        ),
        el("h2", "Decisions"),
        _prose(DECISIONS),
        name="method",
    )


def _figures(study: Study) -> Html:
    """Factors, aircraft figures, scaling, sensitivity."""
    return _sheet(
        el("p", "Factors and figures", class_="kicker"),
        el("h2", "What distances are multiplied by"),
        _table(
            "surfaces",
            "Factors of the surface, on every distance",
            ("Surface", "Take-off", "Landing", "Source", "How it is known"),
            [(s, f"{t:g}", f"{n:g}", *told) for s, t, n, *told in surface_factors()],
        ),
        _table(
            "factors",
            "Other factors",
            ("What", "Factor", "Source", "How it is known"),
            OTHER_FACTORS,
        ),
        el("h2", "Aircraft figures"),
        _table(
            "aircraft",
            "Where each aircraft's figures come from, as the study says; the masses in kg",
            ("Aircraft", "Source", "Figures", "Planning", "Maximum", "Take-off ×", "Landing ×"),
            [_aircraft_row(profile) for profile in study.aircraft],
        ),
        *_scaling(study.aircraft),
        el("h2", "Sensitivity (scenarios.csv)"),
        _table(
            "tried",
            "What each scenario changes; changes have intervals from the same resampled years",
            ("Scenario", "What it is"),
            SENSITIVITY,
        ),
        name="figures",
    )


def _aircraft_row(profile: AircraftProfile) -> Sequence[object]:
    return (
        [given(profile.name), " ", el("span", given(profile.id), class_="id")],
        given(profile.source),
        "partly scaled" if profile.is_scaled else "tables",
        f"{profile.planning_kg:g}",
        f"{profile.maximum_kg:g}",
        f"{profile.takeoff_factor:g}",
        f"{profile.landing_factor:g}",
    )


def _scaling(aircraft: Sequence[AircraftProfile]) -> list[Html]:
    """How profiles without tables are scaled, where there is one."""
    if not any(profile.is_scaled for profile in aircraft):
        return []
    rows = [
        (SCALED[name], f"-{density:g}", f"{mass:g}") for name, (density, mass) in SCALING.items()
    ]
    note = (
        "Exponents are engineering judgement between theory and the factors of published leaflets, "
        "no published table. Rate of climb falls in a straight line to the absolute ceiling. No "
        "credit is given for air denser than the standard at sea level, or for less mass."
    )
    heads = ("Quantity", "Exponent of density ratio", "Exponent of mass ratio")
    return [
        _table("scaling", "How single figures are scaled", heads, rows),
        el("p", note, class_="quiet"),
    ]


def _data(study: Study, result: StudyResult) -> Html:
    """The data, what is recalled, limits and cautions."""
    return _sheet(
        el("p", "Data and limits", class_="kicker"),
        el("h2", "Data"),
        _prose(
            [
                _weather_words(study),
                "coverage.csv tells how much of each station's record there is and how much of it "
                "counts; station_use.csv which stations each field's hours come from; study.json "
                "every finding of the quality control, with what was done about it.",
                *(given(line) for line in result.attributions),
            ],
            "ul",
        ),
        el("h2", "From memory"),
        el("p", _RECALLED_WORDS, class_="quiet"),
        _prose(_recalled(study, result), "ul"),
        el("h2", "Limits"),
        _prose(LIMITS),
        el("h2", "Cautions"),
        _prose(CAUTIONS),
        name="data",
    )


def _weather_words(study: Study) -> str:
    if study.source == "synthetic":
        return (
            f"The weather of this study is invented (seed {study.seed}): its figures say nothing "
            "of any real place."
        )
    if study.source == "meteostat":
        return (
            "The hours come from the online archive; inputs.csv holds a digest of the checked "
            "hours of each station, since the archive may revise its data."
        )
    return "The hours come from the archive files whose SHA-256 and size stand in inputs.csv."


def _recalled(study: Study, result: StudyResult) -> list[object]:
    """What is recalled and not read and shapes the figures most, in one place."""
    recalled: list[object] = [
        f"{name}: {source}." for name, _, source, known in EQUATIONS if "memory" in known
    ]
    recalled += [
        f"Factor of the surface “{surface}”: {source}."
        for surface, _, _, source, known in surface_factors()
        if "memory" in known
    ]
    recalled += RECALLED_BESIDES
    charted = len(result.icing_monthly) and study.planning.carburettor_icing == "chart"
    if charted and verified("chart") != "yes":
        recalled.append(["Carburettor-icing zones: ", chart_source()])
    return recalled
